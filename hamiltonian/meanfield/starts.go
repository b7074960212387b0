package meanfield

import (
	"iter"
	"math"
	"math/rand/v2"

	"gonum.org/v1/gonum/mat"

	"leadline/hamiltonian"
)

// eachStart yields the starting orbitals, M×M per spin. UHF of a spin-free
// Hamiltonian starts from the lowest restricted solution, whose instabilities
// are then followed; it goes on with orbitals mixed across the gap and with
// staggered spin densities made from it.
func (s *search) eachStart() iter.Seq2[[2]*mat.Dense, error] {
	return func(yield func([2]*mat.Dense, error) bool) {
		reference, err := s.restricted()
		if err != nil {
			yield([2]*mat.Dense{}, err)
			return
		}
		if s.o.Guess[hamiltonian.Up] != nil && !yield(s.guessed(), nil) {
			return
		}
		if reference != nil {
			if !yield([2]*mat.Dense{reference, reference}, nil) {
				return
			}
		}
		m := s.h.Orbitals
		identity := mat.NewDense(m, m, nil)
		for i := range m {
			identity.Set(i, i, 1)
		}
		core, diagonal := s.coreOrbitals(), s.diagonalOrbitals()
		if !yield([2]*mat.Dense{identity, identity}, nil) || !yield(core, nil) || !yield(diagonal, nil) {
			return
		}
		from := core
		if reference != nil {
			from = [2]*mat.Dense{reference, reference}
		}
		if s.kind == UHF {
			for _, c := range s.staggered(identity, from) {
				if !yield(c, nil) {
					return
				}
			}
		}
		for i := range s.o.Starts {
			if !yield(s.random(from, i), nil) {
				return
			}
		}
	}
}

// restricted returns the orbitals of the lowest RHF or ROHF solution where UHF
// can start from one.
func (s *search) restricted() (*mat.Dense, error) {
	if s.kind != UHF || !s.h.SpinFree() {
		return nil, nil
	}
	o := s.o
	if o.Starts > 1 {
		o.Starts = (o.Starts + 1) / 2
	}
	inner := &search{ctx: s.ctx, problem: newProblem(s.h, ROHF), o: o}
	if err := inner.run(); err != nil {
		if s.ctx.Err() != nil {
			return nil, err
		}
		return nil, nil // UHF may converge where ROHF does not
	}
	return inner.best.pt.c[0], nil
}

// guessed returns the orbitals of the Fock matrices of the supplied densities.
func (s *search) guessed() [2]*mat.Dense {
	g := s.o.Guess
	if g[hamiltonian.Down] == nil {
		g[hamiltonian.Down] = g[hamiltonian.Up]
	}
	return s.orbitalsOf(Fock(s.h, g))
}

// coreOrbitals returns the eigenvectors of the one-body part.
func (s *search) coreOrbitals() [2]*mat.Dense { return s.orbitalsOf(s.h.OneBody) }

// orbitalsOf returns the eigenvectors of a matrix per spin, of their mean where
// both spins share their orbitals.
func (s *search) orbitalsOf(f [2]*mat.SymDense) [2]*mat.Dense {
	if s.kind != UHF && f[0] != f[1] {
		mean := mat.NewSymDense(s.h.Orbitals, nil)
		mean.AddSym(f[0], f[1])
		f = [2]*mat.SymDense{mean, mean}
	}
	var c [2]*mat.Dense
	for spin := range c {
		if spin == 1 && f[0] == f[1] {
			c[1] = c[0]
			continue
		}
		_, v, ok := eigenvectors(f[spin])
		if !ok {
			panic("meanfield: matrix is not finite")
		}
		c[spin] = v
	}
	return c
}

