// Package strings enumerates the occupation strings of one spin species and the
// operators that move electrons in them.
//
// A string is a set of n of M ≤ 64 orbitals, held as a mask (bit p set: orbital
// p occupied). It stands for the state
//
//	|r_1 r_2 … r_n⟩ = c†_{r_1} c†_{r_2} … c†_{r_n} |0⟩,   r_1 < r_2 < … < r_n,
//
// creation operators in ascending order, left to right. Strings are numbered in
// lexicographic order of their ascending orbital lists: for n = 2, M = 4
//
//	(0,1) (0,2) (0,3) (1,2) (1,3) (2,3)
//
// which differs from the order of the masks as numbers. A determinant of both
// spins is the up string's operators followed, to the right, by the down
// string's; an operator that conserves the number of electrons of each spin
// therefore acts on either string without a sign from the other.
package strings

import (
	"math"
	"math/bits"
)

// MaxOrbitals is the largest number of orbitals of a string.
const MaxOrbitals = 64

// Count returns the number of strings, the binomial coefficient (M over n), or
// math.MaxInt where that does not fit; 0 outside 0 ≤ n ≤ M.
func Count(orbitals, electrons int) int {
	if electrons < 0 || electrons > orbitals {
		return 0
	}
	n := 1
	for k := 1; k <= min(electrons, orbitals-electrons); k++ {
		hi, lo := bits.Mul64(uint64(n), uint64(orbitals-k+1))
		if hi >= uint64(k) {
			return math.MaxInt
		}
		quotient, _ := bits.Div64(hi, lo, uint64(k))
		if quotient > math.MaxInt {
			return math.MaxInt
		}
		n = int(quotient)
	}
	return n
}

// Table is the list of all strings of n electrons in M orbitals. It is
// immutable and may be shared between goroutines.
type Table struct {
	orbitals, electrons int
	masks               []uint64
	// weight[k*M+p] is the number of strings skipped, in the complement of the
	// order, when electron k (from 0) sits in orbital p: (M−1−p over n−k).
	weight []int
}

// New enumerates the strings of n electrons in M orbitals: 8·Count(M, n) bytes,
// which the caller should have found bearable. It panics unless 0 ≤ n ≤ M ≤ 64
// and the strings can be numbered by an int32.
func New(orbitals, electrons int) *Table {
	if orbitals < 0 || orbitals > MaxOrbitals || electrons < 0 || electrons > orbitals {
		panic("strings: electrons or orbitals out of range")
	}
	count := Count(orbitals, electrons)
	if count > math.MaxInt32 {
		panic("strings: too many strings")
	}
	t := &Table{orbitals: orbitals, electrons: electrons, masks: make([]uint64, count), weight: make([]int, electrons*orbitals)}
	for k := range electrons {
		for p := range orbitals {
			// Places that no string of this table has may overflow the
			// binomial; they are never looked up.
			if p >= k && orbitals-1-p >= electrons-1-k {
				t.weight[k*orbitals+p] = Count(orbitals-1-p, electrons-k)
			}
		}
	}
	list := make([]int, electrons)
	for k := range list {
		list[k] = k
	}
	for i := range t.masks {
		for _, p := range list {
			t.masks[i] |= 1 << p
		}
		k := electrons - 1
		for k >= 0 && list[k] == orbitals-electrons+k {
			k--
		}
		if k < 0 {
			break
		}
		list[k]++
		for l := k + 1; l < electrons; l++ {
			list[l] = list[l-1] + 1
		}
	}
	return t
}

// Orbitals returns M.
func (t *Table) Orbitals() int { return t.orbitals }

// Electrons returns n.
func (t *Table) Electrons() int { return t.electrons }

// Len returns the number of strings, S.
func (t *Table) Len() int { return len(t.masks) }

// Masks returns the masks of all strings in their order, length Len. It aliases
// the table and must not be changed.
func (t *Table) Masks() []uint64 { return t.masks }

// Mask returns the mask of string i.
func (t *Table) Mask(i int) uint64 { return t.masks[i] }

// Index returns the number of the string with this mask, the inverse of Mask.
// The mask must have n bits, all below M. Cost: n table look-ups.
func (t *Table) Index(mask uint64) int {
	if bits.OnesCount64(mask) != t.electrons || (t.orbitals < 64 && mask>>t.orbitals != 0) {
		panic("strings: mask does not belong to the table")
	}
	i := len(t.masks) - 1
	for k := 0; mask != 0; k++ {
		i -= t.weight[k*t.orbitals+bits.TrailingZeros64(mask)]
		mask &= mask - 1
	}
	return i
}

// Occupied appends the ascending orbital list of string i to dst.
func (t *Table) Occupied(dst []int, i int) []int {
	for mask := t.masks[i]; mask != 0; mask &= mask - 1 {
		dst = append(dst, bits.TrailingZeros64(mask))
	}
	return dst
}
