package meanfield

import (
	"math"

	"gonum.org/v1/gonum/mat"
)

// effective returns, per set, a matrix in the basis of h whose eigenvectors are
// the orbitals at convergence. For UHF it is the Fock matrix. For RHF and ROHF
// its blocks between classes are the gradient over twice the difference of
// occupations, those within a class the mean of up and down (Roothaan, Rev.
// Mod. Phys. 32, 179 (1960), with the block diagonal of Guest & Saunders, Mol.
// Phys. 28, 819 (1974)). Open orbitals are raised by shift and empty ones by
// two shifts (UHF: empty ones by one).
func (p *problem) effective(pt *point, shift float64) []*mat.SymDense {
	out := make([]*mat.SymDense, len(p.sets))
	for i, s := range p.sets {
		if len(s.spins) == 1 && shift == 0 {
			out[i] = pt.f[s.spins[0]]
			continue
		}
		mo := p.effectiveOrbitals(pt, s)
		for k := range len(s.bounds) - 1 {
			for q := s.bounds[k]; q < s.bounds[k+1]; q++ {
				mo.SetSym(q, q, mo.At(q, q)+float64(k)*shift)
			}
		}
		out[i] = backTransform(mo, pt.c[s.spins[0]])
	}
	return out
}

// effectiveOrbitals is effective in the orbitals of the point, without shift.
func (p *problem) effectiveOrbitals(pt *point, s rotations) *mat.SymDense {
	m := p.h.Orbitals
	mo := mat.NewSymDense(m, nil)
	for r := range m {
		for q := range r + 1 {
			num, den := 0.0, 0.0
			for _, spin := range s.spins {
				dn := p.occupation(spin, q) - p.occupation(spin, r)
				num += dn * pt.fmo[spin].At(r, q)
				den += dn
			}
			if den == 0 {
				for _, spin := range s.spins {
					num += pt.fmo[spin].At(r, q)
					den++
				}
			}
			mo.SetSym(r, q, num/den)
		}
	}
	return mo
}

func backTransform(mo *mat.SymDense, c *mat.Dense) *mat.SymDense {
	m, _ := c.Dims()
	var half, full mat.Dense
	half.Mul(c, mo)
	full.Mul(&half, c.T())
	out := mat.NewSymDense(m, nil)
	for p := range m {
		for q := range p + 1 {
			out.SetSym(p, q, 0.5*(full.At(p, q)+full.At(q, p)))
		}
	}
	return out
}

// eigenvectors returns the eigenvectors of a symmetric matrix in ascending order
// of the values, each with its largest component positive. False means that
// the matrix has numbers that are not finite.
func eigenvectors(a mat.Symmetric) ([]float64, *mat.Dense, bool) {
	var eigen mat.EigenSym
	if !eigen.Factorize(a, true) {
		return nil, nil, false
	}
	v := new(mat.Dense)
	eigen.VectorsTo(v)
	fixSigns(v)
	return eigen.Values(nil), v, true
}

// fixSigns makes the largest component of each column positive, the first of
// components equal to 1e-6.
func fixSigns(v *mat.Dense) {
	rows, columns := v.Dims()
	for j := range columns {
		best := 0
		for i := range rows {
			if math.Abs(v.At(i, j)) > math.Abs(v.At(best, j))+1e-6 {
				best = i
			}
		}
		if v.At(best, j) < 0 {
			for i := range rows {
				v.Set(i, j, -v.At(i, j))
			}
		}
	}
}

// canonical returns the same determinant with the orbitals of each class turned
// to diagonalise the class's block of the effective Fock matrix, in ascending
// order of its diagonal.
func (p *problem) canonical(pt *point) *point {
	out := &point{f: pt.f, energy: pt.energy}
	for _, s := range p.sets {
		mo := p.effectiveOrbitals(pt, s)
		c := mat.DenseCopyOf(pt.c[s.spins[0]])
		for k := range len(s.bounds) - 1 {
			from, to := s.bounds[k], s.bounds[k+1]
			if from == to {
				continue
			}
			_, v, ok := eigenvectors(mo.SliceSym(from, to))
			if !ok {
				return pt
			}
			var turned mat.Dense
			turned.Mul(c.Slice(0, p.h.Orbitals, from, to), v)
			c.Slice(0, p.h.Orbitals, from, to).(*mat.Dense).Copy(&turned)
		}
		fixSigns(c)
		for _, spin := range s.spins {
			out.c[spin] = c
		}
	}
	out.fmo = p.transform(out.f, out.c)
	return out
}
