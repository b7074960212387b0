package hamiltonian

import (
	"fmt"
	"math"

	"gonum.org/v1/gonum/mat"
)

// Pairs returns the length of a packed symmetric M×M matrix, M(M+1)/2.
func Pairs(orbitals int) int { return orbitals * (orbitals + 1) / 2 }

// Pair returns the place of element (p, q) of a packed symmetric matrix: the
// lower triangle row by row.
func Pair(p, q int) int {
	if p < q {
		p, q = q, p
	}
	return p*(p+1)/2 + q
}

// Factors holds the signed factors L^{gσ} of the two-body part,
// ½ Σ_g s_g :v_g v_g:, each packed as the lower triangle of an M×M matrix.
// Symmetric factors come first, antisymmetric ones (upper triangle = minus the
// lower, zero diagonal) last.
type Factors struct {
	// Sign holds s_g = ±1, one per factor.
	Sign []float64
	// Antisymmetric is the number of antisymmetric factors, the last ones.
	Antisymmetric int
	// Packed holds, for each spin, Count()×Pairs(M) numbers, one factor per row.
	// Both entries are the same slice when the factors act alike on both spins.
	Packed [2][]float64
}

// NewFactors returns count spin-free symmetric zero factors of sign +1.
func NewFactors(orbitals, count int) *Factors {
	f := &Factors{Sign: make([]float64, count)}
	for g := range f.Sign {
		f.Sign[g] = 1
	}
	packed := make([]float64, count*Pairs(orbitals))
	f.Packed = [2][]float64{packed, packed}
	return f
}

// Count returns the number of factors, ng.
func (f *Factors) Count() int { return len(f.Sign) }

// Symmetric returns the number of symmetric factors, the first ones.
func (f *Factors) Symmetric() int { return len(f.Sign) - f.Antisymmetric }

// SpinFree reports whether the factors act alike on both spins.
func (f *Factors) SpinFree() bool {
	if len(f.Packed[Up]) == 0 {
		return len(f.Packed[Down]) == 0
	}
	return len(f.Packed[Down]) > 0 && &f.Packed[Up][0] == &f.Packed[Down][0]
}

// Row returns the packed lower triangle of factor g, aliasing the storage.
func (f *Factors) Row(g, spin int) []float64 {
	if f.Count() == 0 {
		return nil
	}
	n := len(f.Packed[spin]) / f.Count()
	return f.Packed[spin][g*n : (g+1)*n : (g+1)*n]
}

// Parity returns +1 for a symmetric factor and −1 for an antisymmetric one.
func (f *Factors) Parity(g int) float64 {
	if g < f.Symmetric() {
		return 1
	}
	return -1
}

// Unpack writes factor g of one spin into dst, M×M.
func (f *Factors) Unpack(dst *mat.Dense, g, spin int) {
	raw, row, parity := dst.RawMatrix(), f.Row(g, spin), f.Parity(g)
	for p := range raw.Rows {
		for q := range p + 1 {
			v := row[p*(p+1)/2+q]
			raw.Data[q*raw.Stride+p] = parity * v
			raw.Data[p*raw.Stride+q] = v
		}
	}
}

func (f *Factors) validate(orbitals int) error {
	if f == nil {
		return fmt.Errorf("hamiltonian has no factors")
	}
	if f.Antisymmetric < 0 || f.Antisymmetric > f.Count() {
		return fmt.Errorf("%d of %d factors are antisymmetric", f.Antisymmetric, f.Count())
	}
	for g, s := range f.Sign {
		if s != 1 && s != -1 {
			return fmt.Errorf("sign of factor %d is %v, expected +1 or -1", g+1, s)
		}
	}
	for spin, packed := range f.Packed {
		if len(packed) != f.Count()*Pairs(orbitals) {
			return fmt.Errorf("factors of spin %d hold %d numbers, expected %d", spin, len(packed), f.Count()*Pairs(orbitals))
		}
		for i, v := range packed {
			if math.IsNaN(v) || math.IsInf(v, 0) {
				return fmt.Errorf("factor %d holds %v, expected finite numbers", i/Pairs(orbitals)+1, v)
			}
		}
	}
	return nil
}
