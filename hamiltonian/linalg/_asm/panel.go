package main

import (
	"fmt"

	. "github.com/mmcloughlin/avo/build"
	. "github.com/mmcloughlin/avo/operand"
	. "github.com/mmcloughlin/avo/reg"
)

// Offsets in the struct panel of the Go side.
const (
	panelM = 8 * iota
	panelK
	panelA
	panelARow
	panelACol
	panelATile
	panelB
	panelBRow
	panelC
	panelCRow
	panelMask
	panelNext
	panelNextRow
	panelNextTile
	panelAlpha
)

// tileRows returns the height of a full tile: with three vectors of columns it
// fills the register file, leaving room for the operands.
func (s isa) tileRows() int {
	if s.avx512 {
		return 8
	}
	return 4
}

// panel generates the product of m rows with one panel of 1 to 3 vectors of
// columns: full tiles of rows first, then halves as far as they are needed.
// The last vector is masked if edge is set.
func (s isa) panel(vectors int, edge bool) {
	name := fmt.Sprintf("panel%d%s", vectors, s.suffix)
	if edge {
		name = fmt.Sprintf("edge%d%s", vectors, s.suffix)
	}
	TEXT(name, NOSPLIT, "func(p *byte)")
	Pragma("noescape")
	arg := GP64()
	Load(Param("p"), arg)
	field := func(offset int) GPVirtual {
		r := GP64()
		MOVQ(Mem{Base: arg, Disp: offset}, r)
		return r
	}
	if edge {
		s.loadMask(field(panelMask))
	}
	t := tile{isa: s, vectors: vectors, edge: edge, arg: arg, field: field,
		a: field(panelA), c: field(panelC), next: field(panelNext)}
	m := field(panelM)
	full := s.tileRows()
	SUBQ(Imm(uint64(full)), m)
	JLT(LabelRef("rest"))
	Label("full")
	t.generate(full)
	ADDQ(Mem{Base: arg, Disp: panelATile}, t.a)
	ADDQ(Mem{Base: arg, Disp: panelNextTile}, t.next)
	SUBQ(Imm(uint64(full)), m)
	JGE(LabelRef("full"))
	Label("rest")
	for count := full / 2; count > 0; count /= 2 {
		below := fmt.Sprintf("below%d", count)
		TESTQ(I32(int32(count)), m)
		JEQ(LabelRef(below))
		t.generate(count)
		LEAQ(Mem{Base: t.a, Index: field(panelARow), Scale: uint8(count)}, t.a)
		Label(below)
	}
	VZEROUPPER()
	RET()
}

type tile struct {
	isa
	vectors    int
	edge       bool
	arg        GPVirtual
	field      func(offset int) GPVirtual
	a, c, next GPVirtual
}

// masked tells whether column vector j needs the mask.
func (t tile) masked(j int) bool { return t.edge && j == t.vectors-1 }

// generate emits one tile of count rows; c moves past it.
func (t tile) generate(count int) {
	sum := func(i, j int) VecPhysical { return t.vector(i*t.vectors + j) }
	right := func(j int) VecPhysical { return t.vector(count*t.vectors + j) }
	first := (count + 1) * t.vectors // first register for the left operand
	spare := min(t.registers()-first, 5)
	left := func(i int) VecPhysical { return t.vector(first + i%spare) }

	for i := range count {
		for j := range t.vectors {
			t.zero(sum(i, j))
		}
	}
	cRow := t.field(panelCRow)
	c := newRows(t.c, cRow, count)
	for i := range count {
		for offset := 0; offset < t.vectors*t.width(); offset += 64 {
			PREFETCHT0(c.at(i, offset))
		}
	}
	var mask GPVirtual
	if t.edge && !t.avx512 {
		mask = t.field(panelMask)
	}
	k, b, bRow, nextRow := t.field(panelK), t.field(panelB), t.field(panelBRow), t.field(panelNextRow)
	aCol := t.field(panelACol)
	a := newRows(t.a, t.field(panelARow), count)

	loop := fmt.Sprintf("sum%d", count)
	Label(loop)
	for j := range t.vectors {
		from := Mem{Base: b, Disp: j * t.width()}
		if t.masked(j) {
			t.loadMasked(from, mask, right(j))
		} else {
			t.load(from, right(j))
		}
	}
	PREFETCHT1(Mem{Base: t.next})
	for i := range count {
		if t.avx512 && t.vectors == 1 {
			t.fmaBroadcast(a.at(i, 0), right(0), sum(i, 0))
			continue
		}
		t.broadcast(a.at(i, 0), left(i))
		for j := range t.vectors {
			t.fma(right(j), left(i), sum(i, j))
		}
	}
	a.move(aCol)
	ADDQ(bRow, b)
	ADDQ(nextRow, t.next)
	DECQ(k)
	JNE(LabelRef(loop))
	t.update(count, sum)
	LEAQ(Mem{Base: t.c, Index: t.field(panelCRow), Scale: uint8(count)}, t.c)
}

// update emits C ← beta·C + (alpha·sum); C is not read if beta is zero.
func (t tile) update(count int, sum func(i, j int) VecPhysical) {
	var mask GPVirtual
	if t.edge && !t.avx512 {
		mask = t.field(panelMask)
	}
	c := newRows(t.c, t.field(panelCRow), count)
	alpha, beta, old := t.vector(count*t.vectors), t.vector(count*t.vectors+1), t.vector(count*t.vectors+2)
	t.broadcast(Mem{Base: t.arg, Disp: panelAlpha}, alpha)
	for i := range count {
		for j := range t.vectors {
			t.multiply(alpha, sum(i, j), sum(i, j))
		}
	}
	bits := GP64()
	betaAt := Mem{Base: t.arg, Disp: panelAlpha + t.bytes()}
	if t.double {
		MOVQ(betaAt, bits)
		ADDQ(bits, bits) // drops the sign of zero
	} else {
		MOVL(betaAt, bits.As32())
		ADDL(bits.As32(), bits.As32())
	}
	store := fmt.Sprintf("store%d", count)
	JEQ(LabelRef(store))
	t.broadcast(betaAt, beta)
	for i := range count {
		for j := range t.vectors {
			at := c.at(i, j*t.width())
			if t.masked(j) {
				t.loadMasked(at, mask, old)
			} else {
				t.load(at, old)
			}
			t.fma(beta, old, sum(i, j))
		}
	}
	Label(store)
	for i := range count {
		for j := range t.vectors {
			at := c.at(i, j*t.width())
			if t.masked(j) {
				t.storeMasked(sum(i, j), mask, at, alpha)
			} else {
				t.store(sum(i, j), at)
			}
		}
	}
}
