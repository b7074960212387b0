//go:build !amd64 || noasm

package linalg

import "unsafe"

// tiers returns the tiers that this process can use, worst first.
func tiers() []tier { return []tier{portable} }

func laneMask[T float](tier, int) unsafe.Pointer { return nil }

func run[T float](tier, *panel[T], int, bool) { panic("linalg: no kernel in this build") }

func transposeBlock[T float](dst []T, dstRow int, src []T, srcRow, rows, cols int) (r, c int) {
	return 0, 0
}

func runOuter(tier, *outer) { panic("linalg: no kernel in this build") }

func runLanes(tier, *lanesCall) { panic("linalg: no kernel in this build") }
