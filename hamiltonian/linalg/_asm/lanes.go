package main

import (
	"math/bits"

	. "github.com/mmcloughlin/avo/build"
	. "github.com/mmcloughlin/avo/operand"
	. "github.com/mmcloughlin/avo/reg"
)

// Offsets in the struct lanesCall of the Go side.
const (
	lanesSize = 8 * iota
	lanesWhole
	lanesMatrix
	lanesScratch
	lanesDiagonal
	lanesPivots
)

// selection is a lane mask: K2, or a vector register with AVX2.
type selection struct {
	isa
	mask Register
}

func (s isa) selection(v VecPhysical) selection {
	if s.avx512 {
		return selection{s, K2}
	}
	return selection{s, v}
}

func (m selection) equal(a, b VecPhysical)   { VPCMPEQQ(a, b, m.mask) }
func (m selection) greater(a, b VecPhysical) { VPCMPGTQ(b, a, m.mask) }

// set copies the selected lanes of a register or of memory to v.
func (m selection) set(from Op, v VecPhysical) {
	if m.avx512 {
		VMOVUPD(from, K2, v)
	} else {
		VBLENDVPD(m.mask, from, v, v)
	}
}

// eliminate generates the elimination of as many complex matrices as a vector
// has lanes, one in each: Gauss–Jordan if whole is set, else to triangular form.
// The arithmetic of a lane is that of the elimination of one matrix.
//
// Scratch holds four rows, re and im of the pivot row and of the row that it
// changes places with.
func (s isa) eliminate() {
	TEXT("eliminate"+s.suffix, NOSPLIT, "func(p *byte)")
	Pragma("noescape")
	arg := GP64()
	Load(Param("p"), arg)
	field := func(offset int) GPVirtual {
		r := GP64()
		MOVQ(Mem{Base: arg, Disp: offset}, r)
		return r
	}
	w := s.width()
	v := s.vector
	one, abs, kVector, at, row := v(0), v(1), v(2), v(3), v(4)
	fRe, fIm, swapRe, swapIm := v(5), v(6), v(7), v(8)
	re, im, x, y, best := v(9), v(10), v(11), v(12), v(13)
	chosen := s.selection(v(14))
	if s.avx512 {
		VPTERNLOGQ(Imm(0xff), one, one, one)
	} else {
		VPCMPEQD(one, one, one)
	}
	VPSRLQ(Imm(1), one, abs)
	VPSRLQ(Imm(63), one, one)
	s.zero(kVector)

	// Lengths in bytes: a row, a plane; the column k.
	rowBytes, plane, k := GP64(), GP64(), GP64()
	MOVQ(field(lanesSize), rowBytes)
	MOVQ(rowBytes, plane)
	IMULQ(rowBytes, plane)
	SHLQ(Imm(uint64(bits.TrailingZeros(uint(w)))), rowBytes)
	SHLQ(Imm(uint64(bits.TrailingZeros(uint(w)))), plane)
	XORQ(k, k)
	kRow, kRowIm := field(lanesMatrix), GP64() // row k
	LEAQ(Mem{Base: kRow, Index: plane, Scale: 1}, kRowIm)
	// The pivot row is p, the row that it replaces is q.
	p, pIm, q, qIm := field(lanesScratch), GP64(), GP64(), GP64()
	LEAQ(Mem{Base: p, Index: rowBytes, Scale: 1}, pIm)
	LEAQ(Mem{Base: p, Index: rowBytes, Scale: 2}, q)
	LEAQ(Mem{Base: pIm, Index: rowBytes, Scale: 2}, qIm)
	in := func(base, index GPVirtual) Mem { return Mem{Base: base, Index: index, Scale: 1} }
	column := GP64() // runs over columns
	firstColumn := func() {
		MOVQ(field(lanesWhole), column)
		DECQ(column)    // −1 for a triangular form
		ANDQ(k, column) // then k, else 0
	}
	nextColumn := func(label string) {
		ADDQ(Imm(uint64(w)), column)
		CMPQ(column, rowBytes)
		JLT(LabelRef(label))
	}

	Label("step")
	// Search at and below the diagonal.
	i, iIm, left := GP64(), GP64(), GP64()
	LEAQ(in(kRow, k), i)
	LEAQ(in(kRowIm, k), iIm)
	MOVQ(rowBytes, left)
	SUBQ(k, left)
	if s.avx512 {
		VPTERNLOGQ(Imm(0xff), best, best, best)
	} else {
		VPCMPEQD(best, best, best)
	}
	VMOVUPD(kVector, row)
	VMOVUPD(kVector, at)
	Label("search")
	s.load(Mem{Base: i}, re)
	s.load(Mem{Base: iIm}, im)
	s.and(abs, re)
	s.and(abs, im)
	VADDPD(im, re, re)
	chosen.greater(re, best)
	chosen.set(re, best)
	chosen.set(row, at)
	VPADDQ(one, row, row)
	ADDQ(rowBytes, i)
	ADDQ(rowBytes, iIm)
	SUBQ(Imm(uint64(w)), left)
	JNE(LabelRef("search"))
	pivots := field(lanesPivots)
	s.store(at, in(pivots, k))

	// Collect the pivot row, keep row k.
	firstColumn()
	Label("collect")
	s.load(in(kRow, column), re)
	s.load(in(kRowIm, column), im)
	s.store(re, in(q, column))
	s.store(im, in(qIm, column))
	i, iIm, left = GP64(), GP64(), GP64()
	LEAQ(in(kRow, column), i)
	LEAQ(in(kRowIm, column), iIm)
	MOVQ(rowBytes, left)
	SUBQ(k, left)
	VMOVUPD(kVector, row)
	JMP(LabelRef("collected"))
	Label("candidate")
	VPADDQ(one, row, row)
	ADDQ(rowBytes, i)
	ADDQ(rowBytes, iIm)
	chosen.equal(at, row)
	chosen.set(Mem{Base: i}, re)
	chosen.set(Mem{Base: iIm}, im)
	Label("collected")
	SUBQ(Imm(uint64(w)), left)
	JNE(LabelRef("candidate"))
	s.store(re, in(p, column))
	s.store(im, in(pIm, column))
	nextColumn("collect")

	// Its element k is the pivot; the factor of the row is its reciprocal.
	diagonal := field(lanesDiagonal)
	LEAQ(Mem{Base: diagonal, Index: k, Scale: 2}, diagonal)
	s.load(in(p, k), re)
	s.load(in(pIm, k), im)
	s.store(re, Mem{Base: diagonal})
	s.store(im, Mem{Base: diagonal, Disp: w})
	VMOVUPD(re, x)
	VMOVUPD(im, y)
	s.and(abs, x)
	s.and(abs, y)
	VADDPD(y, x, best) // s = |re| + |im|
	VDIVPD(best, re, re)
	VDIVPD(best, im, im)
	VMULPD(re, re, x)
	VMULPD(im, im, y)
	VADDPD(y, x, x)
	VMULPD(best, x, x) // t = (re² + im²)/s
	VDIVPD(x, re, fRe)
	VDIVPD(x, im, fIm)
	s.zero(y)
	VSUBPD(fIm, y, fIm)
	s.load(in(q, k), swapRe)
	s.load(in(qIm, k), swapIm)
	s.store(y, in(q, k))
	s.store(y, in(qIm, k))
	oneBits := GP64()
	MOVQ(U64(0x3ff0000000000000), oneBits)
	MOVQ(oneBits, x.AsX())
	VBROADCASTSD(x.AsX(), x)
	s.store(x, in(p, k))
	s.store(y, in(pIm, k))

	firstColumn()
	Label("scale")
	s.load(in(p, column), re)
	s.load(in(pIm, column), im)
	VMULPD(fRe, re, x)
	VMULPD(fIm, im, y)
	VSUBPD(y, x, x)
	VMULPD(fRe, im, y)
	VMULPD(fIm, re, best)
	VADDPD(best, y, y)
	s.store(x, in(p, column))
	s.store(y, in(pIm, column))
	s.store(x, in(kRow, column))
	s.store(y, in(kRowIm, column))
	nextColumn("scale")

	// Subtract from the other rows, with the change of places on the way.
	i, iIm = field(lanesMatrix), GP64()
	LEAQ(in(i, plane), iIm)
	s.zero(row)
	CMPQ(Mem{Base: arg, Disp: lanesWhole}, Imm(0))
	JNE(LabelRef("rows"))
	MOVQ(kRow, i)
	MOVQ(kRowIm, iIm)
	VMOVUPD(kVector, row)
	Label("rows")
	CMPQ(i, kRow)
	JEQ(LabelRef("nextRow"))
	chosen.equal(at, row)
	s.load(in(i, k), fRe)
	s.load(in(iIm, k), fIm)
	chosen.set(swapRe, fRe)
	chosen.set(swapIm, fIm)
	s.zero(x)
	s.store(x, in(i, k))
	s.store(x, in(iIm, k))
	firstColumn()
	Label("subtract")
	s.load(in(i, column), re)
	s.load(in(iIm, column), im)
	chosen.set(in(q, column), re)
	chosen.set(in(qIm, column), im)
	s.load(in(p, column), x)
	s.load(in(pIm, column), y)
	VFNMADD231PD(x, fRe, re)
	VFNMADD231PD(y, fRe, im)
	VFMADD231PD(y, fIm, re)
	VFNMADD231PD(x, fIm, im)
	s.store(re, in(i, column))
	s.store(im, in(iIm, column))
	nextColumn("subtract")
	Label("nextRow")
	VPADDQ(one, row, row)
	ADDQ(rowBytes, i)
	ADDQ(rowBytes, iIm)
	end := field(lanesMatrix)
	ADDQ(plane, end)
	CMPQ(i, end)
	JLT(LabelRef("rows"))

	ADDQ(rowBytes, kRow)
	ADDQ(rowBytes, kRowIm)
	VPADDQ(one, kVector, kVector)
	ADDQ(Imm(uint64(w)), k)
	CMPQ(k, rowBytes)
	JLT(LabelRef("step"))
	VZEROUPPER()
	RET()
}
