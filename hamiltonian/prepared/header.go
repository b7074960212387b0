package prepared

import (
	"fmt"

	"leadline/hamiltonian"
)

const (
	magic   = "leadline prepared "
	version = 1
	// headerLimit is the most that the first two lines take, in bytes; alignment
	// divides their length.
	headerLimit = 1 << 20
	alignment   = 64
)

// header is the second line of the file.
type header struct {
	Orbitals       int              `json:"orbitals"`
	Up             int              `json:"up"`
	Down           int              `json:"down"`
	OneBodySpins   int              `json:"one_body_spins"`
	FactorSpins    int              `json:"factor_spins"`
	Factors        int              `json:"factors"`
	Antisymmetric  int              `json:"antisymmetric"`
	BasisFunctions int              `json:"basis_functions"`
	Reference      *referenceHeader `json:"reference,omitempty"`
	Provenance     Provenance       `json:"provenance"`
}

type referenceHeader struct {
	Kind   string  `json:"kind"`
	Energy float64 `json:"energy"`
}

// headerOf describes f.
func headerOf(f *File) header {
	h := f.Hamiltonian
	out := header{
		Orbitals: h.Orbitals, Up: h.Up, Down: h.Down,
		OneBodySpins: 2, FactorSpins: 2,
		Factors: h.Factors.Count(), Antisymmetric: h.Factors.Antisymmetric,
		Provenance: f.Provenance,
	}
	if h.OneBody[hamiltonian.Up] == h.OneBody[hamiltonian.Down] {
		out.OneBodySpins = 1
	}
	if h.Factors.SpinFree() {
		out.FactorSpins = 1
	}
	if f.Orbitals != nil {
		out.BasisFunctions, _ = f.Orbitals.Dims()
	}
	if f.Reference != nil {
		out.Reference = &referenceHeader{f.Reference.Kind, f.Reference.Energy}
	}
	return out
}

// validate reports values that describe no file.
func (h *header) validate() error {
	if err := (hamiltonian.Sector{Orbitals: h.Orbitals, Up: h.Up, Down: h.Down}).Validate(); err != nil {
		return err
	}
	switch {
	case h.OneBodySpins != 1 && h.OneBodySpins != 2:
		return fmt.Errorf("one_body_spins is %d, expected 1 or 2", h.OneBodySpins)
	case h.FactorSpins != 1 && h.FactorSpins != 2:
		return fmt.Errorf("factor_spins is %d, expected 1 or 2", h.FactorSpins)
	case h.Factors < 0:
		return fmt.Errorf("factors is %d, expected 0 or more", h.Factors)
	case h.Antisymmetric < 0 || h.Antisymmetric > h.Factors:
		return fmt.Errorf("antisymmetric is %d, expected 0 to %d (the number of factors)", h.Antisymmetric, h.Factors)
	case h.BasisFunctions != 0 && h.BasisFunctions < h.Orbitals:
		return fmt.Errorf("basis_functions is %d, expected 0 or at least %d (the number of orbitals)", h.BasisFunctions, h.Orbitals)
	}
	if n := h.numbers(); n > 1<<48 {
		return fmt.Errorf("header asks for %.3g numbers, more than any file holds", n)
	}
	return nil
}

// numbers returns how many numbers follow the header; a float64, since a hostile
// header may ask for more than integers count.
func (h *header) numbers() float64 {
	m := float64(h.Orbitals)
	packed := m * (m + 1) / 2
	n := 1 + float64(h.OneBodySpins)*packed + float64(h.Factors)*(1+float64(h.FactorSpins)*packed) + float64(h.BasisFunctions)*m
	if h.Reference != nil {
		n += m * float64(h.Up+h.Down)
	}
	return n
}
