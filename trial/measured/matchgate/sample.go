package matchgate

import (
	"math"
	"math/rand/v2"
)

// Pairs appends to pairs a uniformly random signed permutation, read as n
// ordered pairs of Majoranas: pair j is random, as are its place and its
// orientation.
func Pairs(pairs []uint8, n int, rng *rand.Rand) []uint8 {
	first := len(pairs)
	for a := range 2 * n {
		pairs = append(pairs, uint8(a))
	}
	list := pairs[first:]
	rng.Shuffle(len(list), func(i, j int) { list[i], list[j] = list[j], list[i] })
	return pairs
}

// Rotation appends to q a Haar-random matrix of O(2n), row-major: the rows of a
// Gaussian matrix orthonormalised one after the other (twice, for accuracy).
func Rotation(q []float64, n int, rng *rand.Rand) []float64 {
	m := 2 * n
	first := len(q)
	for range m * m {
		q = append(q, rng.NormFloat64())
	}
	a := q[first:]
	for i := range m {
		row := a[i*m : (i+1)*m]
		for range 2 {
			for j := range i {
				other := a[j*m : (j+1)*m]
				dot := 0.0
				for c, v := range row {
					dot += v * other[c]
				}
				for c := range row {
					row[c] -= dot * other[c]
				}
			}
			norm := 0.0
			for _, v := range row {
				norm += v * v
			}
			norm = math.Sqrt(norm)
			for c := range row {
				row[c] /= norm
			}
		}
	}
	return q
}
