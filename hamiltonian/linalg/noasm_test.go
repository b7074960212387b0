//go:build noasm

package linalg

const noasm = true
