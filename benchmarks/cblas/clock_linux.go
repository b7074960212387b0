package main

import (
	"time"

	"golang.org/x/sys/unix"
)

// clock returns the processor time of this process, which others on the
// machine do not add to.
func clock() time.Duration {
	var t unix.Timespec
	if err := unix.ClockGettime(unix.CLOCK_PROCESS_CPUTIME_ID, &t); err != nil {
		panic("cblas: no clock of processor time")
	}
	return time.Duration(t.Nano())
}
