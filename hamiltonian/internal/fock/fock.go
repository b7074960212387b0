// Package fock builds Hamiltonians of tiny systems as dense matrices over the
// determinants of a sector, operator by operator with Jordan–Wigner signs. It is
// slow, simple and shares no formula with the rest: the yardstick of tests.
package fock

import (
	"math/bits"

	"gonum.org/v1/gonum/mat"

	"leadline/hamiltonian"
)

// Space holds the determinants of a sector as bit patterns: orbital p with spin
// up is bit p, with spin down bit M+p.
type Space struct {
	hamiltonian.Sector
	states []uint64
	place  map[uint64]int
}

// New lists the determinants of a sector of at most 16 orbitals.
func New(sector hamiltonian.Sector) *Space {
	if sector.Orbitals > 16 {
		panic("fock: too many orbitals")
	}
	s := &Space{Sector: sector, place: map[uint64]int{}}
	var strings [2][]uint64
	for spin := range strings {
		for bit := range uint64(1) << sector.Orbitals {
			if bits.OnesCount64(bit) == sector.Electrons(spin) {
				strings[spin] = append(strings[spin], bit)
			}
		}
	}
	for _, down := range strings[hamiltonian.Down] {
		for _, up := range strings[hamiltonian.Up] {
			state := up | down<<sector.Orbitals
			s.place[state] = len(s.states)
			s.states = append(s.states, state)
		}
	}
	return s
}

// Dim returns the number of determinants.
func (s *Space) Dim() int { return len(s.states) }

// annihilate applies c_mode; the sign is 0 where the mode is empty.
func annihilate(state uint64, mode int) (uint64, float64) {
	if state>>mode&1 == 0 {
		return 0, 0
	}
	return state &^ (1 << mode), sign(state, mode)
}

// create applies c†_mode; the sign is 0 where the mode is full.
func create(state uint64, mode int) (uint64, float64) {
	if state>>mode&1 == 1 {
		return 0, 0
	}
	return state | 1<<mode, sign(state, mode)
}

func sign(state uint64, mode int) float64 {
	return 1 - 2*float64(bits.OnesCount64(state&(1<<mode-1))&1)
}

// OneBody adds Σ_pq c_pq c†_pσ c_qσ of one spin to a.
func (s *Space) OneBody(a *mat.Dense, spin int, c func(p, q int) float64) {
	m := s.Orbitals
	for column, state := range s.states {
		for q := range m {
			empty, x := annihilate(state, spin*m+q)
			if x == 0 {
				continue
			}
			for p := range m {
				full, y := create(empty, spin*m+p)
				if v := c(p, q); y != 0 && v != 0 {
					row := s.place[full]
					a.Set(row, column, a.At(row, column)+x*y*v)
				}
			}
		}
	}
}

// TwoBody adds ½ Σ_pqrs c_pqrs c†_pσ c†_rτ c_sτ c_qσ of spins σ and τ to a.
func (s *Space) TwoBody(a *mat.Dense, sigma, tau int, c func(p, q, r, s int) float64) {
	m := s.Orbitals
	for column, state := range s.states {
		for q := range m {
			one, x := annihilate(state, sigma*m+q)
			if x == 0 {
				continue
			}
			for u := range m {
				two, y := annihilate(one, tau*m+u)
				if y == 0 {
					continue
				}
				for r := range m {
					three, z := create(two, tau*m+r)
					if z == 0 {
						continue
					}
					for p := range m {
						four, w := create(three, sigma*m+p)
						if v := c(p, q, r, u); w != 0 && v != 0 {
							row := s.place[four]
							a.Set(row, column, a.At(row, column)+0.5*x*y*z*w*v)
						}
					}
				}
			}
		}
	}
}

func (s *Space) constant(e float64) *mat.Dense {
	a := mat.NewDense(s.Dim(), s.Dim(), nil)
	for i := range s.Dim() {
		a.Set(i, i, e)
	}
	return a
}

// Normal returns the matrix of h from its stored, normal-ordered form.
func (s *Space) Normal(h *hamiltonian.Hamiltonian) *mat.Dense {
	a := s.constant(h.Constant)
	for spin := range 2 {
		s.OneBody(a, spin, h.OneBody[spin].At)
	}
	m := s.Orbitals
	for sigma := range 2 {
		for tau := range 2 {
			c := make([]float64, m*m*m*m)
			for g, sign := range h.Factors.Sign {
				l := s.factor(h, g)
				left, right := l[sigma].RawMatrix().Data, l[tau].RawMatrix().Data
				for i, x := range left {
					if x != 0 {
						for j, y := range right {
							c[i*m*m+j] += sign * x * y
						}
					}
				}
			}
			s.TwoBody(a, sigma, tau, func(p, q, r, u int) float64 { return c[((p*m+q)*m+r)*m+u] })
		}
	}
	return a
}

// Squares returns the matrix of h from its form in operator squares.
func (s *Space) Squares(h *hamiltonian.Hamiltonian) *mat.Dense {
	a := s.constant(h.Constant)
	for spin := range 2 {
		s.OneBody(a, spin, h.SquareOneBody(spin).At)
	}
	var square mat.Dense
	for g, sign := range h.Factors.Sign {
		v := mat.NewDense(s.Dim(), s.Dim(), nil)
		for spin, l := range s.factor(h, g) {
			s.OneBody(v, spin, l.At)
		}
		square.Mul(v, v)
		square.Scale(0.5*sign, &square)
		a.Add(a, &square)
	}
	return a
}

func (s *Space) factor(h *hamiltonian.Hamiltonian, g int) (l [2]*mat.Dense) {
	for spin := range l {
		l[spin] = mat.NewDense(s.Orbitals, s.Orbitals, nil)
		h.Factors.Unpack(l[spin], g, spin)
	}
	return l
}

// Integrals returns the matrix of E_c + Σ h_pq c†c + ½ Σ (pq|rs) c†c†cc.
func (s *Space) Integrals(constant float64, h func(p, q int) float64, v func(p, q, r, s int) float64) *mat.Dense {
	a := s.constant(constant)
	for sigma := range 2 {
		s.OneBody(a, sigma, h)
		for tau := range 2 {
			s.TwoBody(a, sigma, tau, v)
		}
	}
	return a
}

// Occupied returns the occupations, 0 or 1, of determinant i.
func (s *Space) Occupied(i, spin, p int) float64 {
	return float64(s.states[i] >> (spin*s.Orbitals + p) & 1)
}

// Lowest returns the lowest eigenvalue of a symmetric matrix.
func Lowest(a *mat.Dense) float64 {
	n, _ := a.Dims()
	symmetric := mat.NewSymDense(n, nil)
	for i := range n {
		for j := i; j < n; j++ {
			symmetric.SetSym(i, j, a.At(i, j))
		}
	}
	var eigen mat.EigenSym
	if !eigen.Factorize(symmetric, false) {
		panic("fock: diagonalisation did not converge")
	}
	return eigen.Values(nil)[0]
}
