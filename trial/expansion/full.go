package expansion

import (
	"leadline/hamiltonian"
	"leadline/hamiltonian/exact"
	"leadline/trial"
)

// image computes local energies of an expansion over all orbitals as a ratio of
// two overlaps, E_L = ⟨HΨ|φ⟩/⟨Ψ|φ⟩.
type image struct {
	constant complex128
	source   *Source // H|Ψ⟩
	scratch  trial.Scratch[[]trial.Overlap]
}

// newImage returns nil unless the expansion is over all orbitals and H|Ψ⟩ can be
// had in the given memory, in bytes.
func (s *Source) newImage(h *hamiltonian.Hamiltonian, memory int64) *image {
	e := s.expansion
	if s.core > 0 || s.active < s.sector.Orbitals {
		return nil
	}
	// The operator with its vectors, the list of H|Ψ⟩ and its matrix in three forms.
	dim, need := exact.Estimate(s.sector, 1)
	if dim > maxWhole || need > memory || int64(dim)*(16*3+48) > memory {
		return nil
	}
	if s.columns != nil {
		h = h.Rotate(s.supportColumns())
	}
	operator, err := exact.NewOperator(h)
	if err != nil {
		return nil
	}
	space, re, im, ok := s.whole()
	if !ok {
		return nil
	}
	apply := func(x []float64) []float64 {
		if x == nil {
			return nil
		}
		y := make([]float64, len(x))
		operator.Apply(y, x)
		return y
	}
	product := FromMatrix(e.Orbitals, 0, space.Up, space.Down, apply(re), apply(im))
	product.Columns = e.Columns
	source, err := New(product)
	if err != nil {
		return nil // H|Ψ⟩ = 0
	}
	source.scale += s.scale // whole divides by the largest amplitude
	return &image{constant: complex(h.Constant, 0), source: source, scratch: trial.Scratch[[]trial.Overlap]{New: func() *[]trial.Overlap { return new([]trial.Overlap) }}}
}

// LocalEnergies implements [trial.Energies].
func (e *image) LocalEnergies(m *trial.Mixed, w trial.Walkers) {
	a := e.scratch.Get()
	defer e.scratch.Put(a)
	*a = trial.Grow(*a, w.Count)
	e.source.Overlaps(*a, w)
	for i, o := range *a {
		if m.Overlap[i].Zero() {
			m.Energy[i] = e.constant
			continue
		}
		m.Energy[i] = o.Over(m.Overlap[i])
	}
}
