package expansion

import (
	"math/bits"

	"leadline/hamiltonian/strings"
)

// subsets lists all subsets of n things, sizes 0 … len−1, each size in
// lexicographic order.
type subsets struct {
	n      int
	levels []subsetLevel
}

// subsetLevel lists the subsets of k things.
type subsetLevel struct {
	table  *strings.Table
	member []int32 // k for each subset, ascending
	less   []int32 // number of the subset without that member, one size down
}

func newSubsets(n, most int) *subsets {
	s := &subsets{n: n, levels: make([]subsetLevel, most+1)}
	for k := range s.levels {
		l := &s.levels[k]
		l.table = strings.New(n, k)
		for _, mask := range l.table.Masks() {
			for rest := mask; rest != 0; rest &= rest - 1 {
				i := bits.TrailingZeros64(rest)
				l.member = append(l.member, int32(i))
				l.less = append(l.less, int32(s.levels[k-1].table.Index(mask^1<<i)))
			}
		}
	}
	return s
}

// count returns the number of subsets of k things.
func (s *subsets) count(k int) int { return s.levels[k].table.Len() }

// index returns the number of a subset of k things.
func (s *subsets) index(k int, mask uint64) int { return s.levels[k].table.Index(mask) }

// extract gathers the bits of mask that lie on the bits of on.
func extract(mask, on uint64) uint64 {
	var out uint64
	for k := 0; on != 0; k++ {
		out |= mask >> bits.TrailingZeros64(on) & 1 << k
		on &= on - 1
	}
	return out
}
