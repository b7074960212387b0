package exact

import (
	"math"

	"gonum.org/v1/gonum/mat"

	"leadline/hamiltonian"
	"leadline/hamiltonian/linalg"
)

// tensor is the two-body tensor of a pair of spins, V_pq,rs = Σ_g s_g L_pq L′_rs,
// as the sum of a part symmetric in (pq) and (rs) and one antisymmetric in both.
type tensor struct {
	symmetric, antisymmetric []float64 // Pairs(M) × Pairs(M); nil where zero
	pairs                    int
}

func newTensor(h *hamiltonian.Hamiltonian, left, right int) *tensor {
	f := h.Factors
	t := &tensor{pairs: hamiltonian.Pairs(h.Orbitals)}
	t.symmetric = contract(f, left, right, 0, f.Symmetric(), t.pairs)
	t.antisymmetric = contract(f, left, right, f.Symmetric(), f.Count(), t.pairs)
	return t
}

// contract returns Σ_g s_g L_g L′_gᵀ over a range of factors, 2·ng·pairs² flops.
func contract(f *hamiltonian.Factors, left, right, from, to, pairs int) []float64 {
	if from == to {
		return nil
	}
	scaled := make([]float64, (to-from)*pairs)
	for g := from; g < to; g++ {
		for i, v := range f.Row(g, left) {
			scaled[(g-from)*pairs+i] = f.Sign[g] * v
		}
	}
	v := make([]float64, pairs*pairs)
	linalg.Gemm(true, false, pairs, pairs, to-from, 1, scaled, pairs, f.Packed[right][from*pairs:to*pairs], pairs, 0, v, pairs)
	return v
}

// at returns V_pq,rs.
func (t *tensor) at(p, q, r, s int) float64 {
	place := hamiltonian.Pair(p, q)*t.pairs + hamiltonian.Pair(r, s)
	var v float64
	if t.symmetric != nil {
		v = t.symmetric[place]
	}
	if t.antisymmetric != nil && p != q && r != s {
		if (p < q) != (r < s) {
			v -= t.antisymmetric[place]
		} else {
			v += t.antisymmetric[place]
		}
	}
	return v
}

// pairIndex numbers the pairs p < q of M orbitals.
func pairIndex(p, q int) int { return q*(q-1)/2 + p }

// exchanged returns the antisymmetrised tensor G over pairs p < r and q < s,
//
//	½ Σ V_pq,rs c†_p c†_r c_s c_q = Σ_{p<r, q<s} G_pr,qs c†_p c†_r c_s c_q,
//	G_pr,qs = V_pq,rs − V_ps,rq,
//
// and the largest magnitude in it.
func (t *tensor) exchanged(orbitals int) (g []float64, largest float64) {
	n := orbitals * (orbitals - 1) / 2
	g = make([]float64, n*n)
	for r := range orbitals {
		for p := range r {
			row := g[pairIndex(p, r)*n:]
			for s := range orbitals {
				for q := range s {
					v := t.at(p, q, r, s) - t.at(p, s, r, q)
					row[pairIndex(q, s)] = v
					largest = max(largest, math.Abs(v))
				}
			}
		}
	}
	return g, largest
}

// foldOneBody adds the one-body part to G, exact for n ≥ 2 electrons:
// Σ h_pq c†_p c_q = 1/(n−1) Σ h_pq c†_p c†_r c_r c_q.
func foldOneBody(g []float64, one *mat.SymDense, electrons int) {
	m := one.SymmetricDim()
	n := m * (m - 1) / 2
	scale := 1 / float64(electrons-1)
	for r := range m {
		for p := range r {
			row := g[pairIndex(p, r)*n:]
			for s := range m {
				for q := range s {
					var v float64
					if r == s {
						v += one.At(p, q)
					}
					if p == q {
						v += one.At(r, s)
					}
					if r == q {
						v -= one.At(p, s)
					}
					if p == s {
						v -= one.At(r, q)
					}
					row[pairIndex(q, s)] += scale * v
				}
			}
		}
	}
}

// CommutesWithSpin reports whether H commutes with the total spin, so that its
// eigenstates have one: one-body parts alike, and the two-body part of like and
// of unlike spins that of one spin-free tensor, to 1e-9 of its largest element.
// It looks at the operator, not at the factors, so the spin decomposition of the
// Hubbard model passes. Cost: M⁴ and 6·ng·Pairs(M)² flops.
func CommutesWithSpin(h *hamiltonian.Hamiltonian) bool {
	if h.SpinFree() {
		return true
	}
	m := h.Orbitals
	mixed := newTensor(h, hamiltonian.Up, hamiltonian.Down)
	want, scale := mixed.exchanged(m)
	for p := range m {
		for q := range m {
			scale = max(scale, math.Abs(h.OneBody[hamiltonian.Up].At(p, q)))
			for r := range m {
				for s := range m {
					scale = max(scale, math.Abs(mixed.at(p, q, r, s)))
				}
			}
		}
	}
	tolerance := 1e-9 * scale
	for p := range m {
		for q := range m {
			if math.Abs(h.OneBody[hamiltonian.Up].At(p, q)-h.OneBody[hamiltonian.Down].At(p, q)) > tolerance {
				return false
			}
			for r := range m {
				for s := range m {
					if math.Abs(mixed.at(p, q, r, s)-mixed.at(r, s, p, q)) > tolerance {
						return false
					}
				}
			}
		}
	}
	for spin := range 2 {
		got, _ := newTensor(h, spin, spin).exchanged(m)
		for i, v := range got {
			if math.Abs(v-want[i]) > tolerance {
				return false
			}
		}
	}
	return true
}
