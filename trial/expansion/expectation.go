package expansion

import (
	"math/bits"

	"gonum.org/v1/gonum/mat"

	"leadline/hamiltonian"
	"leadline/hamiltonian/exact"
	"leadline/hamiltonian/strings"
	"leadline/trial"
)

// maxWhole bounds the determinants of a window whose coefficients are spread out
// over all strings for expectation values, 8 bytes each.
const maxWhole = 1 << 24

// whole returns the coefficients over all strings of the window, divided by the
// largest; ok is false where there are too many.
func (s *Source) whole() (space *exact.Space, re, im []float64, ok bool) {
	e := s.expansion
	if strings.Count(e.Active, e.Up) > maxWhole/strings.Count(e.Active, e.Down) {
		return nil, nil, nil, false
	}
	space = exact.NewSpace(hamiltonian.Sector{Orbitals: e.Active, Up: e.Up, Down: e.Down})
	re = make([]float64, space.Dim())
	largest := e.largest()
	for _, d := range e.Determinants {
		k := space.Up.Index(d.Up)*space.Down.Len() + space.Down.Index(d.Down)
		re[k] = real(d.Amplitude) / largest
		if imag(d.Amplitude) != 0 {
			if im == nil {
				im = make([]float64, space.Dim())
			}
			im[k] = imag(d.Amplitude) / largest
		}
	}
	return space, re, im, true
}

// OneBodyDensity implements [trial.Expectations]. Its eigenvectors are natural
// orbitals.
func (s *Source) OneBodyDensity() [2]*mat.SymDense {
	var out [2]*mat.SymDense
	ns := s.supported()
	space, re, im, ok := s.whole()
	if !ok {
		return s.densityByDeterminants()
	}
	for spin := range 2 {
		out[spin] = mat.NewSymDense(s.sector.Orbitals, nil)
		if s.sector.Electrons(spin) == 0 {
			continue
		}
		support := mat.NewSymDense(ns, nil)
		for p := range s.core {
			support.SetSym(p, p, 1)
		}
		active := space.Density(re, im, spin)
		for p := range s.active {
			for q := range p + 1 {
				support.SetSym(s.core+p, s.core+q, active.At(p, q))
			}
		}
		var half, full mat.Dense
		half.Mul(s.support.Re[spin], support)
		full.Mul(&half, s.support.Re[spin].T())
		for p := range s.sector.Orbitals {
			for q := range p + 1 {
				out[spin].SetSym(p, q, 0.5*(full.At(p, q)+full.At(q, p)))
			}
		}
	}
	return out
}

// Energy implements [trial.Expectations]: in the window with the core folded in,
// or, where that has too many determinants, determinant by determinant. h must be
// a valid Hamiltonian of the source's sector.
func (s *Source) Energy(h *hamiltonian.Hamiltonian) float64 {
	if h.Sector != s.sector {
		panic("expansion: hamiltonian of another sector")
	}
	if _, re, im, ok := s.whole(); ok && s.expansion.Up+s.expansion.Down > 0 {
		if s.columns != nil || s.supported() < s.sector.Orbitals {
			h = h.Rotate(s.supportColumns())
		}
		window, err := h.FreezeCore(s.core)
		if err != nil {
			panic("expansion: " + err.Error())
		}
		operator, err := exact.NewOperator(window)
		if err != nil {
			panic("expansion: hamiltonian is not valid")
		}
		return operator.Energy(re, im)
	}
	return s.energyByDeterminants(h)
}

func (s *Source) energyByDeterminants(h *hamiltonian.Hamiltonian) float64 {
	guide, err := trial.NewGuide(h, s, 1<<30)
	if err != nil {
		panic("expansion: hamiltonian of another sector")
	}
	var energy float64
	mixed := guide.NewMixed(batch)
	s.byDeterminants(func(w trial.Walkers, weights []float64) {
		guide.Evaluate(mixed, w)
		guide.LocalEnergies(mixed, w)
		for i, weight := range weights {
			energy += weight * real(mixed.Energy[i])
		}
	})
	return energy
}

// supportColumns returns the support orbitals, M×(core+active).
func (s *Source) supportColumns() *mat.Dense {
	if s.support.Re[0] != nil {
		return s.support.Re[0]
	}
	return s.support.Re[1]
}

// batch is the number of determinants that byDeterminants hands on at once.
const batch = 64

