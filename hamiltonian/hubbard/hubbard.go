// Package hubbard builds the Hubbard model of any dimension,
//
//	H = −t Σ_⟨ij⟩σ (c†_iσ c_jσ + c†_jσ c_iσ) + U Σ_i n_i↑ n_i↓,
//
// on a rectangular lattice with open or periodic axes: Hubbard, Proc. R. Soc. A
// 276, 238 (1963). Energies are in the unit of t and U.
package hubbard

import (
	"errors"
	"fmt"
	"math"

	"gonum.org/v1/gonum/mat"

	"leadline/hamiltonian"
)

// Decomposition says which squares carry the repulsion. Both reproduce
// U n_i↑ n_i↓ exactly as a normal-ordered square ½ s :v_i v_i:, with the one-body
// part unchanged.
type Decomposition int

const (
	// Spin takes v_i = √|U| (n_i↑ − n_i↓) with s = −sign U: real auxiliary fields
	// for repulsive U (Hirsch, Phys. Rev. B 28, 4059 (1983), for discrete fields).
	Spin Decomposition = iota
	// Charge takes v_i = √|U| (n_i↑ + n_i↓) with s = sign U: real auxiliary fields
	// for attractive U.
	Charge
)

// MaxSites is the largest lattice built: its factors take 4 GB.
const MaxSites = 1000

// Model is a Hubbard model.
type Model struct {
	// Sites holds the number of sites of each axis. Sites are numbered row by row:
	// the last axis runs fastest.
	Sites []int
	// Periodic says of each axis whether its ends are bonded. An axis of one site
	// has no bond and one of two sites has one, periodic or not: every pair of
	// neighbours is bonded once.
	Periodic []bool
	// Hopping is t and Repulsion is U, of any sign.
	Hopping, Repulsion float64
	// Up and Down are the numbers of electrons.
	Up, Down int
	// Decomposition is Spin or Charge.
	Decomposition Decomposition
}

// size returns the number of lattice sites, M; beyond [MaxSites] it is only known
// to be too large.
func (m Model) size() int {
	size := 1
	for _, n := range m.Sites {
		size *= min(max(n, 0), MaxSites+1)
		size = min(size, MaxSites+1)
	}
	return size
}

// Validate returns all violations, joined, or nil.
func (m Model) Validate() error {
	var errs []error
	violation := func(format string, args ...any) { errs = append(errs, fmt.Errorf(format, args...)) }
	if len(m.Sites) == 0 {
		violation("lattice has no axis, expected the number of sites of each")
	}
	for i, n := range m.Sites {
		if n < 1 {
			violation("axis %d has %d sites, expected at least 1", i+1, n)
		}
	}
	if len(m.Periodic) != len(m.Sites) {
		violation("periodic has %d entries, expected one for each of %d axes", len(m.Periodic), len(m.Sites))
	}
	if !finite(m.Hopping) {
		violation("hopping is %v, expected a finite number", m.Hopping)
	}
	if !finite(m.Repulsion) {
		violation("repulsion is %v, expected a finite number", m.Repulsion)
	}
	if m.Decomposition != Spin && m.Decomposition != Charge {
		violation("decomposition is %d, expected spin or charge", m.Decomposition)
	}
	if size := m.size(); size > MaxSites {
		violation("lattice has more than %d sites, whose factors take more memory than a laptop has", MaxSites)
	} else if size > 0 {
		if err := (hamiltonian.Sector{Orbitals: size, Up: m.Up, Down: m.Down}).Validate(); err != nil {
			errs = append(errs, err)
		}
	}
	return errors.Join(errs...)
}

func finite(x float64) bool { return !math.IsNaN(x) && !math.IsInf(x, 0) }

// Bonds returns the pairs of neighbouring sites, each once.
func (m Model) Bonds() [][2]int {
	var bonds [][2]int
	stride := m.size()
	for axis, n := range m.Sites {
		stride /= n
		for site := range m.size() {
			switch at := site / stride % n; {
			case at+1 < n:
				bonds = append(bonds, [2]int{site, site + stride})
			case m.Periodic[axis] && n > 2:
				bonds = append(bonds, [2]int{site, site - at*stride})
			}
		}
	}
	return bonds
}

// Hamiltonian builds the model in its site basis: M factors, one per site, or none
// where U vanishes.
func (m Model) Hamiltonian() (*hamiltonian.Hamiltonian, error) {
	if err := m.Validate(); err != nil {
		return nil, err
	}
	size := m.size()
	one := mat.NewSymDense(size, nil)
	for _, bond := range m.Bonds() {
		one.SetSym(bond[0], bond[1], -m.Hopping)
	}
	h := &hamiltonian.Hamiltonian{
		Sector:  hamiltonian.Sector{Orbitals: size, Up: m.Up, Down: m.Down},
		OneBody: [2]*mat.SymDense{one, one},
		Factors: hamiltonian.NewFactors(size, 0),
	}
	if m.Repulsion == 0 {
		return h, nil
	}
	f := hamiltonian.NewFactors(size, size)
	sign := math.Copysign(1, m.Repulsion)
	if m.Decomposition == Spin {
		sign = -sign
		f.Packed[hamiltonian.Down] = make([]float64, len(f.Packed[hamiltonian.Up]))
	}
	root := math.Sqrt(math.Abs(m.Repulsion))
	for i := range size {
		f.Sign[i] = sign
		f.Row(i, hamiltonian.Up)[hamiltonian.Pair(i, i)] = root
		if m.Decomposition == Spin {
			f.Row(i, hamiltonian.Down)[hamiltonian.Pair(i, i)] = -root
		}
	}
	h.Factors = f
	return h, nil
}
