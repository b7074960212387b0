// Package amplitude holds estimated amplitudes of a trial state with the
// batches they were averaged from: means, jackknife errors, unbiased norms, and
// the projections that a linear estimate allows for free.
//
// The record was cut into batches of consecutive settings. Everything linear is
// done to every batch, so the error of whatever is computed from the amplitudes
// follows by leaving out one batch at a time (Quenouille; Tukey; see Efron and
// Stein, Ann. Statist. 9, 586 (1981), from memory).
package amplitude

import (
	"math"
	"runtime"
	"sync"
	"sync/atomic"

	"leadline/hamiltonian/strings"
)

// Estimate is the amplitudes of a ket on the determinants of a sector,
// up strings × down strings, row-major, creation operators ordered up before
// down and ascending from left to right. It is not safe for concurrent use.
type Estimate struct {
	// Up and Down are the strings of each spin on the measured orbitals.
	Up, Down *strings.Table
	// Batches holds the mean of each batch and Weights its number of shots.
	Batches [][]complex128
	Weights []float64
	// Reference is the determinant (up, down) of a reference row, whose
	// amplitudes carry the factor conj(Ψ_r); nil for the vacuum row.
	Reference *[2]uint64
	// Turn is the factor by which Rotate has turned the amplitudes so far; 0
	// stands for 1.
	Turn complex128
	// Steps lists what was done to the amplitudes after averaging.
	Steps []Step
	// Provenance says where they come from.
	Provenance Provenance
}

// Provenance is what a result must be able to say about its record.
type Provenance struct {
	Ensemble          string
	Row               string
	Trial             string
	HamiltonianSHA256 string
	OrbitalsSHA256    string
	// Digest is the SHA-256 of the record's content.
	Digest string
	// Calibration is the SHA-256 of the calibration record, "" without one.
	Calibration     string
	Settings, Shots int64
	// Rejected counts the shots that cannot come from the noiseless state or
	// do not reach the row; see package check.
	Rejected int64
}

// Step is a projection or another change, and what it removed.
type Step struct {
	Name string
	// Removed is the weight Σ|c|² taken away; Expected what shot noise alone
	// puts there; Excess their difference with one standard error.
	Removed, Expected float64
	Excess            Figure
	// Linear is false for steps that bias the amplitudes.
	Linear bool
}

// Figure is a number with one standard error.
type Figure struct{ Value, Error float64 }

// Size returns the number of determinants.
func (e *Estimate) Size() int { return e.Up.Len() * e.Down.Len() }

// total returns Σ_b w_b c_b and Σ_b w_b.
func (e *Estimate) total() ([]complex128, float64) {
	sum := make([]complex128, len(e.Batches[0]))
	all := 0.0
	for b, batch := range e.Batches {
		w := complex(e.Weights[b], 0)
		for i, v := range batch {
			sum[i] += w * v
		}
		all += e.Weights[b]
	}
	return sum, all
}

// Mean returns the amplitudes, a new slice.
func (e *Estimate) Mean() []complex128 { return e.mean(0, len(e.Batches)) }

// mean averages the batches from lo to hi.
func (e *Estimate) mean(lo, hi int) []complex128 {
	part := *e
	part.Batches, part.Weights = e.Batches[lo:hi], e.Weights[lo:hi]
	sum, all := part.total()
	scale := complex(1/all, 0)
	for i := range sum {
		sum[i] *= scale
	}
	return sum
}

// Halves returns the amplitudes of the first and of the second half of the
// batches, after the same steps. There must be at least two batches.
func (e *Estimate) Halves() (first, second []complex128) {
	half := len(e.Batches) / 2
	if half == 0 {
		panic("amplitude: one batch has no halves")
	}
	return e.mean(0, half), e.mean(half, len(e.Batches))
}

// spread is the factor of |c_b − c|² in the jackknife variance of a mean.
func spread(weight, all float64, batches int) float64 {
	f := weight / (all - weight)
	return f * f * float64(batches-1) / float64(batches)
}

// Errors returns one standard error of the real and of the imaginary part of
// each amplitude, a new slice. With one batch they are infinite.
func (e *Estimate) Errors() []complex128 {
	mean := e.Mean()
	all := 0.0
	for _, w := range e.Weights {
		all += w
	}
	se := make([]complex128, len(mean))
	for b, batch := range e.Batches {
		f := spread(e.Weights[b], all, len(e.Batches))
		if len(e.Batches) == 1 {
			f = math.Inf(1)
		}
		for i, v := range batch {
			re, im := real(v)-real(mean[i]), imag(v)-imag(mean[i])
			se[i] += complex(f*re*re, f*im*im)
		}
	}
	for i, v := range se {
		if len(e.Batches) == 1 {
			v = complex(math.Inf(1), math.Inf(1))
		}
		se[i] = complex(math.Sqrt(real(v)), math.Sqrt(imag(v)))
	}
	return se
}

// Noise returns Σ_D of the squared standard errors: the weight that shot noise
// adds to |c|².
func (e *Estimate) Noise() float64 {
	sum := 0.0
	for _, v := range e.Errors() {
		sum += real(v)*real(v) + imag(v)*imag(v)
	}
	return sum
}

// Clone returns a copy that shares only the strings.
func (e *Estimate) Clone() *Estimate {
	c := *e
	c.Batches = make([][]complex128, len(e.Batches))
	for b := range c.Batches {
		c.Batches[b] = append([]complex128(nil), e.Batches[b]...)
	}
	c.Weights = append([]float64(nil), e.Weights...)
	c.Steps = append([]Step(nil), e.Steps...)
	return &c
}

// parallel calls do(i, scratch) for i < n on all cores; every core has one
// scratch vector of the given length, made when first asked for.
func parallel(n, length int, do func(i int, scratch func() []complex128)) {
	var next atomic.Int64
	var wg sync.WaitGroup
	for range min(n, runtime.GOMAXPROCS(0)) {
		wg.Go(func() {
			var own []complex128
			scratch := func() []complex128 {
				if own == nil {
					own = make([]complex128, length)
				}
				return own
			}
			for i := int(next.Add(1)) - 1; i < n; i = int(next.Add(1)) - 1 {
				do(i, scratch)
			}
		})
	}
	wg.Wait()
}
