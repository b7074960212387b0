//go:build amd64 && !noasm

package linalg

import (
	"unsafe"

	"golang.org/x/sys/cpu"
)

// tiers returns the tiers that this process can use, worst first.
func tiers() []tier {
	list := []tier{portable}
	if cpu.X86.HasAVX2 && cpu.X86.HasFMA {
		list = append(list, avx2)
	}
	if cpu.X86.HasAVX512F {
		list = append(list, avx512)
	}
	return list
}

// Masks of the first n lanes start at [lanes-n] with AVX2, at [n] with AVX-512.
var (
	maskAVX2       = [8]int64{-1, -1, -1, -1}
	maskAVX2Single = [16]int32{-1, -1, -1, -1, -1, -1, -1, -1}
	maskAVX512     = [17]uint16{0, 1, 3, 7, 15, 31, 63, 127, 255, 511, 1023, 2047, 4095, 8191, 16383, 32767, 65535}
)

// laneMask returns the mask of the first n lanes of a vector.
func laneMask[T float](t tier, n int) unsafe.Pointer {
	switch {
	case t == avx512:
		return unsafe.Pointer(&maskAVX512[n])
	case lanes[T](t) == 4:
		return unsafe.Pointer(&maskAVX2[4-n])
	default:
		return unsafe.Pointer(&maskAVX2Single[8-n])
	}
}

// run calls the kernel for a number of vectors of columns, the last one masked
// if edge is set.
func run[T float](t tier, p *panel[T], vectors int, edge bool) {
	arg := (*byte)(unsafe.Pointer(p))
	which := vectors
	if edge {
		which = -vectors
	}
	if double := unsafe.Sizeof(p.alpha) == 8; double {
		if t == avx512 {
			runAVX512(arg, which)
		} else {
			runAVX2(arg, which)
		}
	} else {
		if t == avx512 {
			runAVX512Single(arg, which)
		} else {
			runAVX2Single(arg, which)
		}
	}
}

func runAVX512(p *byte, which int) {
	switch which {
	case 3:
		panel3AVX512(p)
	case 2:
		panel2AVX512(p)
	case 1:
		panel1AVX512(p)
	case -1:
		edge1AVX512(p)
	case -2:
		edge2AVX512(p)
	case -3:
		edge3AVX512(p)
	}
}

func runAVX2(p *byte, which int) {
	switch which {
	case 3:
		panel3AVX2(p)
	case 2:
		panel2AVX2(p)
	case 1:
		panel1AVX2(p)
	case -1:
		edge1AVX2(p)
	case -2:
		edge2AVX2(p)
	case -3:
		edge3AVX2(p)
	}
}

func runAVX512Single(p *byte, which int) {
	switch which {
	case 3:
		panel3AVX512Single(p)
	case 2:
		panel2AVX512Single(p)
	case 1:
		panel1AVX512Single(p)
	case -1:
		edge1AVX512Single(p)
	case -2:
		edge2AVX512Single(p)
	case -3:
		edge3AVX512Single(p)
	}
}

func runAVX2Single(p *byte, which int) {
	switch which {
	case 3:
		panel3AVX2Single(p)
	case 2:
		panel2AVX2Single(p)
	case 1:
		panel1AVX2Single(p)
	case -1:
		edge1AVX2Single(p)
	case -2:
		edge2AVX2Single(p)
	case -3:
		edge3AVX2Single(p)
	}
}

// transposeBlock writes the transpose of the top left r×c part of a block to dst,
// r and c as large as vectors allow; dstRow and srcRow are row lengths.
func transposeBlock[T float](dst []T, dstRow int, src []T, srcRow, rows, cols int) (r, c int) {
	size := int(unsafe.Sizeof(src[0]))
	lane := lanes[T](avx2)
	r, c = rows/lane*lane, cols/lane*lane
	if r == 0 || c == 0 {
		return 0, 0
	}
	if size == 8 {
		transposeAVX2((*float64)(unsafe.Pointer(&dst[0])), dstRow*size, (*float64)(unsafe.Pointer(&src[0])), srcRow*size, r, c)
	} else {
		transposeAVX2Single((*float32)(unsafe.Pointer(&dst[0])), dstRow*size, (*float32)(unsafe.Pointer(&src[0])), srcRow*size, r, c)
	}
	return r, c
}

func runOuter(t tier, o *outer) {
	if t == avx512 {
		outerAVX512((*byte)(unsafe.Pointer(o)))
	} else {
		outerAVX2((*byte)(unsafe.Pointer(o)))
	}
}

func runLanes(t tier, c *lanesCall) {
	if t == avx512 {
		eliminateAVX512((*byte)(unsafe.Pointer(c)))
	} else {
		eliminateAVX2((*byte)(unsafe.Pointer(c)))
	}
}
