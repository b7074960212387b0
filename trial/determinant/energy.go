package determinant

import (
	"leadline/hamiltonian"
	"leadline/hamiltonian/linalg"
	"leadline/trial"
)

// Energies implements [trial.EnergySource]:
//
//	E_L = E_c + Σ_σ h̃·D + ½ Σ_g s_g ⟨v_g⟩² − ½ Σ_σ X_σ,  h̃ = C†h
//	X   = Σ_g s_g tr(F_g F_g),  F_g = L̃_g Dᵀ,  L̃_g = C†L_g
//	    = Σ_iq,js D_iq K_iq,js D_js,  K_iq,js = Σ_g s_g L̃_g,is L̃_g,jq
//
// The direct term is free: ⟨v_g⟩ is what the force bias uses. The exchange term
// is one product with K (4·N²M² flops for each walker and spin) where K and its
// 8·N²M² bytes for each spin fit in memory, and goes factor by factor
// (4·ng·N²M flops) otherwise.
func (d *Determinant) Energies(h *hamiltonian.Hamiltonian, r *trial.Rotated, memory int64) trial.Energies {
	e := &energies{d: d, h: h, scratch: trial.Scratch[energyArea]{New: func() *energyArea { return new(energyArea) }}}
	e.spins = 2
	if d.restricted && h.SpinFree() {
		e.spins = 1
	}
	var need int64
	for spin := range e.spins {
		n := int64(d.sector.Electrons(spin) * d.sector.Orbitals)
		need += 8 * n * n * int64(d.planes())
	}
	for spin := range 2 {
		e.oneBody[spin] = d.rotateOneBody(h, spin)
	}
	for spin := range e.spins {
		if d.sector.Electrons(spin) == 0 {
			continue
		}
		if need <= memory {
			e.exchange[spin] = newSupermatrix(d, h, r, spin)
		} else {
			e.exchange[spin] = newFactorwise(d, h, r, spin)
		}
	}
	if e.spins == 1 {
		e.exchange[1] = e.exchange[0]
	}
	return e
}

func (d *Determinant) planes() int {
	if d.orbitals.Real() {
		return 1
	}
	return 2
}

// exchanger computes X_σ of a batch from its densities: rows 2i and 2i+1 of
// density, of the given length, hold the block of this spin at offset block.
type exchanger interface {
	exchange(dst []complex128, a *energyArea, density []float64, length, block, count int)
}

type energies struct {
	d        *Determinant
	h        *hamiltonian.Hamiltonian
	spins    int             // 1 when both spins have the same tables
	oneBody  [2][2][]float64 // real and imaginary part of C†h for each spin
	exchange [2]exchanger
	scratch  trial.Scratch[energyArea]
}

type energyArea struct {
	products []float64
	density  []float64
	sum      []complex128
}

func (d *Determinant) rotateOneBody(h *hamiltonian.Hamiltonian, spin int) [2][]float64 {
	var out [2][]float64
	n, m := d.sector.Electrons(spin), d.sector.Orbitals
	if n == 0 {
		return out
	}
	one := make([]float64, m*m)
	for p := range m {
		for q := range m {
			one[p*m+q] = h.OneBody[spin].At(p, q)
		}
	}
	out[0] = make([]float64, n*m)
	c := d.orbitals.Re[spin].RawMatrix()
	linalg.Gemm(true, false, n, m, m, 1, c.Data, c.Stride, one, m, 0, out[0], m)
	if im := d.orbitals.Im[spin]; im != nil {
		out[1] = make([]float64, n*m)
		c := im.RawMatrix()
		linalg.Gemm(true, false, n, m, m, -1, c.Data, c.Stride, one, m, 0, out[1], m)
	}
	return out
}

// LocalEnergies implements [trial.Energies].
func (e *energies) LocalEnergies(m *trial.Mixed, w trial.Walkers) {
	a := e.scratch.Get()
	defer e.scratch.Put(a)
	sector := e.d.sector
	length := (sector.Up + sector.Down) * sector.Orbitals
	ng := e.h.Factors.Count()
	for i := range w.Count {
		energy := complex(e.h.Constant, 0)
		for spin := range 2 {
			block := spin * sector.Up * sector.Orbitals
			re := m.Density[2*i*length+block:]
			im := m.Density[(2*i+1)*length+block:]
			energy += dot(e.oneBody[spin], re, im)
		}
		re, im := m.Fields[2*i*ng:(2*i+1)*ng], m.Fields[(2*i+1)*ng:(2*i+2)*ng]
		var squareRe, squareIm float64
		for g, s := range e.h.Factors.Sign {
			squareRe += s * (re[g]*re[g] - im[g]*im[g])
			squareIm += s * 2 * re[g] * im[g]
		}
		m.Energy[i] = energy + complex(0.5*squareRe, 0.5*squareIm)
	}
	a.sum = trial.Grow(a.sum, w.Count)
	for spin := range 2 {
		if sector.Electrons(spin) == 0 {
			continue
		}
		if spin == hamiltonian.Up || e.spins == 2 || !w.Paired {
			block := spin * sector.Up * sector.Orbitals
			e.exchange[spin].exchange(a.sum, a, m.Density, length, block, w.Count)
		}
		for i := range w.Count {
			m.Energy[i] -= 0.5 * a.sum[i]
		}
	}
}

// dot returns Σ_k (a_k + i b_k)(re_k + i im_k); b may be nil.
func dot(ab [2][]float64, re, im []float64) complex128 {
	var sumRe, sumIm float64
	for k, v := range ab[0] {
		sumRe += v * re[k]
		sumIm += v * im[k]
	}
	for k, v := range ab[1] {
		sumRe -= v * im[k]
		sumIm += v * re[k]
	}
	return complex(sumRe, sumIm)
}
