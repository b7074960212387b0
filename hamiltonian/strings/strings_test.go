package strings

import (
	"math"
	"math/big"
	"math/bits"
	"slices"
	"testing"
)

func TestCount(t *testing.T) {
	for m := range 70 {
		for n := -1; n <= m+1; n++ {
			want := math.MaxInt
			if b := new(big.Int).Binomial(int64(m), int64(n)); n < 0 || n > m {
				want = 0
			} else if b.IsInt64() {
				want = int(b.Int64())
			}
			if got := Count(m, n); got != want {
				t.Fatalf("Count(%d, %d) = %d, want %d", m, n, got, want)
			}
		}
	}
}

// The order is that of the ascending orbital lists compared as words.
func TestOrder(t *testing.T) {
	for _, c := range []struct{ m, n int }{{1, 0}, {1, 1}, {4, 2}, {6, 3}, {7, 1}, {9, 8}, {10, 5}, {64, 1}, {64, 2}, {64, 63}, {64, 64}, {64, 0}} {
		table := New(c.m, c.n)
		var last []int
		for i := range table.Len() {
			list := table.Occupied(nil, i)
			if len(list) != c.n || bits.OnesCount64(table.Mask(i)) != c.n {
				t.Fatalf("M=%d n=%d: string %d has %d electrons", c.m, c.n, i, len(list))
			}
			if i > 0 && slices.Compare(last, list) >= 0 {
				t.Fatalf("M=%d n=%d: %v is not after %v", c.m, c.n, list, last)
			}
			if got := table.Index(table.Mask(i)); got != i {
				t.Fatalf("M=%d n=%d: Index(Mask(%d)) = %d", c.m, c.n, i, got)
			}
			last = list
		}
		if table.Len() != Count(c.m, c.n) {
			t.Fatalf("M=%d n=%d: %d strings", c.m, c.n, table.Len())
		}
	}
}

// Annihilation signs must give the canonical anticommutators, whatever they are
// one by one: {c_p, c_q} = 0 through two tables, and c†_p c_q = E_pq.
func TestAnnihilateAgainstAlgebra(t *testing.T) {
	const m, n = 6, 3
	t3, t2, t1 := New(m, n), New(m, n-1), New(m, n-2)
	apply := func(x []float64, moves *Moves, size int) []float64 {
		y := make([]float64, size)
		for k, i := range moves.From {
			y[moves.To[k]] += moves.Sign[k] * x[i]
		}
		return y
	}
	raise := func(x []float64, moves *Moves, size int) []float64 {
		y := make([]float64, size)
		for k, i := range moves.To {
			y[moves.From[k]] += moves.Sign[k] * x[i]
		}
		return y
	}
	for i := range t3.Len() {
		x := make([]float64, t3.Len())
		x[i] = 1
		for p := range m {
			for q := range m {
				a := apply(apply(x, t3.Annihilate(t2, p), t2.Len()), t2.Annihilate(t1, q), t1.Len())
				b := apply(apply(x, t3.Annihilate(t2, q), t2.Len()), t2.Annihilate(t1, p), t1.Len())
				for k := range a {
					if a[k] != -b[k] {
						t.Fatalf("{c_%d, c_%d} does not vanish on string %d", p, q, i)
					}
				}
				want := raise(apply(x, t3.Annihilate(t2, q), t2.Len()), t3.Annihilate(t2, p), t3.Len())
				if got := apply(x, t3.Single(p, q), t3.Len()); !slices.Equal(got, want) {
					t.Fatalf("E_%d%d on string %d: %v, want %v", p, q, i, got, want)
				}
			}
		}
	}
}

// The sign of removing the first-ranked electron is +, since its operator
// stands leftmost.
func TestSignConvention(t *testing.T) {
	table, below := New(5, 3), New(5, 2)
	moves := table.Annihilate(below, 3)
	for k, i := range moves.From {
		list := table.Occupied(nil, int(i))
		want := 1.0
		if slices.Index(list, 3)%2 == 1 {
			want = -1
		}
		if moves.Sign[k] != want {
			t.Errorf("c_3 on %v has sign %v, want %v", list, moves.Sign[k], want)
		}
	}
	if moves.Len() != cap(moves.From) {
		t.Errorf("%d moves, expected %d", moves.Len(), cap(moves.From))
	}
}
