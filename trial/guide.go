package trial

import (
	"fmt"

	"gonum.org/v1/gonum/mat"

	"leadline/hamiltonian"
)

// Guide is a trial bound to a Hamiltonian: all that the walk asks for, computed
// by the source where it is able and completed from overlaps otherwise. It is
// safe for concurrent use with one Mixed per goroutine.
type Guide struct {
	Hamiltonian *hamiltonian.Hamiltonian
	Source      Source

	density  DensitySource
	energies Energies
	rotated  *Rotated
}

// NewGuide binds a source to a Hamiltonian of the same sector. Tables for the
// local energy take at most about memory bytes where the source has a choice.
func NewGuide(h *hamiltonian.Hamiltonian, source Source, memory int64) (*Guide, error) {
	return newGuide(h, source, memory, false)
}

// NewSingleGuide is [NewGuide] with the half-rotated factors behind ⟨v_g⟩ in
// single precision.
func NewSingleGuide(h *hamiltonian.Hamiltonian, source Source, memory int64) (*Guide, error) {
	return newGuide(h, source, memory, true)
}

func newGuide(h *hamiltonian.Hamiltonian, source Source, memory int64, single bool) (*Guide, error) {
	if s := source.Sector(); s != h.Sector {
		return nil, fmt.Errorf("trial is for %d orbitals, %d up and %d down electrons; the hamiltonian has %d, %d and %d",
			s.Orbitals, s.Up, s.Down, h.Orbitals, h.Up, h.Down)
	}
	g := &Guide{Hamiltonian: h, Source: source}
	density, ok := source.(DensitySource)
	if !ok {
		density = Complete(source)
	}
	g.density = density
	g.rotated = newRotated(h, density.Support(), single)
	able, ok := density.(EnergySource)
	if !ok {
		able = Complete(source)
	}
	g.energies = able.Energies(h, g.rotated, memory)
	return g, nil
}

// NewMixed returns work space for batches of up to count walkers.
func (g *Guide) NewMixed(count int) *Mixed {
	return &Mixed{
		Overlap: make([]Overlap, count),
		Density: make([]float64, 2*count*g.rotated.DensityLength()),
		Fields:  make([]float64, 2*count*g.rotated.Count),
		Energy:  make([]complex128, count),
	}
}

// Overlaps sets m.Overlap.
func (g *Guide) Overlaps(m *Mixed, w Walkers) { g.Source.Overlaps(m.Overlap[:w.Count], w) }

// Evaluate sets m.Overlap, m.Density and m.Fields.
func (g *Guide) Evaluate(m *Mixed, w Walkers) {
	g.Densities(m, w)
	g.Fields(m, w)
}

// Densities sets m.Overlap and m.Density.
func (g *Guide) Densities(m *Mixed, w Walkers) {
	g.density.Densities(m.Overlap[:w.Count], m.Density, w)
}

// Fields sets m.Fields from m.Density.
func (g *Guide) Fields(m *Mixed, w Walkers) { g.rotated.Fields(m, w.Count) }

// LocalEnergies sets m.Energy for the walkers last evaluated into m.
func (g *Guide) LocalEnergies(m *Mixed, w Walkers) { g.energies.LocalEnergies(m, w) }

// Support returns the orbitals that densities are half rotated onto.
func (g *Guide) Support() Support { return g.rotated.Support }

// Expectations returns the trial's own expectation values, if it can give them.
func (g *Guide) Expectations() (Expectations, bool) {
	e, ok := g.Source.(Expectations)
	return e, ok
}

// Shift returns l_g = Re ⟨Ψ_T|v_g|Ψ_T⟩/⟨Ψ_T|Ψ_T⟩, ng numbers. Where the trial
// cannot give its density the mixed density with the given walkers' first one
// stands in: any real shift leaves the projection exact.
func (g *Guide) Shift(start Walkers) []float64 {
	f := g.Hamiltonian.Factors
	shift := make([]float64, f.Count())
	if e, ok := g.Expectations(); ok {
		density := e.OneBodyDensity()
		for spin := range 2 {
			for k := range shift {
				if k < f.Symmetric() {
					shift[k] += contract(f.Row(k, spin), density[spin])
				}
			}
		}
		return shift
	}
	// An antisymmetric factor has no expectation value in a real state.
	m := g.NewMixed(1)
	g.Evaluate(m, start.Slice(0, 1))
	copy(shift[:f.Symmetric()], m.Fields)
	return shift
}

// contract returns tr(L P) for a packed symmetric L.
func contract(packed []float64, p *mat.SymDense) float64 {
	sum, k := 0.0, 0
	for i := range p.SymmetricDim() {
		for j := range i {
			sum += 2 * packed[k] * p.At(i, j)
			k++
		}
		sum += packed[k] * p.At(i, i)
		k++
	}
	return sum
}
