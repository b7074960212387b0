// Command _asm generates the assembly of package lanes. With -set it picks one
// of the files: avx512, avx2.
package main

import (
	"flag"
	"log"

	. "github.com/mmcloughlin/avo/build"
	. "github.com/mmcloughlin/avo/operand"
	. "github.com/mmcloughlin/avo/reg"
)

// Layout of the Go side: a complex number of eight lanes is eight real, then
// eight imaginary parts.
const (
	partBytes   = 64
	numberBytes = 2 * partBytes

	termA     = 0 // int32, byte offset
	termB     = 4 // int32, byte offset
	termSign  = 8 // sign bit
	termBytes = 16

	weightAt    = 0 // int64, byte offset
	weightRe    = 8
	weightIm    = 16
	weightBytes = 24
)

type isa struct {
	suffix string
	avx512 bool
}

func main() {
	set := flag.String("set", "", "instruction set")
	flag.Parse()
	s, ok := map[string]isa{
		"avx512": {suffix: "AVX512", avx512: true},
		"avx2":   {suffix: "AVX2"},
	}[*set]
	if !ok {
		log.Fatalf("unknown set %q", *set)
	}
	ConstraintExpr("amd64,!noasm")
	s.multiply()
	s.combine(false)
	s.combine(true)
	Generate()
}

// vectors returns the number of registers that eight lanes take.
func (s isa) vectors() int {
	if s.avx512 {
		return 1
	}
	return 2
}

// registers returns the registers of eight lanes, from register number first on.
func (s isa) registers(first int) []VecPhysical {
	if s.avx512 {
		return []VecPhysical{[]VecPhysical{Z0, Z1, Z2, Z3, Z4, Z5, Z6, Z7, Z8}[first]}
	}
	y := []VecPhysical{Y0, Y1, Y2, Y3, Y4, Y5, Y6, Y7, Y8, Y9, Y10, Y11, Y12, Y13, Y14, Y15}
	return y[2*first : 2*first+2]
}

func (s isa) zero(vs []VecPhysical) {
	for _, v := range vs {
		if s.avx512 {
			VPXORQ(v, v, v)
		} else {
			VXORPD(v, v, v)
		}
	}
}

// part returns the memory of one register's share of one part of a number.
func part(base Register, offset, vector int) Mem {
	return Mem{Base: base, Disp: offset + 32*vector}
}

// argument loads a parameter into a register.
func argument(name string) GPVirtual {
	r := GP64()
	Load(Param(name), r)
	return r
}

// each runs body for every output and inner for every entry of its list; entries
// are size bytes long, at entry.
func each(size int, body func(inner func(func(entry GPVirtual)))) {
	outputs, start, entry := argument("outputs"), argument("start"), argument("entries")
	Label("output")
	TESTQ(outputs, outputs)
	JE(LabelRef("done"))
	count, first := GP64(), GP64()
	MOVLQSX(Mem{Base: start, Disp: 4}, count)
	MOVLQSX(Mem{Base: start}, first)
	SUBQ(first, count)
	body(func(inner func(GPVirtual)) {
		TESTQ(count, count)
		JE(LabelRef("last"))
		Label("entry")
		inner(entry)
		ADDQ(Imm(uint64(size)), entry)
		DECQ(count)
		JNE(LabelRef("entry"))
		Label("last")
	})
	ADDQ(Imm(4), start)
	DECQ(outputs)
	JMP(LabelRef("output"))
	Label("done")
	VZEROUPPER()
	RET()
}

