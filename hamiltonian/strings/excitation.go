package strings

import "math/bits"

// Moves lists what an operator does to strings: operator |From[k]⟩ = Sign[k] |To[k]⟩,
// with From ascending; strings that are not listed are annihilated. Every string
// occurs at most once in From and at most once in To.
type Moves struct {
	From, To []int32
	// Sign holds ±1.
	Sign []float64
}

// Len returns the number of strings that survive.
func (m *Moves) Len() int { return len(m.From) }

func newMoves(n int) *Moves {
	return &Moves{From: make([]int32, 0, n), To: make([]int32, 0, n), Sign: make([]float64, 0, n)}
}

func (m *Moves) add(from, to int, sign float64) {
	m.From, m.To, m.Sign = append(m.From, int32(from)), append(m.To, int32(to)), append(m.Sign, sign)
}

// Single returns the moves of E_pq = c†_p c_q: for p ≠ q the (M−2 over n−1)
// strings that hold q and not p, with sign (−1)^(electrons strictly between p
// and q); for p = q the (M−1 over n−1) strings that hold p, each left alone.
// The list is made anew at every call.
func (t *Table) Single(p, q int) *Moves {
	if p < 0 || q < 0 || p >= t.orbitals || q >= t.orbitals {
		panic("strings: orbital out of range")
	}
	if p == q {
		moves := newMoves(Count(t.orbitals-1, t.electrons-1))
		for i, mask := range t.masks {
			if mask>>p&1 == 1 {
				moves.add(i, i, 1)
			}
		}
		return moves
	}
	moves := newMoves(Count(t.orbitals-2, t.electrons-1))
	between := Between(p, q)
	for i, mask := range t.masks {
		if mask>>q&1 == 1 && mask>>p&1 == 0 {
			moves.add(i, t.Index(mask^(1<<p|1<<q)), Sign(mask&between))
		}
	}
	return moves
}

// Annihilate returns the moves of c_q into the table of one electron less, with
// sign (−1)^(electrons below q): the (M−1 over n−1) strings that hold q. Read
// from To to From it is c†_q. The table below must have n−1 electrons in M orbitals.
func (t *Table) Annihilate(below *Table, q int) *Moves {
	if below.orbitals != t.orbitals || below.electrons != t.electrons-1 {
		panic("strings: the table below does not have one electron less")
	}
	if q < 0 || q >= t.orbitals {
		panic("strings: orbital out of range")
	}
	moves := newMoves(below.countWithout())
	for i, mask := range t.masks {
		if mask>>q&1 == 1 {
			moves.add(i, below.Index(mask^1<<q), Sign(mask&(1<<q-1)))
		}
	}
	return moves
}

func (t *Table) countWithout() int { return Count(t.orbitals-1, t.electrons) }

// Between returns the mask of the orbitals strictly between p and q.
func Between(p, q int) uint64 {
	if p > q {
		p, q = q, p
	}
	if p == q {
		return 0
	}
	return (1<<q - 1) &^ (1<<(p+1) - 1)
}

// Sign returns (−1)^(number of bits of mask).
func Sign(mask uint64) float64 { return float64(1 - 2*(bits.OnesCount64(mask)&1)) }
