// Package lanes does sparse complex arithmetic on eight walkers at once, one in
// each vector lane: the recursions over strings that are no matrix products.
//
// A number is sixteen float64: eight real, then eight imaginary parts. Arrays of
// numbers are float64 slices of sixteen times their length. A lane's result does
// not depend on the other lanes, and is the same in both kernel tiers (see
// package linalg, whose choice of tier is followed).
package lanes

import (
	"math"

	"leadline/hamiltonian/linalg"
)

// Width is the number of walkers taken together.
const Width = 8

// Size is the number of float64 in a number.
const Size = 2 * Width

// Term is ± a_i b_j.
type Term struct {
	a, b int32 // in bytes
	sign uint64
}

// maxNumbers bounds the length of an array that lists point into.
const maxNumbers = math.MaxInt32 / (8 * Size)

// NewTerm returns the term ± a_i b_j, minus where negative is set.
func NewTerm(i, j int, negative bool) Term {
	if i < 0 || i > maxNumbers || j < 0 || j > maxNumbers {
		panic("lanes: number out of range")
	}
	t := Term{a: int32(i * 8 * Size), b: int32(j * 8 * Size)}
	if negative {
		t.sign = 1 << 63
	}
	return t
}

// Terms holds a list of terms for each of a number of outputs.
type Terms struct {
	// Start holds the number of the first term of each output and, at the end, of
	// all terms; its first element is 0.
	Start []int32
	List  []Term
}

// Reset empties t for reuse.
func (t *Terms) Reset() { t.Start, t.List = append(t.Start[:0], 0), t.List[:0] }

// End ends the list of an output.
func (t *Terms) End() { t.Start = append(t.Start, int32(len(t.List))) }

// Multiply computes out_o = Σ ± a_i b_j over the terms of each output o, added to
// what out holds if keep is set. The terms must point into a and b; out must not
// overlap them. 8 flops for each term and lane.
func (t *Terms) Multiply(out, a, b []float64, keep bool) {
	outputs := len(t.Start) - 1
	if outputs <= 0 {
		return
	}
	if len(out) < outputs*Size {
		panic("lanes: slice too short for the outputs")
	}
	if len(t.List) == 0 {
		if !keep {
			clear(out[:outputs*Size])
		}
		return
	}
	multiply(out, outputs, t.Start, t.List, a, b, keep)
}

// Weight is a factor with the number that it multiplies.
type Weight struct {
	at     int64 // in bytes
	re, im float64
}

// NewWeight returns the weight of number i.
func NewWeight(i int, weight complex128) Weight {
	return Weight{at: int64(i) * 8 * Size, re: real(weight), im: imag(weight)}
}

// Weights holds a list of weights for each of a number of outputs.
type Weights struct {
	Start []int32 // see Terms
	List  []Weight
	// Real says that no weight has an imaginary part, which saves half.
	Real bool
}

// Combine computes out_o = Σ weight·b_i over the weights of each output o. The
// weights must point into b; out must not overlap it. 8 flops for each weight and
// lane, 4 for real ones.
func (w *Weights) Combine(out, b []float64) {
	outputs := len(w.Start) - 1
	if outputs <= 0 {
		return
	}
	if len(out) < outputs*Size {
		panic("lanes: slice too short for the outputs")
	}
	if len(w.List) == 0 {
		clear(out[:outputs*Size])
		return
	}
	combine(w, out, b)
}

// tier is the kernel tier in use; only tests change it.
var tier = linalg.Kernel()

func multiplyPortable(out []float64, start []int32, list []Term, a, b []float64, keep bool) {
	for o := range len(start) - 1 {
		sum := (*[Size]float64)(out[o*Size:])
		if !keep {
			*sum = [Size]float64{}
		}
		for _, t := range list[start[o]:start[o+1]] {
			sign := math.Float64frombits(math.Float64bits(1) | t.sign)
			x, y := (*[Size]float64)(a[t.a/8:]), (*[Size]float64)(b[t.b/8:])
			for l := range Width {
				re, im := sign*x[l], sign*x[Width+l]
				sum[l] += re*y[l] - im*y[Width+l]
				sum[Width+l] += re*y[Width+l] + im*y[l]
			}
		}
	}
}

func combinePortable(w *Weights, out, b []float64) {
	for o := range len(w.Start) - 1 {
		sum := (*[Size]float64)(out[o*Size:])
		*sum = [Size]float64{}
		for _, w := range w.List[w.Start[o]:w.Start[o+1]] {
			y := (*[Size]float64)(b[w.at/8:])
			for l := range Width {
				sum[l] += w.re*y[l] - w.im*y[Width+l]
				sum[Width+l] += w.re*y[Width+l] + w.im*y[l]
			}
		}
	}
}
