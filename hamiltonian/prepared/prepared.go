// Package prepared reads and writes the prepared Hamiltonian: one file that fixes
// the orbitals of a problem once, so that expansions and measurement records can
// name them. FORMAT.md beside this code specifies it.
package prepared

import (
	"crypto/sha256"
	"encoding/hex"
	"fmt"
	"io"
	"math"

	"gonum.org/v1/gonum/mat"

	"leadline/hamiltonian"
)

// File is the content of a prepared Hamiltonian.
type File struct {
	Hamiltonian *hamiltonian.Hamiltonian
	// Orbitals holds the orbital coefficients, basis functions × M, or is nil.
	Orbitals *mat.Dense
	// Reference is the mean-field reference, or nil.
	Reference  *Reference
	Provenance Provenance
	// Fingerprint identifies the orbital basis: the SHA-256 of the file's bytes in
	// hexadecimal. It is set by [Read] and not written.
	Fingerprint string
}

// Reference is a mean-field state over the orbitals of the file.
type Reference struct {
	// Kind names the method: rhf, rohf, uhf.
	Kind string
	// Energy is that of the state, in the unit of the Hamiltonian.
	Energy float64
	// Occupied holds the occupied orbitals of each spin, M × N_up and M × N_down
	// with orthonormal columns; an entry is nil where there are no such electrons.
	Occupied [2]*mat.Dense
}

// Provenance says where a Hamiltonian comes from. All entries are optional.
type Provenance struct {
	Title  string `json:"title,omitempty"`
	Source string `json:"source,omitempty"` // molecule, integrals, hubbard, pairing
	Basis  string `json:"basis,omitempty"`  // name of the Gaussian basis
	Unit   string `json:"unit,omitempty"`   // of energy; hartree if empty
	// FrozenCore is the number of orbitals folded into constant and one-body part.
	FrozenCore int `json:"frozen_core,omitempty"`
	// ConstantBeforeFreezing is the constant before the core was folded in.
	ConstantBeforeFreezing float64 `json:"constant_before_freezing,omitempty"`
	// FactorTolerance and FactorResidual are the error asked for and left on the
	// two-electron integrals.
	FactorTolerance float64 `json:"factor_tolerance,omitempty"`
	FactorResidual  float64 `json:"factor_residual,omitempty"`
	// Inputs holds the SHA-256 of each file read, by name.
	Inputs map[string]string `json:"inputs,omitempty"`
	// Version is that of the program.
	Version string `json:"version,omitempty"`
}

// Fingerprint returns the SHA-256 of everything in r, in hexadecimal: the identity
// of the orbital basis that a prepared Hamiltonian or an integral file fixes.
func Fingerprint(r io.Reader) (string, error) {
	sum := sha256.New()
	if _, err := io.Copy(sum, r); err != nil {
		return "", err
	}
	return hex.EncodeToString(sum.Sum(nil)), nil
}

// validate reports shapes that contradict each other and numbers that are not
// finite.
func (f *File) validate() error {
	h := f.Hamiltonian
	if err := h.Validate(); err != nil {
		return err
	}
	if f.Orbitals != nil {
		if rows, columns := f.Orbitals.Dims(); columns != h.Orbitals {
			return fmt.Errorf("orbital coefficients are %d×%d, expected %d columns", rows, columns, h.Orbitals)
		}
		if err := finite(f.Orbitals, "orbital coefficient"); err != nil {
			return err
		}
	}
	if f.Reference == nil {
		return nil
	}
	if e := f.Reference.Energy; math.IsNaN(e) || math.IsInf(e, 0) {
		return fmt.Errorf("energy of the reference is %v, expected a finite number", e)
	}
	for spin, occupied := range f.Reference.Occupied {
		n := h.Electrons(spin)
		if occupied == nil && n == 0 {
			continue
		}
		if occupied == nil {
			return fmt.Errorf("reference has no orbitals of spin %d, expected %d", spin, n)
		}
		if rows, columns := occupied.Dims(); rows != h.Orbitals || columns != n {
			return fmt.Errorf("reference orbitals of spin %d are %d×%d, expected %d×%d", spin, rows, columns, h.Orbitals, n)
		}
		if err := finite(occupied, "reference orbital element"); err != nil {
			return err
		}
	}
	return nil
}

func finite(a *mat.Dense, what string) error {
	rows, columns := a.Dims()
	for i := range rows {
		for j := range columns {
			if v := a.At(i, j); math.IsNaN(v) || math.IsInf(v, 0) {
				return fmt.Errorf("%s (%d,%d) is %v, expected a finite number", what, i+1, j+1, v)
			}
		}
	}
	return nil
}