// multiply generates out_o (+)= Σ ± a_i b_j over the list of each output.
func (s isa) multiply() {
	TEXT("multiply"+s.suffix, NOSPLIT, "func(out *float64, outputs int, start *int32, entries *byte, a, b *float64, keep int)")
	Pragma("noescape")
	out, aBase, bBase, keep := argument("out"), argument("a"), argument("b"), argument("keep")
	rr, ii, ri, ir := s.registers(0), s.registers(1), s.registers(2), s.registers(3)
	sign, y, re, im := s.registers(4)[:1], s.registers(7)[:1], s.registers(5), s.registers(6)
	each(termBytes, func(inner func(func(GPVirtual))) {
		s.zero(rr)
		s.zero(ii)
		s.zero(ri)
		s.zero(ir)
		TESTQ(keep, keep)
		JE(LabelRef("fresh"))
		for v := range s.vectors() {
			VMOVUPD(part(out, 0, v), rr[v])
			VMOVUPD(part(out, partBytes, v), ri[v])
		}
		Label("fresh")
		inner(func(entry GPVirtual) {
			a, b := GP64(), GP64()
			MOVLQSX(Mem{Base: entry, Disp: termA}, a)
			MOVLQSX(Mem{Base: entry, Disp: termB}, b)
			ADDQ(aBase, a)
			ADDQ(bBase, b)
			VBROADCASTSD(Mem{Base: entry, Disp: termSign}, sign[0])
			for v := range s.vectors() {
				if s.avx512 {
					VPXORQ(part(a, 0, v), sign[0], re[v])
					VPXORQ(part(a, partBytes, v), sign[0], im[v])
				} else {
					VXORPD(part(a, 0, v), sign[0], re[v])
					VXORPD(part(a, partBytes, v), sign[0], im[v])
				}
			}
			for v := range s.vectors() {
				VMOVUPD(part(b, 0, v), y[0])
				VFMADD231PD(y[0], re[v], rr[v])
				VFMADD231PD(y[0], im[v], ir[v])
				VMOVUPD(part(b, partBytes, v), y[0])
				VFMADD231PD(y[0], im[v], ii[v])
				VFMADD231PD(y[0], re[v], ri[v])
			}
		})
		s.finish(out, rr, ii, ri, ir)
	})
}

// finish stores rr − ii + i (ri + ir) and moves on.
func (s isa) finish(out GPVirtual, rr, ii, ri, ir []VecPhysical) {
	for v := range s.vectors() {
		VSUBPD(ii[v], rr[v], rr[v])
		VADDPD(ir[v], ri[v], ri[v])
		VMOVUPD(rr[v], part(out, 0, v))
		VMOVUPD(ri[v], part(out, partBytes, v))
	}
	ADDQ(Imm(numberBytes), out)
}

// combine generates out_o = Σ weight · b_j over the list of each output, for
// weights without imaginary part or with.
func (s isa) combine(complex bool) {
	name := "combineReal"
	if complex {
		name = "combine"
	}
	TEXT(name+s.suffix, NOSPLIT, "func(out *float64, outputs int, start *int32, entries *byte, b *float64)")
	Pragma("noescape")
	out, bBase := argument("out"), argument("b")
	rr, ii, ri, ir := s.registers(0), s.registers(1), s.registers(2), s.registers(3)
	re, im, y := s.registers(4)[0], s.registers(5)[0], s.registers(6)[0]
	each(weightBytes, func(inner func(func(GPVirtual))) {
		s.zero(rr)
		s.zero(ii)
		s.zero(ri)
		s.zero(ir)
		inner(func(entry GPVirtual) {
			b := GP64()
			MOVQ(Mem{Base: entry, Disp: weightAt}, b)
			ADDQ(bBase, b)
			VBROADCASTSD(Mem{Base: entry, Disp: weightRe}, re)
			if !complex {
				for v := range s.vectors() {
					VFMADD231PD(part(b, 0, v), re, rr[v])
					VFMADD231PD(part(b, partBytes, v), re, ri[v])
				}
				return
			}
			VBROADCASTSD(Mem{Base: entry, Disp: weightIm}, im)
			for v := range s.vectors() {
				VMOVUPD(part(b, 0, v), y)
				VFMADD231PD(y, re, rr[v])
				VFMADD231PD(y, im, ir[v])
				VMOVUPD(part(b, partBytes, v), y)
				VFMADD231PD(y, im, ii[v])
				VFMADD231PD(y, re, ri[v])
			}
		})
		s.finish(out, rr, ii, ri, ir)
	})
}
