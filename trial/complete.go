package trial

import (
	"gonum.org/v1/gonum/mat"

	"leadline/hamiltonian"
)

// Completed supplies density and local energy from a source's overlaps alone:
// an overlap is linear in each column of a walker, so with φ[k→u] the walker
// whose column k is replaced by u,
//
//	⟨c†_p c_q⟩ = Σ_k φ_qk O(φ[k→e_p]) / O
//	⟨H⟩        = E_c + Σ_k O(φ[k→hφ_k])/O + ½ Σ_g s_g Σ_{k≠l} O(φ[k→L_gφ_k, l→L_gφ_l])/O
//
// with k, l over the columns of both spins. It is slow (N·M and ng·N² overlaps
// for each walker) and right for every source: the oracle for fast paths.
type Completed struct {
	Source
}

// Complete returns a source with all abilities, computed from overlaps.
func Complete(s Source) Completed { return Completed{s} }

// Support returns all orbitals, M×M for both spins.
func (c Completed) Support() Support {
	m := c.Sector().Orbitals
	one := mat.NewDense(m, m, nil)
	for p := range m {
		one.Set(p, p, 1)
	}
	return RealOrbitals(one, one)
}

// Densities implements [DensitySource].
func (c Completed) Densities(dst []Overlap, density []float64, w Walkers) {
	w = w.Unpaired()
	m := w.Orbitals
	length := 2 * m * m
	c.Overlaps(dst[:w.Count], w)
	clear(density[:2*w.Count*length])
	for i := range w.Count {
		if dst[i].Zero() {
			continue
		}
		re, im := density[2*i*length:(2*i+1)*length], density[(2*i+1)*length:(2*i+2)*length]
		for spin := range 2 {
			n := w.Electrons(spin)
			if n == 0 {
				continue
			}
			batch := repeat(w, i, n*m)
			for k := range n {
				for p := range m {
					for q := range m {
						batch.Set(k*m+p, spin, q, k, 0)
					}
					batch.Set(k*m+p, spin, p, k, 1)
				}
			}
			overlaps := make([]Overlap, batch.Count)
			c.Overlaps(overlaps, batch)
			for p := range m {
				for q := range m {
					var sum complex128
					for k := range n {
						sum += w.At(i, spin, q, k) * overlaps[k*m+p].Over(dst[i])
					}
					re[(spin*m+p)*m+q] = real(sum)
					im[(spin*m+p)*m+q] = imag(sum)
				}
			}
		}
	}
}

// Energies implements [EnergySource].
func (c Completed) Energies(h *hamiltonian.Hamiltonian, _ *Rotated, _ int64) Energies {
	return completedEnergies{c.Source, h}
}

type completedEnergies struct {
	Source
	h *hamiltonian.Hamiltonian
}

func (c completedEnergies) LocalEnergies(m *Mixed, w Walkers) {
	w = w.Unpaired()
	for i := range w.Count {
		m.Energy[i] = c.localEnergy(w, i, m.Overlap[i])
	}
}

func (c completedEnergies) localEnergy(w Walkers, i int, reference Overlap) complex128 {
	energy := complex(c.h.Constant, 0)
	if reference.Zero() {
		return energy
	}
	m, n := w.Orbitals, w.Up+w.Down
	spinOf := func(k int) (spin, column int) {
		if k < w.Up {
			return hamiltonian.Up, k
		}
		return hamiltonian.Down, k - w.Up
	}
	apply := func(dst Walkers, at int, operator mat.Matrix, k int) {
		spin, column := spinOf(k)
		for p := range m {
			var v complex128
			for q := range m {
				v += complex(operator.At(p, q), 0) * w.At(i, spin, q, column)
			}
			dst.Set(at, spin, p, column, v)
		}
	}
	single := repeat(w, i, n)
	for k := range n {
		spin, _ := spinOf(k)
		apply(single, k, c.h.OneBody[spin], k)
	}
	energy += c.sum(single, reference)
	if n < 2 {
		return energy
	}
	l := [2]*mat.Dense{mat.NewDense(m, m, nil), mat.NewDense(m, m, nil)}
	for g, sign := range c.h.Factors.Sign {
		for spin := range 2 {
			c.h.Factors.Unpack(l[spin], g, spin)
		}
		double := repeat(w, i, n*(n-1)/2)
		at := 0
		for k := range n {
			for j := range k {
				spinK, _ := spinOf(k)
				spinJ, _ := spinOf(j)
				apply(double, at, l[spinK], k)
				apply(double, at, l[spinJ], j)
				at++
			}
		}
		energy += complex(sign, 0) * c.sum(double, reference)
	}
	return energy
}

// sum returns Σ_i O(φ_i) over the batch, divided by the reference overlap.
func (c completedEnergies) sum(batch Walkers, reference Overlap) complex128 {
	overlaps := make([]Overlap, batch.Count)
	c.Overlaps(overlaps, batch)
	var sum complex128
	for _, o := range overlaps {
		sum += o.Over(reference)
	}
	return sum
}

// repeat returns a batch of count copies of walker i.
func repeat(w Walkers, i, count int) Walkers {
	out := NewWalkers(w.Sector, w.Paired, count)
	for k := range count {
		copy(out.Walker(k), w.Walker(i))
	}
	return out
}
