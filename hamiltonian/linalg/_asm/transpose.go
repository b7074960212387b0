package main

import (
	. "github.com/mmcloughlin/avo/build"
	. "github.com/mmcloughlin/avo/operand"
	. "github.com/mmcloughlin/avo/reg"
)

// transpose generates the transposition of a block whose sides are positive
// multiples of the lanes of a vector. Strides are in bytes.
func (s isa) transpose() {
	element := "float64"
	if !s.double {
		element = "float32"
	}
	lanes := s.width() / s.bytes()
	TEXT("transpose"+s.suffix, NOSPLIT, "func(dst *"+element+", dstRow int, src *"+element+", srcRow, rows, cols int)")
	Pragma("noescape")
	param := func(name string) GPVirtual {
		r := GP64()
		Load(Param(name), r)
		return r
	}
	dst, dstRow, src, srcRow, left := param("dst"), param("dstRow"), param("src"), param("srcRow"), param("rows")
	Label("rows")
	cols := param("cols")
	to, from := GP64(), GP64()
	MOVQ(dst, to)
	MOVQ(src, from)
	Label("cols")
	in := newRows(from, srcRow, lanes)
	for i := range lanes {
		s.load(in.at(i, 0), s.vector(i))
	}
	out := newRows(to, dstRow, lanes)
	for i, v := range s.turn() {
		s.store(v, out.at(i, 0))
	}
	ADDQ(Imm(uint64(s.width())), from)
	LEAQ(Mem{Base: to, Index: dstRow, Scale: uint8(lanes)}, to)
	SUBQ(Imm(uint64(lanes)), cols)
	JNE(LabelRef("cols"))
	ADDQ(Imm(uint64(s.width())), dst)
	LEAQ(Mem{Base: src, Index: srcRow, Scale: uint8(lanes)}, src)
	SUBQ(Imm(uint64(lanes)), left)
	JNE(LabelRef("rows"))
	VZEROUPPER()
	RET()
}

// turn transposes the first four (double) or eight (single) AVX registers and
// returns those that hold the result.
func (s isa) turn() []VecPhysical {
	v := s.vector
	if s.double {
		for i := 0; i < 4; i += 2 {
			VUNPCKLPD(v(i+1), v(i), v(4+i))
			VUNPCKHPD(v(i+1), v(i), v(5+i))
		}
		for i := range 2 {
			VPERM2F128(Imm(0x20), v(6+i), v(4+i), v(i))
			VPERM2F128(Imm(0x31), v(6+i), v(4+i), v(2+i))
		}
		return []VecPhysical{v(0), v(1), v(2), v(3)}
	}
	for i := 0; i < 8; i += 2 { // pairs of rows: elements 0, 1 and 2, 3
		VUNPCKLPS(v(i+1), v(i), v(8+i))
		VUNPCKHPS(v(i+1), v(i), v(9+i))
	}
	for i := 0; i < 8; i += 4 { // four rows: element j in register i+j
		for j := range 2 {
			VUNPCKLPD(v(10+i+j), v(8+i+j), v(i+2*j))
			VUNPCKHPD(v(10+i+j), v(8+i+j), v(i+2*j+1))
		}
	}
	for j := range 4 { // eight rows: elements j and 4+j
		VPERM2F128(Imm(0x20), v(4+j), v(j), v(8+j))
		VPERM2F128(Imm(0x31), v(4+j), v(j), v(12+j))
	}
	out := make([]VecPhysical, 8)
	for j := range 8 {
		out[j] = v(8 + j)
	}
	return out
}
