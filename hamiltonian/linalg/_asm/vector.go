package main

import (
	. "github.com/mmcloughlin/avo/build"
	. "github.com/mmcloughlin/avo/operand"
	. "github.com/mmcloughlin/avo/reg"
)

// isa is one combination of instruction set and precision.
type isa struct {
	suffix string // of the functions' names
	avx512 bool
	double bool
}

// bytes returns the size of an element.
func (s isa) bytes() int {
	if s.double {
		return 8
	}
	return 4
}

// width returns the bytes of a vector.
func (s isa) width() int {
	if s.avx512 {
		return 64
	}
	return 32
}

// registers returns the number of vector registers.
func (s isa) registers() int {
	if s.avx512 {
		return 32
	}
	return 16
}

func (s isa) vector(i int) VecPhysical {
	if s.avx512 {
		return [...]VecPhysical{Z0, Z1, Z2, Z3, Z4, Z5, Z6, Z7, Z8, Z9, Z10, Z11, Z12, Z13, Z14, Z15, Z16,
			Z17, Z18, Z19, Z20, Z21, Z22, Z23, Z24, Z25, Z26, Z27, Z28, Z29, Z30, Z31}[i]
	}
	return [...]VecPhysical{Y0, Y1, Y2, Y3, Y4, Y5, Y6, Y7, Y8, Y9, Y10, Y11, Y12, Y13, Y14, Y15}[i]
}

// fma computes c += a·b.
func (s isa) fma(a, b, c Op) {
	if s.double {
		VFMADD231PD(a, b, c)
	} else {
		VFMADD231PS(a, b, c)
	}
}

// fmaBroadcast computes c += m·b with one element of memory in every lane.
func (s isa) fmaBroadcast(m, b, c Op) {
	if s.double {
		VFMADD231PD_BCST(m, b, c)
	} else {
		VFMADD231PS_BCST(m, b, c)
	}
}

// multiply computes c = a·b.
func (s isa) multiply(a, b, c Op) {
	if s.double {
		VMULPD(a, b, c)
	} else {
		VMULPS(a, b, c)
	}
}

func (s isa) broadcast(m Mem, v VecPhysical) {
	if s.double {
		VBROADCASTSD(m, v)
	} else {
		VBROADCASTSS(m, v)
	}
}

func (s isa) zero(v VecPhysical) {
	if s.avx512 {
		VPXORQ(v, v, v)
	} else {
		VPXOR(v, v, v)
	}
}

func (s isa) load(m Mem, v VecPhysical) {
	if s.double {
		VMOVUPD(m, v)
	} else {
		VMOVUPS(m, v)
	}
}

func (s isa) store(v VecPhysical, m Mem) {
	if s.double {
		VMOVUPD(v, m)
	} else {
		VMOVUPS(v, m)
	}
}

// loadMask prepares the lane mask that mask points to: K1 with AVX-512; with
// AVX2 the mask stays in memory.
func (s isa) loadMask(mask GPVirtual) {
	if s.avx512 {
		KMOVW(Mem{Base: mask}, K1)
	}
}

// loadMasked reads the lanes of the mask and zeros the others.
func (s isa) loadMasked(m Mem, mask GPVirtual, v VecPhysical) {
	switch {
	case s.avx512 && s.double:
		VMOVUPD_Z(m, K1, v)
	case s.avx512:
		VMOVUPS_Z(m, K1, v)
	case s.double:
		VMOVUPD(Mem{Base: mask}, v)
		VMASKMOVPD(m, v, v)
	default:
		VMOVUPS(Mem{Base: mask}, v)
		VMASKMOVPS(m, v, v)
	}
}

// storeMasked writes the lanes of the mask; spare is overwritten.
func (s isa) storeMasked(v VecPhysical, mask GPVirtual, m Mem, spare VecPhysical) {
	switch {
	case s.avx512 && s.double:
		VMOVUPD(v, K1, m)
	case s.avx512:
		VMOVUPS(v, K1, m)
	case s.double:
		VMOVUPD(Mem{Base: mask}, spare)
		VMASKMOVPD(v, spare, m)
	default:
		VMOVUPS(Mem{Base: mask}, spare)
		VMASKMOVPS(v, spare, m)
	}
}

// rows addresses up to eight rows a fixed stride apart.
type rows struct{ low, high, stride, triple GPVirtual }

func newRows(base, stride GPVirtual, count int) rows {
	r := rows{low: GP64(), stride: stride}
	MOVQ(base, r.low)
	if count > 3 {
		r.triple = GP64()
		LEAQ(Mem{Base: stride, Index: stride, Scale: 2}, r.triple)
	}
	if count > 4 {
		r.high = GP64()
		LEAQ(Mem{Base: base, Index: stride, Scale: 4}, r.high)
	}
	return r
}

func (r rows) at(i, offset int) Mem {
	m := Mem{Base: r.low, Disp: offset}
	if i >= 4 {
		m.Base = r.high
	}
	switch i % 4 {
	case 1, 2:
		m.Index, m.Scale = r.stride, uint8(i%4)
	case 3:
		m.Index, m.Scale = r.triple, 1
	}
	return m
}

// move adds a step to every row's address.
func (r rows) move(step GPVirtual) {
	ADDQ(step, r.low)
	if r.high != nil {
		ADDQ(step, r.high)
	}
}

// and clears the bits of v that mask lacks.
func (s isa) and(mask, v VecPhysical) {
	if s.avx512 {
		VPANDQ(mask, v, v)
	} else {
		VPAND(mask, v, v)
	}
}
