package determinant

import (
	"gonum.org/v1/gonum/mat"

	"leadline/hamiltonian"
)

// OneBodyDensity implements [trial.Expectations]: Re C C†.
func (d *Determinant) OneBodyDensity() [2]*mat.SymDense {
	var out [2]*mat.SymDense
	for spin := range 2 {
		out[spin] = mat.NewSymDense(d.sector.Orbitals, nil)
		if d.sector.Electrons(spin) == 0 {
			continue
		}
		var part mat.SymDense
		out[spin].SymOuterK(1, d.orbitals.Re[spin])
		if im := d.orbitals.Im[spin]; im != nil {
			part.SymOuterK(1, im)
			out[spin].AddSym(out[spin], &part)
		}
	}
	return out
}

// Energy implements [trial.Expectations], from Slater's rules with F_g = C†L_gC:
//
//	E = E_c + Σ_σ tr(C†hC) + ½ Σ_g s_g [(Σ_σ tr F_g)² − Σ_σ tr(F_g F_g)]
func (d *Determinant) Energy(h *hamiltonian.Hamiltonian) float64 {
	energy := complex(h.Constant, 0)
	m := d.sector.Orbitals
	l := mat.NewDense(m, m, nil)
	for spin := range 2 {
		for i, f := range d.project(h.OneBody[spin], spin) {
			energy += f[i]
		}
	}
	for g, sign := range h.Factors.Sign {
		var trace, exchange complex128
		for spin := range 2 {
			h.Factors.Unpack(l, g, spin)
			f := d.project(l, spin)
			for i := range f {
				trace += f[i][i]
				for j := range f {
					exchange += f[i][j] * f[j][i]
				}
			}
		}
		energy += complex(0.5*sign, 0) * (trace*trace - exchange)
	}
	return real(energy)
}

// project returns C†AC for one spin, N×N.
func (d *Determinant) project(a mat.Matrix, spin int) [][]complex128 {
	n := d.sector.Electrons(spin)
	out := make([][]complex128, n)
	for i := range out {
		out[i] = make([]complex128, n)
	}
	if n == 0 {
		return out
	}
	planes := []*mat.Dense{d.orbitals.Re[spin]}
	if im := d.orbitals.Im[spin]; im != nil {
		planes = append(planes, im)
	}
	// C† A C = Σ_ab (−i)^a i^b Cₐᵀ A C_b over the real (0) and imaginary (1) planes.
	for b, right := range planes {
		var ac mat.Dense
		ac.Mul(a, right)
		for c, left := range planes {
			var product mat.Dense
			product.Mul(left.T(), &ac)
			factor := []complex128{1, complex(0, 1), complex(0, -1), 1}[2*c+b]
			for i := range n {
				for j := range n {
					out[i][j] += factor * complex(product.At(i, j), 0)
				}
			}
		}
	}
	return out
}

// SpinSquared implements [trial.Expectations]:
// ⟨S²⟩ = S_z(S_z+1) + N_down − Σ_ij |⟨i_up|j_down⟩|².
func (d *Determinant) SpinSquared() float64 {
	sz := 0.5 * float64(d.sector.Up-d.sector.Down)
	s := sz*(sz+1) + float64(d.sector.Down)
	for i := range d.sector.Up {
		for j := range d.sector.Down {
			var o complex128
			for p := range d.sector.Orbitals {
				a := d.orbitals.At(hamiltonian.Up, p, i)
				o += complex(real(a), -imag(a)) * d.orbitals.At(hamiltonian.Down, p, j)
			}
			s -= real(o)*real(o) + imag(o)*imag(o)
		}
	}
	return s
}
