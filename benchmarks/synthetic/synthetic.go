// Package synthetic makes Hamiltonians for benchmarks: of any size, with the
// structure of a molecule's (a ladder of orbital energies, repulsive factors that
// fall off in strength), so that a walk on them is a walk and not noise.
package synthetic

import (
	"math"
	"math/rand/v2"

	"gonum.org/v1/gonum/mat"

	"leadline/hamiltonian"
	"leadline/trial"
	"leadline/trial/determinant"
)

// New returns a spin-free Hamiltonian of m orbitals, n electrons of each spin
// and ng symmetric factors of sign +1.
func New(m, n, ng int) *hamiltonian.Hamiltonian {
	rng := rand.New(rand.NewPCG(uint64(m), uint64(ng)))
	h := &hamiltonian.Hamiltonian{
		Sector:  hamiltonian.Sector{Orbitals: m, Up: n, Down: n},
		Factors: hamiltonian.NewFactors(m, ng),
	}
	for g := range ng {
		strength := 1.3 * math.Exp(-4*float64(g)/float64(ng))
		row := h.Factors.Row(g, hamiltonian.Up)
		for p := range m {
			for q := range p + 1 {
				row[hamiltonian.Pair(p, q)] = strength * rng.NormFloat64() * math.Exp(-0.5*float64(p-q)) / math.Sqrt(float64(m))
			}
		}
	}
	one := mat.NewSymDense(m, nil)
	for p := range m {
		one.SetSym(p, p, -3+6*float64(p)/float64(m))
	}
	h.OneBody = [2]*mat.SymDense{one, one}
	return h
}

// Guide returns a closed-shell guide for such a Hamiltonian, or an open-shell
// one whose down orbitals are a little different, and the start to go with it.
func Guide(h *hamiltonian.Hamiltonian, closed bool, memory int64) (*trial.Guide, trial.Orbitals, error) {
	columns := func(angle float64) *mat.Dense {
		c := mat.NewDense(h.Orbitals, h.Up, nil)
		for i := range h.Up {
			c.Set(i, i, math.Cos(angle))
			c.Set(h.Up+i, i, math.Sin(angle))
		}
		return c
	}
	up := columns(0.1)
	orbitals := trial.RealOrbitals(up, up)
	if !closed {
		orbitals.Re[hamiltonian.Down] = columns(-0.1)
	}
	source, err := determinant.New(h.Orbitals, orbitals)
	if err != nil {
		return nil, trial.Orbitals{}, err
	}
	guide, err := trial.NewGuide(h, source, memory)
	return guide, orbitals, err
}
