package expansion

import (
	"fmt"
	"math"
	"slices"

	"gonum.org/v1/gonum/mat"

	"leadline/hamiltonian"
	"leadline/hamiltonian/linalg"
	"leadline/trial"
	"leadline/trial/expansion/internal/lanes"
)

// Source is the trial source of an expansion. It implements [trial.EnergySource]
// and [trial.Expectations].
type Source struct {
	expansion *Expansion
	sector    hamiltonian.Sector
	core      int
	active    int
	support   trial.Support
	columns   *linalg.Packed // S, M×(core+active); nil for the first orbitals
	spaces    [2]*space      // one and the same for equal numbers of electrons
	preferred [2]uint64      // strings of the leading determinant
	c         coefficients
	scale     float64 // ln of the amplitude that C is divided by
	symmetric bool    // C = Cᵀ: up and down may be exchanged
	tile      int     // walkers taken together
	scratch   trial.Scratch[area]
}

// area is the scratch of one call.
type area struct {
	forms  [2]form
	sides  [2]side
	planes []float64
	total  [2][]complex128
}

// New returns the source of a valid expansion, which is not kept but for its
// Columns. Errors: the expansion is not valid, its orbitals are not orthonormal
// to 1e-6, or its window has more strings than can be numbered.
func New(e *Expansion) (*Source, error) {
	if err := e.Validate(); err != nil {
		return nil, err
	}
	for spin, n := range [2]int{e.Up, e.Down} {
		if err := checkWindow(e.Active, n); err != nil {
			return nil, fmt.Errorf("spin %d: %w", spin, err)
		}
	}
	own := e.with(slices.Clone(e.Determinants))
	s := &Source{
		expansion: own,
		sector:    e.Sector(),
		core:      e.Core,
		active:    e.Active,
		scratch:   trial.Scratch[area]{New: func() *area { return new(area) }},
	}
	if err := s.setSupport(); err != nil {
		return nil, err
	}
	s.setCoefficients()
	var need int
	for _, space := range s.spaces {
		need = max(need, 32*space.minors()+64*len(space.masks))
	}
	s.tile = min(64, max(1, tileMemory/need/lanes.Width)*lanes.Width)
	return s, nil
}

// tileMemory bounds the scratch of one tile for each spin, in bytes.
const tileMemory = 1 << 26

// supported returns the number of support orbitals, core and active.
func (s *Source) supported() int { return s.core + s.active }

func (s *Source) setSupport() error {
	m, ns := s.sector.Orbitals, s.supported()
	columns := mat.NewDense(m, ns, nil)
	if own := s.expansion.Columns; own == nil {
		for p := range ns {
			columns.Set(p, p, 1)
		}
	} else {
		columns.Copy(own.Slice(0, m, 0, ns))
		if err := checkOrthonormal(columns); err != nil {
			return err
		}
		raw := columns.RawMatrix()
		s.columns = linalg.Pack(false, m, ns, raw.Data, raw.Stride)
	}
	for spin := range 2 {
		if s.sector.Electrons(spin) > 0 {
			s.support.Re[spin] = columns
		}
	}
	return nil
}

func checkOrthonormal(columns *mat.Dense) error {
	_, n := columns.Dims()
	var overlap mat.Dense
	overlap.Mul(columns.T(), columns)
	for i := range n {
		for j := range n {
			want := 0.0
			if i == j {
				want = 1
			}
			if v := overlap.At(i, j); !(math.Abs(v-want) < 1e-6) {
				return fmt.Errorf("orbitals %d and %d of the expansion have overlap %.6g, expected %g to 1e-6", i+1, j+1, v, want)
			}
		}
	}
	return nil
}

// Sector implements [trial.Source].
func (s *Source) Sector() hamiltonian.Sector { return s.sector }

// Expansion returns the expansion of the source; it must not be changed.
func (s *Source) Expansion() *Expansion { return s.expansion }

// Support implements [trial.DensitySource]: core and active orbitals.
func (s *Source) Support() trial.Support { return s.support }

