package meanfield

import (
	"context"
	"fmt"

	"gonum.org/v1/gonum/mat"

	"leadline/hamiltonian"
)

// sameOccupation is the difference below which natural orbitals count as
// equally occupied.
const sameOccupation = 1e-7

// NaturalOrbitals returns the eigenvectors of the spin-summed density of a
// solution as columns, M×M, and their occupations, 2 to 0, in descending order.
// Equally occupied ones are told apart by diagonalising the mean of the up and
// down Fock matrices among them, lowest first, so that the orbitals of an RHF
// solution are its canonical ones. The caller owns both.
func NaturalOrbitals(s *Solution, h *hamiltonian.Hamiltonian) (*mat.Dense, []float64) {
	m := h.Orbitals
	if s.Sector != h.Sector {
		panic("meanfield: solution belongs to another sector")
	}
	d := [2]*mat.SymDense{s.Density(hamiltonian.Up), s.Density(hamiltonian.Down)}
	total := mat.NewSymDense(m, nil)
	total.AddSym(d[0], d[1])
	total.ScaleSym(-1, total) // descending order
	occupations, orbitals, ok := eigenvectors(total)
	if !ok {
		panic("meanfield: solution has no finite density")
	}
	for i, n := range occupations {
		occupations[i] = min(2, max(0, -n))
	}
	f := Fock(h, d)
	mean := mat.NewSymDense(m, nil)
	mean.AddSym(f[0], f[1])
	for from := 0; from < m; {
		to := from + 1
		for to < m && occupations[to-1]-occupations[to] < sameOccupation {
			to++
		}
		if group := orbitals.Slice(0, m, from, to).(*mat.Dense); to-from > 1 {
			var half, block mat.Dense
			half.Mul(mean, group)
			block.Mul(group.T(), &half)
			sym := mat.NewSymDense(to-from, nil)
			for i := range to - from {
				for j := range i + 1 {
					sym.SetSym(i, j, 0.5*(block.At(i, j)+block.At(j, i)))
				}
			}
			if _, v, ok := eigenvectors(sym); ok {
				var turned mat.Dense
				turned.Mul(group, v)
				group.Copy(&turned)
			}
		}
		from = to
	}
	fixSigns(orbitals)
	return orbitals, occupations
}

// FrozenCore solves RHF (ROHF where N_up ≠ N_down) of all electrons, turns the
// Hamiltonian into its orbitals and folds in the n lowest of them, which stay
// doubly occupied. It returns the Hamiltonian of the remaining orbitals and the
// solution; remaining orbital p is column n+p of its Orbitals.
func FrozenCore(ctx context.Context, h *hamiltonian.Hamiltonian, n int, o Options) (*hamiltonian.Hamiltonian, *Solution, error) {
	if low := min(h.Up, h.Down); n < 0 || n > low {
		return nil, nil, fmt.Errorf("frozen core of %d orbitals, expected 0 to %d (each holds an up and a down electron)", n, low)
	}
	s, err := Solve(ctx, h, ROHF, o)
	if err != nil {
		return nil, nil, fmt.Errorf("frozen core: %w", err)
	}
	frozen, err := h.Rotate(s.Orbitals[hamiltonian.Up]).FreezeCore(n)
	if err != nil {
		return nil, nil, err
	}
	return frozen, s, nil
}
