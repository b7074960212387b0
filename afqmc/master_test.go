package afqmc

import (
	"math"
	"math/cmplx"
	"testing"

	"gonum.org/v1/gonum/mat"

	"leadline/hamiltonian"
	"leadline/trial"
	"leadline/trial/determinant"
)

// The master test: one step, averaged over the fields by quadrature instead of
// sampling, is compared with exp(−τH) on an asymmetric two-electron problem:
//
//	E_y[ I(y) |φ′⟩/⟨Ψ_T|φ′⟩ ] = exp(−τH)|φ⟩/⟨Ψ_T|φ⟩ + O(τ²)
//
// A wrong sign, a missing shift or a lost constant leaves an error of order τ,
// whose ratio per halving of τ is 2 instead of 4.

// smallSystem is M = 3, one up and one down electron, three factors.
func smallSystem(signs [3]float64, antisymmetric int, resolved bool) *hamiltonian.Hamiltonian {
	const m = 3
	h := &hamiltonian.Hamiltonian{
		Sector:   hamiltonian.Sector{Orbitals: m, Up: 1, Down: 1},
		Constant: 0.3,
		Factors:  hamiltonian.NewFactors(m, 3),
	}
	one := mat.NewSymDense(m, []float64{-1.1, 0.2, -0.1, 0.2, -0.4, 0.15, -0.1, 0.15, 0.3})
	h.OneBody = [2]*mat.SymDense{one, one}
	copy(h.Factors.Packed[0], []float64{
		0.6, 0.1, 0.5, -0.2, 0.05, 0.7,
		0.1, 0.3, -0.2, 0.1, 0.25, 0.15,
		-0.05, 0.1, 0.2, 0.2, -0.15, 0.1,
	})
	if antisymmetric == 1 {
		copy(h.Factors.Packed[0][12:], []float64{0, 0.2, 0, -0.3, 0.1, 0})
		h.Factors.Antisymmetric = 1
	}
	if resolved {
		down := append([]float64(nil), h.Factors.Packed[0]...)
		for i := range down {
			down[i] *= -0.7
		}
		h.Factors.Packed[1] = down
		other := mat.NewSymDense(m, []float64{-0.9, 0.1, 0.05, 0.1, -0.5, 0.1, 0.05, 0.1, 0.2})
		h.OneBody[1] = other
	}
	copy(h.Factors.Sign, signs[:])
	return h
}

// dense returns H in the basis of pairs (p up, q down), 9×9.
func dense(h *hamiltonian.Hamiltonian) *mat.SymDense {
	m := h.Orbitals
	out := mat.NewSymDense(m*m, nil)
	l := [2]*mat.Dense{mat.NewDense(m, m, nil), mat.NewDense(m, m, nil)}
	for a := range m * m {
		for b := a; b < m*m; b++ {
			p, q, r, s := a/m, a%m, b/m, b%m
			v := 0.0
			if a == b {
				v += h.Constant
			}
			if q == s {
				v += h.OneBody[0].At(p, r)
			}
			if p == r {
				v += h.OneBody[1].At(q, s)
			}
			for g, sign := range h.Factors.Sign {
				h.Factors.Unpack(l[0], g, 0)
				h.Factors.Unpack(l[1], g, 1)
				v += sign * l[0].At(p, r) * l[1].At(q, s)
			}
			out.SetSym(a, b, v)
		}
	}
	return out
}

// hermite holds Gauss–Hermite nodes and weights for a standard normal deviate,
// from the eigenvalues of the Jacobi matrix (Golub & Welsch, Math. Comput. 23,
// 221 (1969)).
func hermite(n int) (nodes, weights []float64) {
	jacobi := mat.NewSymDense(n, nil)
	for i := 1; i < n; i++ {
		jacobi.SetSym(i-1, i, math.Sqrt(float64(i)))
	}
	var eigen mat.EigenSym
	eigen.Factorize(jacobi, true)
	var v mat.Dense
	eigen.VectorsTo(&v)
	for i := range n {
		weights = append(weights, v.At(0, i)*v.At(0, i))
	}
	return eigen.Values(nil), weights
}

