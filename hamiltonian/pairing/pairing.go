// Package pairing builds the reduced pairing model of Bardeen, Cooper & Schrieffer
// (Phys. Rev. 108, 1175 (1957)) on equidistant levels,
//
//	H = Σ_pσ ε_p n_pσ − G Σ_pq P†_p P_q,   P†_p = c†_p↑ c†_p↓,   ε_p = d·p,   p = 1 … M,
//
// and solves it exactly by Richardson's equations at sizes that no diagonalisation
// reaches. Energies are in the unit of d and G.
package pairing

import (
	"errors"
	"fmt"
	"math"

	"gonum.org/v1/gonum/mat"

	"leadline/hamiltonian"
)

// MaxLevels is the largest model that [Model.Hamiltonian] builds: its M² factors
// take 1 GB.
const MaxLevels = 128

// Model is a reduced pairing model.
type Model struct {
	// Levels is M.
	Levels int
	// Spacing is d and Coupling is G, positive where pairs attract each other.
	Spacing, Coupling float64
	// Pairs is the number of up electrons and that of down electrons.
	Pairs int
}

// Validate returns all violations, joined, or nil.
func (m Model) Validate() error {
	var errs []error
	violation := func(format string, args ...any) { errs = append(errs, fmt.Errorf(format, args...)) }
	if m.Levels < 1 {
		violation("model has %d levels, expected at least 1", m.Levels)
	}
	if m.Pairs < 1 || m.Pairs > m.Levels {
		violation("model has %d pairs, expected 1 to %d (the number of levels)", m.Pairs, m.Levels)
	}
	if !finite(m.Spacing) {
		violation("spacing is %v, expected a finite number", m.Spacing)
	}
	if !finite(m.Coupling) {
		violation("coupling is %v, expected a finite number", m.Coupling)
	}
	return errors.Join(errs...)
}

func finite(x float64) bool { return !math.IsNaN(x) && !math.IsInf(x, 0) }

// Hamiltonian builds the model in its level basis. As a normal-ordered form the
// pairing term is −(G/2) Σ_pq :E_pq E_pq:, whose same-spin part vanishes, and in
// factors of sign s = −sign G
//
//	√|G| E_pp,   √(|G|/2) (E_pq + E_qp),   √(|G|/2) (E_pq − E_qp),   p > q:
//
// M(M+1)/2 symmetric and M(M−1)/2 antisymmetric ones, or none where G vanishes.
func (m Model) Hamiltonian() (*hamiltonian.Hamiltonian, error) {
	if err := m.Validate(); err != nil {
		return nil, err
	}
	if m.Levels > MaxLevels {
		return nil, fmt.Errorf("model has %d levels, expected at most %d: its factors take M³(M+1)/2 numbers", m.Levels, MaxLevels)
	}
	one := mat.NewSymDense(m.Levels, nil)
	for p := range m.Levels {
		one.SetSym(p, p, m.Spacing*float64(p+1))
	}
	h := &hamiltonian.Hamiltonian{
		Sector:  hamiltonian.Sector{Orbitals: m.Levels, Up: m.Pairs, Down: m.Pairs},
		OneBody: [2]*mat.SymDense{one, one},
		Factors: hamiltonian.NewFactors(m.Levels, 0),
	}
	if m.Coupling == 0 {
		return h, nil
	}
	pairs := hamiltonian.Pairs(m.Levels)
	f := hamiltonian.NewFactors(m.Levels, m.Levels*m.Levels)
	f.Antisymmetric = pairs - m.Levels
	for g := range f.Sign {
		f.Sign[g] = -math.Copysign(1, m.Coupling)
	}
	odd := pairs
	for p := range m.Levels {
		for q := range p {
			place := hamiltonian.Pair(p, q)
			f.Row(place, hamiltonian.Up)[place] = math.Sqrt(math.Abs(m.Coupling) / 2)
			f.Row(odd, hamiltonian.Up)[place] = math.Sqrt(math.Abs(m.Coupling) / 2)
			odd++
		}
		f.Row(hamiltonian.Pair(p, p), hamiltonian.Up)[hamiltonian.Pair(p, p)] = math.Sqrt(math.Abs(m.Coupling))
	}
	h.Factors = f
	return h, nil
}