// evaluate prepares both spins of a tile, and the dual vectors of up, or of
// both. For paired walkers the spins share one form, and where C is symmetric
// they are one side.
func (s *Source) evaluate(a *area, w trial.Walkers, both bool) (up, down *side) {
	up, down = &a.sides[0], &a.sides[1]
	up.form, down.form = &a.forms[0], &a.forms[1]
	s.prepare(up.form, w, hamiltonian.Up)
	if w.Paired && s.spaces[0] == s.spaces[1] {
		down.form = up.form
		if s.symmetric {
			down = up
		}
	} else {
		s.prepare(down.form, w, hamiltonian.Down)
	}
	for spin, one := range [2]*side{up, down} {
		if spin == hamiltonian.Up || (both && down != up) {
			other := [2]*side{down, up}[spin]
			one.dual = trial.Grow(one.dual, s.layout(spin).size(w.Count))
			s.c.contract(one.dual, other.strings, w.Count, spin, &a.planes)
		}
	}
	return up, down
}

// Overlaps implements [trial.Source]. Flops for each walker: see the package
// comment.
func (s *Source) Overlaps(dst []trial.Overlap, w trial.Walkers) {
	a := s.scratch.Get()
	defer s.scratch.Put(a)
	v := s.layout(hamiltonian.Up)
	for from := 0; from < w.Count; from += s.tile {
		part := w.Slice(from, min(w.Count, from+s.tile))
		up, down := s.evaluate(a, part, false)
		for i := range part.Count {
			dst[from+i] = s.overlap(up, down, i, v.inner(up.strings, up.dual, i))
		}
	}
}

// overlap puts together ⟨Ψ_T|φ⟩ = det φ_occ,up · det φ_occ,down · F.
func (s *Source) overlap(up, down *side, i int, f complex128) trial.Overlap {
	if math.IsNaN(up.log[i]) || math.IsNaN(down.log[i]) || f != f {
		return trial.Overlap{Log: math.NaN()}
	}
	if up.frames[i] == nil || down.frames[i] == nil || f == 0 {
		return trial.Overlap{Log: math.Inf(-1)}
	}
	o := trial.OverlapOf(f)
	o.Log += up.log[i] + down.log[i] + s.scale
	o.Phase *= up.phase[i] * down.phase[i]
	return o
}

// Densities implements [trial.DensitySource].
func (s *Source) Densities(dst []trial.Overlap, density []float64, w trial.Walkers) {
	a := s.scratch.Get()
	defer s.scratch.Put(a)
	m, ns := s.sector.Orbitals, s.supported()
	length := (s.support.Columns(0) + s.support.Columns(1)) * m
	for from := 0; from < w.Count; from += s.tile {
		part := w.Slice(from, min(w.Count, from+s.tile))
		up, down := s.evaluate(a, part, true)
		s.weighAll(a, up, down, part.Count)
		for i := range part.Count {
			o := s.overlap(up, down, i, a.total[0][i])
			dst[from+i] = o
			re := density[2*(from+i)*length:][:length]
			im := density[(2*(from+i)+1)*length:][:length]
			if o.Zero() {
				clear(re)
				clear(im)
				continue
			}
			block := 0
			for spin, one := range [2]*side{up, down} {
				if s.sector.Electrons(spin) == 0 {
					continue
				}
				if spin == hamiltonian.Down && one == up {
					copy(re[block:], re[:block])
					copy(im[block:], im[:block])
					break
				}
				s.leftFactor(one, i, spin)
				s.density(one, part, i, spin, re[block:], im[block:])
				block += ns * m
			}
		}
	}
}

// weighAll sets W of both spins and F for the walkers of a tile.
func (s *Source) weighAll(a *area, up, down *side, count int) {
	for spin, one := range [2]*side{up, down} {
		a.total[spin] = trial.Grow(a.total[spin], count)
		if spin == hamiltonian.Down && one == up {
			copy(a.total[1], a.total[0])
			break
		}
		s.weigh(one, a.total[spin], count, spin)
	}
}