// averagedStepError returns |averaged step − exp(−τH)| relative to the latter.
func averagedStepError(t *testing.T, h *hamiltonian.Hamiltonian, trialColumns, walker [2][]complex128, tau float64) float64 {
	t.Helper()
	const n = 12
	m := h.Orbitals
	nodes, weights := hermite(n)
	count := n * n * n

	var columns trial.Orbitals
	for spin := range 2 {
		norm := 0.0
		for _, v := range trialColumns[spin] {
			norm += real(v)*real(v) + imag(v)*imag(v)
		}
		columns.Re[spin], columns.Im[spin] = mat.NewDense(m, 1, nil), mat.NewDense(m, 1, nil)
		for p, v := range trialColumns[spin] {
			columns.Re[spin].Set(p, 0, real(v)/math.Sqrt(norm))
			columns.Im[spin].Set(p, 0, imag(v)/math.Sqrt(norm))
		}
	}
	source, err := determinant.New(m, columns)
	if err != nil {
		t.Fatal(err)
	}
	guide, err := trial.NewGuide(h, source, 1<<30)
	if err != nil {
		t.Fatal(err)
	}
	w, err := NewWalk(guide, columns, Options{TimeStep: tau, Walkers: count, Cap: CapOff})
	if err != nil {
		t.Fatal(err)
	}
	defer w.Close()
	w.Propagator.Order = 12
	for i := range count {
		for spin := range 2 {
			for p, v := range walker[spin] {
				w.walkers.Set(i, spin, p, 0, v)
			}
		}
	}
	w.crew.run(len(w.tiles), func(ws *workspace, k int) { w.evaluate(ws, w.tiles[k], false) })
	before := w.State.Overlap[0].Value()
	w.deviates = func(_, i int, y []float64) {
		y[0], y[1], y[2] = nodes[i/(n*n)], nodes[i/n%n], nodes[i%n]
	}
	if err := w.Step(false, false); err != nil {
		t.Fatal(err)
	}
	average := make([]complex128, m*m)
	for i := range count {
		weight := weights[i/(n*n)] * weights[i/n%n] * weights[i%n]
		factor := complex(weight, 0) * cmplx.Exp(w.importance[i]) / w.State.Overlap[i].Value()
		// The imaginary part of ln I must be arg R plus that of the importance
		// exponent; here it enters in full.
		for a := range average {
			average[a] += factor * w.walkers.At(i, 0, a/m, 0) * w.walkers.At(i, 1, a%m, 0)
		}
	}
	var eigen mat.EigenSym
	eigen.Factorize(dense(h), true)
	var vectors mat.Dense
	eigen.VectorsTo(&vectors)
	values := eigen.Values(nil)
	var difference, size float64
	for a := range average {
		var want complex128
		for k, e := range values {
			var projection complex128
			for b := range average {
				projection += complex(vectors.At(b, k), 0) * walker[0][b/m] * walker[1][b%m]
			}
			want += complex(vectors.At(a, k)*math.Exp(-tau*e), 0) * projection
		}
		want /= before
		got := average[a] * complex(math.Exp(-tau*w.Propagator.Constant), 0)
		difference += math.Pow(cmplx.Abs(got-want), 2)
		size += math.Pow(cmplx.Abs(want), 2)
	}
	return math.Sqrt(difference / size)
}

func TestAveragedStep(t *testing.T) {
	realTrial := [2][]complex128{{1, 0.4, -0.2}, {0.9, -0.3, 0.35}}
	complexTrial := [2][]complex128{{1, 0.4 + 0.3i, -0.2}, {0.9i, -0.3, 0.35 - 0.5i}}
	walker := [2][]complex128{{1, 0.2 - 0.3i, 0.3i}, {0.8 + 0.2i, -0.5, 0.25 + 0.1i}}
	paired := [2][]complex128{{1, 0.4, -0.2}, {1, 0.4, -0.2}}
	same := [2][]complex128{walker[0], walker[0]}
	for _, c := range []struct {
		name          string
		signs         [3]float64
		antisymmetric int
		resolved      bool
		trial, walker [2][]complex128
	}{
		{name: "repulsive", signs: [3]float64{1, 1, 1}, trial: realTrial, walker: walker},
		{name: "complex trial", signs: [3]float64{1, 1, 1}, trial: complexTrial, walker: walker},
		{name: "attractive", signs: [3]float64{-1, -1, -1}, trial: realTrial, walker: walker},
		{name: "both signs, antisymmetric", signs: [3]float64{1, -1, -1}, antisymmetric: 1, trial: realTrial, walker: walker},
		{name: "antisymmetric, complex trial", signs: [3]float64{1, -1, 1}, antisymmetric: 1, trial: complexTrial, walker: walker},
		{name: "spin-resolved", signs: [3]float64{1, -1, 1}, resolved: true, trial: realTrial, walker: walker},
		{name: "paired walkers", signs: [3]float64{1, 1, 1}, trial: paired, walker: same},
	} {
		t.Run(c.name, func(t *testing.T) {
			h := smallSystem(c.signs, c.antisymmetric, c.resolved)
			var last float64
			for _, tau := range []float64{0.01, 0.005, 0.0025} {
				e := averagedStepError(t, h, c.trial, c.walker, tau)
				if last != 0 {
					if ratio := last / e; math.Abs(ratio-4) > 0.3 {
						t.Errorf("τ = %g: error %.3g, ratio per halving %.3f, expected 4.0 ± 0.3", tau, e, ratio)
					}
				}
				t.Logf("τ = %g: error %.3g", tau, e)
				last = e
			}
		})
	}
}
