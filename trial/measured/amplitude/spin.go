package amplitude

import (
	"fmt"
	"math"
	"math/bits"

	"leadline/hamiltonian/strings"
)

// Spin keeps the part of total spin S, twoS = 2S, by Löwdin's product of
// (S² − S'(S'+1))/(S(S+1) − S'(S'+1)) over the other spins S' of the sector
// (Phys. Rev. 97, 1509 (1955)).
func (e *Estimate) Spin(twoS int) (Step, error) {
	low, high := spins(e.Up.Orbitals(), e.Up.Electrons(), e.Down.Electrons())
	if twoS < low || twoS > high || (twoS-low)%2 != 0 {
		return Step{}, fmt.Errorf("total spin %g is not in the sector of %d up and %d down electrons in %d orbitals: expected %g to %g",
			float64(twoS)/2, e.Up.Electrons(), e.Down.Electrons(), e.Up.Orbitals(), float64(low)/2, float64(high)/2)
	}
	s2 := newSpinSquared(e)
	own := float64(twoS) * float64(twoS+2) / 4
	step := e.project(fmt.Sprintf("total spin %g", float64(twoS)/2), func(dst, src []complex128) {
		work := append([]complex128(nil), src...)
		for other := low; other <= high; other += 2 {
			if other == twoS {
				continue
			}
			value := float64(other) * float64(other+2) / 4
			s2.apply(dst, work)
			scale := 1 / (own - value)
			for i := range work {
				work[i] = complex(scale, 0) * (dst[i] - complex(value, 0)*work[i])
			}
		}
		copy(dst, work)
	})
	return step, nil
}

// spins returns the lowest and highest 2S of a sector.
func spins(orbitals, up, down int) (low, high int) {
	low = up - down
	if low < 0 {
		low = -low
	}
	n := up + down
	return low, max(low, min(n, 2*orbitals-n))
}

// SpinDimension returns the number of states of total spin twoS/2 in a sector,
// Weyl's formula: (2S+1)/(M+1) C(M+1, N/2−S) C(M+1, M−N/2−S).
func SpinDimension(orbitals, up, down, twoS int) float64 {
	low, high := spins(orbitals, up, down)
	if twoS < low || twoS > high || (twoS-low)%2 != 0 {
		return 0
	}
	n := up + down
	return math.Round(float64(twoS+1) / float64(orbitals+1) *
		choose(orbitals+1, (n-twoS)/2) * choose(orbitals+1, orbitals-(n+twoS)/2))
}

func choose(n, k int) float64 {
	b := 1.0
	for i := range k {
		b = b * float64(n-i) / float64(i+1)
	}
	return b
}

// spinSquared is S² = S₋S₊ + S_z(S_z+1) on a sector, where
// S₋S₊ = Σ_p n_p↓(1 − n_p↑) − Σ_{p≠q} (a†_p↑ a_q↑)(a†_q↓ a_p↓).
type spinSquared struct {
	up, down []uint64
	constant float64
	// moves holds, for each p ≠ q, a†_p↑ a_q↑ and a†_q↓ a_p↓.
	moves [][2]*strings.Moves
}

func newSpinSquared(e *Estimate) *spinSquared {
	z := float64(e.Up.Electrons()-e.Down.Electrons()) / 2
	s := &spinSquared{up: e.Up.Masks(), down: e.Down.Masks(), constant: z * (z + 1)}
	for p := range e.Up.Orbitals() {
		for q := range e.Up.Orbitals() {
			if p != q {
				s.moves = append(s.moves, [2]*strings.Moves{e.Up.Single(p, q), e.Down.Single(q, p)})
			}
		}
	}
	return s
}

// apply sets dst = S² src. It is safe for concurrent use.
func (s *spinSquared) apply(dst, src []complex128) {
	nb := len(s.down)
	for i, u := range s.up {
		for j, d := range s.down {
			dst[i*nb+j] = complex(s.constant+float64(bits.OnesCount64(d&^u)), 0) * src[i*nb+j]
		}
	}
	for _, pair := range s.moves {
		a, b := pair[0], pair[1]
		for k, from := range a.From {
			row := src[int(from)*nb : (int(from)+1)*nb]
			to := dst[int(a.To[k])*nb : (int(a.To[k])+1)*nb]
			for l, j := range b.From {
				to[b.To[l]] -= complex(a.Sign[k]*b.Sign[l], 0) * row[j]
			}
		}
	}
}
