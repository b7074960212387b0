//go:build !linux

package main

import "time"

var start = time.Now()

// clock returns the time on the wall.
func clock() time.Duration { return time.Since(start) }