// diagonalOrbitals returns the basis orbitals ordered by the diagonal of the
// Fock matrix of evenly spread electrons.
func (s *search) diagonalOrbitals() [2]*mat.Dense {
	m := s.h.Orbitals
	var even [2]*mat.SymDense
	for spin := range even {
		even[spin] = mat.NewSymDense(m, nil)
		for i := range m {
			n := float64(s.h.Electrons(spin)) / float64(m)
			if s.kind != UHF {
				n = 0.5 * float64(s.h.Up+s.h.Down) / float64(m)
			}
			even[spin].SetSym(i, i, n)
		}
	}
	f := Fock(s.h, even)
	for spin := range f {
		d := mat.NewSymDense(m, nil)
		for i := range m {
			d.SetSym(i, i, f[spin].At(i, i))
		}
		f[spin] = d
	}
	return s.orbitalsOf(f)
}

// window returns the half-filled run of orbitals around the gap with up to
// pairs orbitals on each side.
func (s *search) window(pairs int) (from, to int) {
	low, high := min(s.h.Up, s.h.Down), max(s.h.Up, s.h.Down)
	pairs = min(pairs, low, s.h.Orbitals-high)
	return low - pairs, high + pairs
}

// staggered returns starts with alternating spin densities, in the basis
// orbitals as they stand (sites of a lattice are local already) and in windows
// of localised orbitals around the gap. The window of one pair on each side
// mixes the highest occupied with the lowest empty orbital.
func (s *search) staggered(identity *mat.Dense, from [2]*mat.Dense) [][2]*mat.Dense {
	var out [][2]*mat.Dense
	if c, ok := s.stagger(identity, 0, s.h.Orbitals); ok {
		out = append(out, c)
	}
	last := -1
	for _, pairs := range []int{1, 2, 3, 4, 6, s.h.Orbitals} {
		a, b := s.window(pairs)
		if b-a < 2 || b-a == last {
			continue
		}
		last = b - a
		local := localise(s.h, from[0], a, b, s.o.Seed)
		if c, ok := s.stagger(local, a, b); ok {
			out = append(out, c)
		}
	}
	return out
}

// stagger fills the orbitals a to b of c, which are local, with up electrons on
// one sublattice and down electrons on the other; earlier orbitals are filled
// with both. Orbitals that neither spin fills on its own (away from half
// filling) are those of highest energy.
func (s *search) stagger(c *mat.Dense, a, b int) ([2]*mat.Dense, bool) {
	up, down := s.h.Up-a, s.h.Down-a
	if up < 0 || down < 0 || up+down > b-a || up+down == 0 {
		return [2]*mat.Dense{}, false
	}
	coupling := couplings(s.h, c, a, b)
	spins := alternate(coupling, up, down)
	m := s.h.Orbitals
	var out [2]*mat.Dense
	for spin := range out {
		order := make([]int, 0, m)
		for i := range a {
			order = append(order, i)
		}
		for _, pass := range []bool{true, false} {
			for i := a; i < b; i++ {
				if (spins[i-a] == spin) == pass {
					order = append(order, i)
				}
			}
		}
		for i := b; i < m; i++ {
			order = append(order, i)
		}
		out[spin] = mat.NewDense(m, m, nil)
		for j, i := range order {
			for p := range m {
				out[spin].Set(p, j, c.At(p, i))
			}
		}
	}
	return out, true
}

// random returns orbitals turned by a random rotation: every second time a
// strong one in the half-filled window around the gap, otherwise a weaker one
// of all orbitals.
func (s *search) random(from [2]*mat.Dense, index int) [2]*mat.Dense {
	source := rand.New(rand.NewPCG(s.o.Seed, uint64(index)+1))
	m := s.h.Orbitals
	var out [2]*mat.Dense
	for spin := range out {
		if spin == 1 && s.kind != UHF {
			out[1] = out[0]
			continue
		}
		a, b, strength := 0, m, 1.0
		if index%2 == 0 {
			a, b = s.window(m)
			strength = 3
		}
		k := mat.NewDense(m, m, nil)
		for p := a; p < b; p++ {
			for q := a; q < p; q++ {
				v := strength * source.NormFloat64() / math.Sqrt(float64(b-a))
				k.Set(p, q, v)
				k.Set(q, p, -v)
			}
		}
		var u mat.Dense
		u.Exp(k)
		out[spin] = new(mat.Dense)
		out[spin].Mul(from[spin], &u)
	}
	return out
}
