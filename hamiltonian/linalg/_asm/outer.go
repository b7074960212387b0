package main

import (
	"fmt"

	. "github.com/mmcloughlin/avo/build"
	. "github.com/mmcloughlin/avo/operand"
	. "github.com/mmcloughlin/avo/reg"
)

// Offsets in the struct outer of the Go side.
const (
	outerRows = 8 * iota
	outerVectors
	outerLeft
	outerLeftIm
	outerRight
	outerRightIm
	outerMatrix
	outerMatrixIm
	outerStride
)

// outer generates the subtraction of a complex outer product, A ← A − f·pᵀ, with
// planes of real and imaginary parts: column chunk by column chunk, with the
// chunk of p in registers.
func (s isa) outer() {
	TEXT("outer"+s.suffix, NOSPLIT, "func(p *byte)")
	Pragma("noescape")
	arg := GP64()
	Load(Param("p"), arg)
	field := func(offset int) GPVirtual {
		r := GP64()
		MOVQ(Mem{Base: arg, Disp: offset}, r)
		return r
	}
	vectors := field(outerVectors)
	right, rightIm := field(outerRight), field(outerRightIm)
	matrix, matrixIm := field(outerMatrix), field(outerMatrixIm)
	stride := field(outerStride)
	widest := 3
	if s.avx512 {
		widest = 4
	}
	for v := widest; v > 0; v-- {
		chunk, row, next := fmt.Sprintf("chunk%d", v), fmt.Sprintf("row%d", v), fmt.Sprintf("below%d", v)
		p := func(j int) VecPhysical { return s.vector(j) }
		pIm := func(j int) VecPhysical { return s.vector(v + j) }
		f, fIm := s.vector(2*v), s.vector(2*v+1)
		x := func(j int) VecPhysical { return s.vector(2*v + 2 + 2*j) }
		xIm := func(j int) VecPhysical { return s.vector(2*v + 3 + 2*j) }
		Label(chunk)
		CMPQ(vectors, Imm(uint64(v)))
		JLT(LabelRef(next))
		for j := range v {
			s.load(Mem{Base: right, Disp: j * s.width()}, p(j))
			s.load(Mem{Base: rightIm, Disp: j * s.width()}, pIm(j))
		}
		rows, left, leftIm := field(outerRows), field(outerLeft), field(outerLeftIm)
		to, toIm := GP64(), GP64()
		MOVQ(matrix, to)
		MOVQ(matrixIm, toIm)
		Label(row)
		s.broadcast(Mem{Base: left}, f)
		s.broadcast(Mem{Base: leftIm}, fIm)
		for j := range v {
			s.load(Mem{Base: to, Disp: j * s.width()}, x(j))
			s.load(Mem{Base: toIm, Disp: j * s.width()}, xIm(j))
			VFNMADD231PD(p(j), f, x(j))
			VFNMADD231PD(pIm(j), f, xIm(j))
		}
		for j := range v {
			VFMADD231PD(pIm(j), fIm, x(j))
			VFNMADD231PD(p(j), fIm, xIm(j))
			s.store(x(j), Mem{Base: to, Disp: j * s.width()})
			s.store(xIm(j), Mem{Base: toIm, Disp: j * s.width()})
		}
		ADDQ(Imm(8), left)
		ADDQ(Imm(8), leftIm)
		ADDQ(stride, to)
		ADDQ(stride, toIm)
		DECQ(rows)
		JNE(LabelRef(row))
		ADDQ(I32(int32(v*s.width())), right)
		ADDQ(I32(int32(v*s.width())), rightIm)
		ADDQ(I32(int32(v*s.width())), matrix)
		ADDQ(I32(int32(v*s.width())), matrixIm)
		SUBQ(Imm(uint64(v)), vectors)
		JMP(LabelRef(chunk))
		Label(next)
	}
	VZEROUPPER()
	RET()
}
