package clifford

import (
	"math/bits"
	"math/rand/v2"
)

// RankDistribution returns the probabilities of k = 0..n in a uniformly random
// stabilizer basis: proportional to [n,k]_2 2^{k(k+1)/2}, the number of
// subspaces times that of symmetric matrices; there are Π_{i=1..n} (2^i+1)
// bases in all.
func RankDistribution(n int) []float64 {
	p := make([]float64, n+1)
	p[n] = 1
	sum := 1.0
	for k := n; k > 0; k-- {
		// [n,k−1]/[n,k] = (2^k − 1)/(2^{n−k+1} − 1)
		p[k-1] = p[k] * (pow2(k) - 1) / (pow2(n-k+1) - 1) / pow2(k)
		sum += p[k-1]
	}
	for k := range p {
		p[k] /= sum
	}
	return p
}

// Rank draws k from the distribution of RankDistribution.
func Rank(distribution []float64, rng *rand.Rand) int {
	x := rng.Float64()
	for k := len(distribution) - 1; k > 0; k-- {
		if x < distribution[k] {
			return k
		}
		x -= distribution[k]
	}
	return 0
}

// Subspace appends to r the reduced rows of a uniformly random k-dimensional
// subspace of F2^n, pivots ascending.
func Subspace(r []uint64, n, k int, rng *rand.Rand) []uint64 {
	for {
		rows := r
		for range k {
			rows = append(rows, rng.Uint64()&mask(n))
		}
		if reduce(rows[len(r):], n) == k {
			return rows
		}
	}
}

// reduce brings rows to reduced echelon form and returns their rank.
func reduce(rows []uint64, n int) int {
	rank := 0
	for col := 0; col < n && rank < len(rows); col++ {
		p := rank
		for p < len(rows) && rows[p]>>col&1 == 0 {
			p++
		}
		if p == len(rows) {
			continue
		}
		rows[p], rows[rank] = rows[rank], rows[p]
		for i := range rows {
			if i != rank && rows[i]>>col&1 != 0 {
				rows[i] ^= rows[rank]
			}
		}
		rank++
	}
	return rank
}

// Phases appends to b a uniformly random symmetric k×k matrix.
func Phases(b []uint64, k int, rng *rand.Rand) []uint64 {
	first := len(b)
	for i := range k {
		b = append(b, rng.Uint64()&mask(i+1))
	}
	for i := range k {
		for j := range i {
			b[first+j] |= (b[first+i] >> j & 1) << i
		}
	}
	return b
}

// Invertible appends to gl the columns of a uniformly random invertible matrix.
func Invertible(gl []uint64, n int, rng *rand.Rand) []uint64 {
	for {
		columns := gl
		for range n {
			columns = append(columns, rng.Uint64()&mask(n))
		}
		var echelon [64]uint64
		full := true
		for _, c := range columns[len(gl):] {
			for c != 0 && echelon[bits.TrailingZeros64(c)] != 0 {
				c ^= echelon[bits.TrailingZeros64(c)]
			}
			if c == 0 {
				full = false
				break
			}
			echelon[bits.TrailingZeros64(c)] = c
		}
		if full {
			return columns
		}
	}
}

func mask(n int) uint64 {
	if n >= 64 {
		return ^uint64(0)
	}
	return 1<<n - 1
}