// byDeterminants calls f with the determinants as walkers and their weights
// |C_D|²/Σ|C|²: ⟨Ψ|A|Ψ⟩ = Σ_D C_D ⟨Ψ|A|D⟩ is the average of the mixed estimators
// ⟨Ψ|A|D⟩/⟨Ψ|D⟩ with these weights, since ⟨Ψ|D⟩ = C_D*.
func (s *Source) byDeterminants(f func(w trial.Walkers, weights []float64)) {
	norm := s.expansion.Norm()
	w := trial.NewWalkers(s.sector, false, batch)
	weights := make([]float64, 0, batch)
	flush := func() {
		if len(weights) > 0 {
			f(w.Slice(0, len(weights)), weights)
		}
		weights = weights[:0]
		clear(w.Data)
	}
	columns := s.supportColumns()
	for _, d := range s.expansion.Determinants {
		if d.Amplitude == 0 {
			continue
		}
		for spin, mask := range [2]uint64{d.Up, d.Down} {
			for j := range s.sector.Electrons(spin) {
				u := j
				if j >= s.core {
					u = s.core + bits.TrailingZeros64(mask)
					mask &= mask - 1
				}
				for p := range s.sector.Orbitals {
					w.Set(len(weights), spin, p, j, complex(columns.At(p, u), 0))
				}
			}
		}
		a := magnitude(d) / norm
		if weights = append(weights, a*a); len(weights) == batch {
			flush()
		}
	}
	flush()
}

func (s *Source) densityByDeterminants() [2]*mat.SymDense {
	var out [2]*mat.SymDense
	m, ns := s.sector.Orbitals, s.supported()
	length := (s.support.Columns(0) + s.support.Columns(1)) * m
	overlaps, density := make([]trial.Overlap, batch), make([]float64, 2*batch*length)
	sum := make([]float64, length)
	s.byDeterminants(func(w trial.Walkers, weights []float64) {
		s.Densities(overlaps, density, w)
		for i, weight := range weights {
			for k, v := range density[2*i*length:][:length] {
				sum[k] += weight * v
			}
		}
	})
	for spin := range 2 {
		out[spin] = mat.NewSymDense(m, nil)
		if s.sector.Electrons(spin) == 0 {
			continue
		}
		var full mat.Dense
		full.Mul(s.support.Re[spin], mat.NewDense(ns, m, sum[:ns*m]))
		sum = sum[ns*m:]
		for p := range m {
			for q := range p + 1 {
				out[spin].SetSym(p, q, 0.5*(full.At(p, q)+full.At(q, p)))
			}
		}
	}
	return out
}

// SpinSquared implements [trial.Expectations]:
// ⟨S²⟩ = S_z(S_z+1) + N_down − Σ_pq ⟨c†_p↓c_q↓ c†_q↑c_p↑⟩ over active orbitals;
// the core is a singlet.
func (s *Source) SpinSquared() float64 {
	if space, re, im, ok := s.whole(); ok {
		return space.SpinSquared(re, im)
	}
	return s.spinByDeterminants()
}

func (s *Source) spinByDeterminants() float64 {
	e := s.expansion
	norm := e.Norm()
	index := make(map[[2]uint64]int, len(e.Determinants))
	for k, d := range e.Determinants {
		index[[2]uint64{d.Up, d.Down}] = k
	}
	z := 0.5 * float64(e.Up-e.Down)
	sum := z*(z+1) + float64(e.Down)
	for _, d := range e.Determinants {
		c := complex(real(d.Amplitude)/norm, imag(d.Amplitude)/norm)
		sum -= float64(electrons(d.Up&d.Down)) * (real(c)*real(c) + imag(c)*imag(c))
		for ps := d.Up &^ d.Down; ps != 0; ps &= ps - 1 {
			p := bits.TrailingZeros64(ps)
			for qs := d.Down &^ d.Up; qs != 0; qs &= qs - 1 {
				q := bits.TrailingZeros64(qs)
				k, ok := index[[2]uint64{d.Up ^ 1<<p ^ 1<<q, d.Down ^ 1<<p ^ 1<<q}]
				if !ok {
					continue
				}
				between := strings.Between(p, q)
				sign := strings.Sign(d.Up&between) * strings.Sign(d.Down&between)
				o := e.Determinants[k].Amplitude
				sum -= sign * (real(c)*real(o) + imag(c)*imag(o)) / norm
			}
		}
	}
	return sum
}
