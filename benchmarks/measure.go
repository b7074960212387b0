package main

import (
	"math"
	"math/rand/v2"
	"time"

	"gonum.org/v1/gonum/blas"
	"gonum.org/v1/gonum/blas/gonum"
	"gonum.org/v1/gonum/stat"

	"slices"
)

// shortest is the least time of one measurement; quicker work is repeated.
const shortest = 4 * time.Millisecond

// interleave times several pieces of work in turn, round after round, and
// returns the median seconds of each.
func interleave(rounds int, work ...func()) []float64 {
	repeats := make([]int, len(work))
	for i, f := range work {
		f() // warm up
		begun := time.Now()
		f()
		repeats[i] = 1 + int(shortest/max(time.Since(begun), 1))
	}
	times := make([][]float64, len(work))
	for range rounds {
		for i, f := range work {
			begun := time.Now()
			for range repeats[i] {
				f()
			}
			times[i] = append(times[i], time.Since(begun).Seconds()/float64(repeats[i]))
		}
	}
	out := make([]float64, len(work))
	for i := range out {
		slices.Sort(times[i])
		out[i] = stat.Quantile(0.5, stat.Empirical, times[i], nil)
	}
	return out
}

// slope returns the exponent of y ~ x^slope by least squares in the logarithms.
func slope(x []int, y []float64) float64 {
	lx, ly := make([]float64, len(x)), make([]float64, len(y))
	for i := range x {
		lx[i], ly[i] = math.Log(float64(x[i])), math.Log(y[i])
	}
	_, beta := stat.LinearRegression(lx, ly, nil, false)
	return beta
}

func matrix(n int) []float64 {
	rng := rand.New(rand.NewPCG(1, uint64(n)))
	a := make([]float64, n*n)
	for i := range a {
		a[i] = rng.NormFloat64()
	}
	return a
}

func gonumProduct(n int, a, b, c []float64) {
	gonum.Implementation{}.Dgemm(blas.NoTrans, blas.NoTrans, n, n, n, 1, a, n, b, n, 0, c, n)
}
