package amplitude

import (
	"fmt"
	"math"
	"math/bits"
	"math/cmplx"
)

// Rotate removes the global phase θ = ½ arg Σ_D c_D² and returns it with its
// error. Shot noise does not bias it, because the noise of real and imaginary
// part is equal: E[noise·noise] = 0. The sign is chosen so that the largest
// amplitude has a positive real part.
func (e *Estimate) Rotate() Figure {
	sum, _ := e.total()
	angle := func(without int) float64 {
		var s complex128
		for i, v := range sum {
			if without >= 0 {
				v -= complex(e.Weights[without], 0) * e.Batches[without][i]
			}
			s += v * v
		}
		return cmplx.Phase(s) / 2
	}
	theta := angle(-1)
	figure := Jackknife(len(e.Batches), func(b int) float64 {
		// Angles of the replicas are taken next to θ: half of them may lie
		// beyond the cut of the square.
		d := angle(b) - theta
		return theta + d - math.Pi*math.Round(d/math.Pi)
	})
	turn := cmplx.Rect(1, -theta)
	largest := 0
	for i, v := range sum {
		if cmplx.Abs(v) > cmplx.Abs(sum[largest]) {
			largest = i
		}
	}
	if real(sum[largest]*turn) < 0 {
		turn = -turn
		figure.Value += math.Pi
	}
	for _, batch := range e.Batches {
		for i := range batch {
			batch[i] *= turn
		}
	}
	if e.Turn == 0 {
		e.Turn = 1
	}
	e.Turn *= turn
	e.Steps = append(e.Steps, Step{Name: fmt.Sprintf("global phase %.4f(%.4f) removed", figure.Value, figure.Error), Linear: true})
	return figure
}

// Real removes the global phase and then the imaginary parts: for states that
// are known to be real.
func (e *Estimate) Real() Step {
	e.Rotate()
	return e.project("real amplitudes", func(dst, src []complex128) {
		for i, v := range src {
			dst[i] = complex(real(v), 0)
		}
	})
}

// Keep sets every amplitude to zero whose determinant is not allowed: for
// states with known zeros.
func (e *Estimate) Keep(name string, allowed func(up, down uint64) bool) Step {
	mask := make([]bool, 0, e.Size())
	for _, u := range e.Up.Masks() {
		for _, d := range e.Down.Masks() {
			mask = append(mask, allowed(u, d))
		}
	}
	return e.project(name, func(dst, src []complex128) {
		for i, v := range src {
			dst[i] = 0
			if mask[i] {
				dst[i] = v
			}
		}
	})
}

// KeepIrrep keeps the determinants of one irreducible representation of an
// Abelian point group with real characters (D2h and its subgroups): irreps are
// numbered so that the product is the bitwise exclusive or, one number per
// orbital.
func (e *Estimate) KeepIrrep(orbitals []int, state int) Step {
	if len(orbitals) != e.Up.Orbitals() {
		panic("amplitude: one irrep per orbital expected")
	}
	product := func(s uint64) (irrep int) {
		for ; s != 0; s &= s - 1 {
			irrep ^= orbitals[bits.TrailingZeros64(s)]
		}
		return irrep
	}
	return e.Keep(fmt.Sprintf("irrep %d", state), func(up, down uint64) bool { return product(up)^product(down) == state })
}

// project applies a projection, linear over the reals, to every batch and
// records what it removed. apply may be called from several goroutines.
func (e *Estimate) project(name string, apply func(dst, src []complex128)) Step {
	sum, _ := e.total()
	kept := make([]complex128, len(sum))
	apply(kept, sum)
	for i := range sum {
		sum[i] -= kept[i] // what is removed of S
	}
	f := e.newForm(sum, func(b int, scratch func() []complex128) []complex128 {
		rest := scratch()
		apply(rest, e.Batches[b])
		for i, v := range rest {
			// The batch keeps its projection.
			rest[i], e.Batches[b][i] = e.Batches[b][i]-v, v
		}
		return rest
	}, nil)
	step := Step{Name: name, Removed: f.Plain(), Excess: f.Figure(), Linear: true}
	step.Expected = step.Removed - step.Excess.Value
	e.Steps = append(e.Steps, step)
	return step
}

// Threshold sets to zero every amplitude that differs from zero by less than
// the given number of standard errors, and records the weight lost. It helps
// where few determinants carry the state, and it biases the amplitudes.
func (e *Estimate) Threshold(errors float64) Step {
	mean, se := e.Mean(), e.Errors()
	step := Step{Name: fmt.Sprintf("amplitudes below %g standard errors set to zero", errors)}
	for i, v := range mean {
		sigma := cmplx.Abs(se[i])
		if cmplx.Abs(v) >= errors*sigma {
			continue
		}
		step.Removed += real(v)*real(v) + imag(v)*imag(v)
		step.Expected += sigma * sigma
		for _, batch := range e.Batches {
			batch[i] = 0
		}
	}
	step.Excess = Figure{step.Removed - step.Expected, math.NaN()}
	e.Steps = append(e.Steps, step)
	return step
}
