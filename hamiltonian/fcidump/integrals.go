// Package fcidump reads and writes integral interchange files: plain text with a
// header of key=value pairs between &FCI and &END (or /), then one integral per
// line as "value i j k l" with one-based orbitals,
//
//	(ij|kl)   i j k l      two-electron integral in chemists' notation
//	h_ij      i j 0 0      one-electron integral
//	ε_i       i 0 0 0      orbital energy
//	E_c       0 0 0 0      constant energy (nuclear repulsion and frozen core)
//
// in hartree, over real orthonormal orbitals: Knowles & Handy, Comput. Phys.
// Commun. 54, 75 (1989). Integrals left out are zero; (ij|kl) has eightfold
// symmetry and may be given in any of its eight orders.
package fcidump

import (
	"context"

	"gonum.org/v1/gonum/mat"

	"leadline/hamiltonian"
	"leadline/hamiltonian/factorize"
)

// Integrals holds the content of one file. It is the matrix V of
// [factorize.Matrix] over orbital pairs; all methods are safe for concurrent use.
type Integrals struct {
	hamiltonian.Sector
	// Constant is E_c.
	Constant float64
	// OneBody holds h, M×M.
	OneBody *mat.SymDense
	// TwoBody holds (pq|rs): the lower triangle, row by row, of the symmetric matrix
	// over pairs p ≥ q in the order of [hamiltonian.Pair].
	TwoBody []float64
	// OrbitalEnergies holds ε, M numbers, or is nil where the file gives none.
	OrbitalEnergies []float64
	// Symmetry holds the file's symmetry label of each orbital (ORBSYM), or is nil.
	Symmetry []int
	// StateSymmetry is the file's symmetry label of the state (ISYM), 0 if not given.
	StateSymmetry int
}

// TwoElectron returns (pq|rs), orbitals zero-based.
func (f *Integrals) TwoElectron(p, q, r, s int) float64 {
	return f.TwoBody[hamiltonian.Pair(hamiltonian.Pair(p, q), hamiltonian.Pair(r, s))]
}

// Dim returns the number of orbital pairs, M(M+1)/2.
func (f *Integrals) Dim() int { return hamiltonian.Pairs(f.Orbitals) }

// Diagonal writes (pq|pq) of all pairs into dst.
func (f *Integrals) Diagonal(dst []float64) {
	for i := range dst {
		dst[i] = f.TwoBody[i*(i+1)/2+i]
	}
}

// Column writes (pq|rs) of pair rs = j and all pairs pq into dst.
func (f *Integrals) Column(j int, dst []float64) {
	copy(dst[:j+1], f.TwoBody[j*(j+1)/2:])
	place := j*(j+1)/2 + j
	for i := j + 1; i < len(dst); i++ {
		place += i
		dst[i] = f.TwoBody[place]
	}
}

// Hamiltonian factorises the two-electron integrals to the given tolerance by
// [factorize.Signed]: pivoted Cholesky factors for molecules, signed ones for
// attractive or indefinite integrals. The residual is the largest error of any
// two-electron integral, measured on all of them. The
// Hamiltonian shares the one-body matrix with f.
func (f *Integrals) Hamiltonian(ctx context.Context, tolerance float64) (h *hamiltonian.Hamiltonian, residual float64, err error) {
	factors, residual, err := factorize.Signed(ctx, f, tolerance)
	if err != nil {
		return nil, 0, err
	}
	h = &hamiltonian.Hamiltonian{
		Sector:   f.Sector,
		Constant: f.Constant,
		OneBody:  [2]*mat.SymDense{f.OneBody, f.OneBody},
		Factors:  factors,
	}
	return h, residual, nil
}
