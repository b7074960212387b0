package trial

import (
	"math"
	"math/cmplx"
)

// Overlap is a complex overlap ⟨Ψ_T|φ⟩ as log-magnitude and unit phase, which
// neither overflows nor underflows. A zero overlap has Log = −Inf and Phase 0.
type Overlap struct {
	Log   float64
	Phase complex128
}

// OverlapOf returns the overlap that equals v.
func OverlapOf(v complex128) Overlap {
	a := cmplx.Abs(v)
	if a == 0 {
		return Overlap{Log: math.Inf(-1)}
	}
	return Overlap{Log: math.Log(a), Phase: v / complex(a, 0)}
}

// Times returns the product of two overlaps.
func (o Overlap) Times(p Overlap) Overlap {
	return Overlap{Log: o.Log + p.Log, Phase: o.Phase * p.Phase}
}

// Over returns the ratio o/p as a number. A zero p gives NaN.
func (o Overlap) Over(p Overlap) complex128 {
	if math.IsInf(p.Log, -1) {
		return cmplx.NaN()
	}
	if math.IsInf(o.Log, -1) {
		return 0
	}
	return complex(math.Exp(o.Log-p.Log), 0) * o.Phase * cmplx.Conj(p.Phase)
}

// Value returns the overlap as a number; it may overflow or underflow.
func (o Overlap) Value() complex128 {
	return complex(math.Exp(o.Log), 0) * o.Phase
}

// Zero reports whether the overlap vanishes.
func (o Overlap) Zero() bool { return math.IsInf(o.Log, -1) || math.IsNaN(o.Log) }
