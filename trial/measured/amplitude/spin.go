package amplitude

import (
	"fmt"
	"math"
	"math/bits"
)

// Spin keeps the part of total spin S, twoS = 2S, by Löwdin's product of
// (S² − S'(S'+1))/(S(S+1) − S'(S'+1)) over the other spins S' of the sector
// (Phys. Rev. 97, 1509 (1955)).
func (e *Estimate) Spin(twoS int) (Step, error) {
	low, high := spins(e.Orbitals, e.Up, e.Down)
	if twoS < low || twoS > high || (twoS-low)%2 != 0 {
		return Step{}, fmt.Errorf("total spin %g is not in the sector of %d up and %d down electrons in %d orbitals: expected %g to %g",
			float64(twoS)/2, e.Up, e.Down, e.Orbitals, float64(low)/2, float64(high)/2)
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
	// moves[spin][p·M+q] lists the strings in which one electron can go from
	// orbital q to p.
	moves [2][][]move
}

type move struct {
	from, to int32
	sign     float64
}

func newSpinSquared(e *Estimate) *spinSquared {
	z := float64(e.Up-e.Down) / 2
	s := &spinSquared{up: e.UpStrings, down: e.DownStrings, constant: z * (z + 1)}
	m := e.Orbitals
	for spin, list := range [2][]uint64{e.UpStrings, e.DownStrings} {
		place := make(map[uint64]int32, len(list))
		for i, v := range list {
			place[v] = int32(i)
		}
		s.moves[spin] = make([][]move, m*m)
		for p := range m {
			for q := range m {
				for i, v := range list {
					if p == q || v>>q&1 == 0 || v>>p&1 != 0 {
						continue
					}
					between := uint64(1)<<max(p, q) - uint64(2)<<min(p, q)
					sign := 1 - 2*float64(bits.OnesCount64(v&between)&1)
					s.moves[spin][p*m+q] = append(s.moves[spin][p*m+q], move{int32(i), place[v^1<<p^1<<q], sign})
				}
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
	m := int(math.Sqrt(float64(len(s.moves[0]))))
	for p := range m {
		for q := range m {
			for _, a := range s.moves[0][p*m+q] {
				to, from := dst[int(a.to)*nb:(int(a.to)+1)*nb], src[int(a.from)*nb:(int(a.from)+1)*nb]
				for _, b := range s.moves[1][q*m+p] {
					to[b.to] -= complex(a.sign*b.sign, 0) * from[b.from]
				}
			}
		}
	}
}
