package meanfield

import (
	"context"
	"math"

	"gonum.org/v1/gonum/floats"
	"gonum.org/v1/gonum/mat"
)

const (
	diisHistory = 8  // matrices kept; 6 to 10 is common practice
	diisStall   = 15 // iterations without halving of the gradient after which DIIS gives up
	levelShift  = 0.5
)

// diis iterates the Hartree–Fock equations with direct inversion in the
// iterative subspace (Pulay, Chem. Phys. Lett. 73, 393 (1980); J. Comput. Chem.
// 3, 556 (1982)); the error vector is the orbital gradient in the basis of h.
// Empty orbitals are raised by a level shift (Saunders & Hillier, Int. J.
// Quantum Chem. 7, 699 (1973)) from the first rise of the energy until the
// gradient is below 1e-2. It returns the last point, converged or not, and the
// number of iterations.
func (p *problem) diis(ctx context.Context, start *point, tolerance float64, limit int) (*point, int, error) {
	pt, g := start, make([]float64, p.size)
	var focks [][]*mat.SymDense
	var errors [][]float64
	best, since, shift := math.Inf(1), 0, 0.0
	for iteration := range limit {
		if err := ctx.Err(); err != nil {
			return nil, iteration, err
		}
		p.gradient(pt, g)
		norm := floats.Norm(g, 2)
		if norm < tolerance || math.IsNaN(norm) {
			return pt, iteration, nil
		}
		if norm < 0.5*best {
			best, since = norm, 0
		} else if since++; since > diisStall {
			return pt, iteration, nil
		}
		if shift > 0 && norm < 1e-2 {
			shift, focks, errors = 0, nil, nil
		}
		focks, errors = append(focks, p.effective(pt, shift)), append(errors, p.errorVector(pt, g))
		if len(focks) > diisHistory {
			focks, errors = focks[1:], errors[1:]
		}
		coefficients := extrapolate(errors)
		focks, errors = focks[len(focks)-len(coefficients):], errors[len(errors)-len(coefficients):]
		next, ok := p.diagonalise(focks, coefficients)
		if !ok {
			return pt, iteration, nil
		}
		if next.energy > pt.energy+1e-4 && shift == 0 && norm > 1e-2 {
			shift, focks, errors = levelShift, nil, nil
			continue // from the same point, with the shift
		}
		pt = next
	}
	return pt, limit, nil
}

// diagonalise returns the point of the eigenvectors of Σ_k c_k F_k, filled from
// below.
func (p *problem) diagonalise(focks [][]*mat.SymDense, coefficients []float64) (*point, bool) {
	var c [2]*mat.Dense
	for i, s := range p.sets {
		sum := mat.NewSymDense(p.h.Orbitals, nil)
		var term mat.SymDense
		for k, w := range coefficients {
			term.ScaleSym(w, focks[k][i])
			sum.AddSym(sum, &term)
		}
		_, v, ok := eigenvectors(sum)
		if !ok {
			return nil, false
		}
		for _, spin := range s.spins {
			c[spin] = v
		}
	}
	return p.at(c), true
}

// errorVector returns C g Cᵀ of all sets, with g as an antisymmetric matrix.
func (p *problem) errorVector(pt *point, g []float64) []float64 {
	k := p.antisymmetric(g)
	var out []float64
	for _, s := range p.sets {
		var half, full mat.Dense
		half.Mul(pt.c[s.spins[0]], k[s.spins[0]])
		full.Mul(&half, pt.c[s.spins[0]].T())
		out = append(out, full.RawMatrix().Data...)
	}
	return out
}

// extrapolate returns the coefficients, summing to one, that minimise the norm
// of the combined error of the most recent vectors; fewer vectors than given
// where they are linearly dependent.
func extrapolate(errors [][]float64) []float64 {
	for ; len(errors) > 1; errors = errors[1:] {
		n := len(errors)
		a, rhs := mat.NewDense(n+1, n+1, nil), mat.NewVecDense(n+1, nil)
		scale := floats.Dot(errors[n-1], errors[n-1])
		for i := range n {
			for j := range n {
				a.Set(i, j, floats.Dot(errors[i], errors[j])/scale)
			}
			a.Set(i, n, 1)
			a.Set(n, i, 1)
		}
		rhs.SetVec(n, 1)
		var x mat.VecDense
		if err := x.SolveVec(a, rhs); err == nil {
			return x.RawVector().Data[:n]
		}
	}
	return []float64{1}
}
