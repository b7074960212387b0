package hamiltonian

import (
	"fmt"
	"math"

	"gonum.org/v1/gonum/mat"
)

// Spin indexes the two spin species.
const (
	Up   = 0
	Down = 1
)

// Sector names the space that a Hamiltonian is solved in: the number of spatial
// orbitals and of electrons of each spin.
type Sector struct {
	Orbitals, Up, Down int
}

// Electrons returns the number of electrons of one spin.
func (s Sector) Electrons(spin int) int {
	if spin == Up {
		return s.Up
	}
	return s.Down
}

// Validate reports an error unless 0 ≤ N_up, N_down ≤ M and there is at least
// one electron.
func (s Sector) Validate() error {
	switch {
	case s.Orbitals < 1:
		return fmt.Errorf("sector has %d orbitals, expected at least 1", s.Orbitals)
	case s.Up < 0 || s.Up > s.Orbitals:
		return fmt.Errorf("sector has %d up electrons, expected 0 to %d (the number of orbitals)", s.Up, s.Orbitals)
	case s.Down < 0 || s.Down > s.Orbitals:
		return fmt.Errorf("sector has %d down electrons, expected 0 to %d (the number of orbitals)", s.Down, s.Orbitals)
	case s.Up+s.Down == 0:
		return fmt.Errorf("sector has no electrons")
	}
	return nil
}

// Hamiltonian is the general two-body Hamiltonian in normal-ordered form; see
// the package comment for the formula.
type Hamiltonian struct {
	Sector
	// Constant is E_c.
	Constant float64
	// OneBody holds h for up and down electrons, M×M. Both entries are the same
	// pointer when the one-body part is spin-free.
	OneBody [2]*mat.SymDense
	// Factors holds the two-body part.
	Factors *Factors
}

// SpinFree reports whether one-body part and factors act alike on both spins.
func (h *Hamiltonian) SpinFree() bool {
	return h.OneBody[Up] == h.OneBody[Down] && h.Factors.SpinFree()
}

// Validate checks shapes and that every number is finite.
func (h *Hamiltonian) Validate() error {
	if err := h.Sector.Validate(); err != nil {
		return err
	}
	if math.IsNaN(h.Constant) || math.IsInf(h.Constant, 0) {
		return fmt.Errorf("constant energy is %v, expected a finite number", h.Constant)
	}
	for spin, one := range h.OneBody {
		if one == nil || one.SymmetricDim() != h.Orbitals {
			return fmt.Errorf("one-body matrix of spin %d has the wrong shape, expected %d×%d", spin, h.Orbitals, h.Orbitals)
		}
		for p := range h.Orbitals {
			for q := range p + 1 {
				if v := one.At(p, q); math.IsNaN(v) || math.IsInf(v, 0) {
					return fmt.Errorf("one-body element (%d,%d) is %v, expected a finite number", p+1, q+1, v)
				}
			}
		}
	}
	return h.Factors.validate(h.Orbitals)
}

// SquareOneBody returns t^σ = h^σ − ½ Σ_g s_g L^{gσ} L^{gσ}, the one-body part
// of the form in operator squares, M×M. Cost: 2·ng·M³ flops.
func (h *Hamiltonian) SquareOneBody(spin int) *mat.SymDense {
	m := h.Orbitals
	sum := mat.NewDense(m, m, nil)
	l, square := mat.NewDense(m, m, nil), mat.NewDense(m, m, nil)
	for g := range h.Factors.Count() {
		h.Factors.Unpack(l, g, spin)
		square.Mul(l, l)
		square.Scale(h.Factors.Sign[g], square)
		sum.Add(sum, square)
	}
	t := mat.NewSymDense(m, nil)
	for p := range m {
		for q := p; q < m; q++ {
			t.SetSym(p, q, h.OneBody[spin].At(p, q)-0.25*(sum.At(p, q)+sum.At(q, p)))
		}
	}
	return t
}
