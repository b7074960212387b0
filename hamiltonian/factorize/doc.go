// Package factorize turns two-electron integrals into the signed factors of
// [hamiltonian.Factors].
//
// The integrals (pq|rs) of M real orbitals form a symmetric matrix V over the
// n = M(M+1)/2 pairs p ≥ q, in the order of [hamiltonian.Pair]. A factorisation
// V = Σ_g s_g L^g L^gᵀ with s_g = ±1 gives the two-body part ½ Σ_g s_g :v_g v_g:
// of the Hamiltonian.
//
// Molecules have a positive-semidefinite V and s = +1: [Cholesky]. Integrals of
// models may be negative or indefinite: [Signed].
package factorize

import (
	"math"
	"runtime"
	"sync"
	"sync/atomic"

	"leadline/hamiltonian"
)

// Matrix is a symmetric matrix that gives its elements column by column, so that
// it need never be held as a whole. All methods may be called from several
// goroutines at once.
type Matrix interface {
	// Dim returns the number of rows, n.
	Dim() int
	// Diagonal writes the n diagonal elements into dst.
	Diagonal(dst []float64)
	// Column writes the n elements of column j into dst.
	Column(j int, dst []float64)
}

// orbitals returns M of n = M(M+1)/2 pairs.
func orbitals(n int) int {
	m := int(math.Sqrt(2 * float64(n)))
	if n < 1 || hamiltonian.Pairs(m) != n {
		panic("factorize: dimension of the matrix is not a number of orbital pairs")
	}
	return m
}

// newFactors wraps count×n numbers, taken over, as spin-free symmetric factors.
func newFactors(packed, sign []float64) *hamiltonian.Factors {
	return &hamiltonian.Factors{Sign: sign, Packed: [2][]float64{packed, packed}}
}

// negative is −V.
type negative struct{ Matrix }

func (v negative) Diagonal(dst []float64) {
	v.Matrix.Diagonal(dst)
	negate(dst)
}

func (v negative) Column(j int, dst []float64) {
	v.Matrix.Column(j, dst)
	negate(dst)
}

func negate(x []float64) {
	for i := range x {
		x[i] = -x[i]
	}
}

// parallel calls work(i) for i in [0, items) on as many goroutines as there are
// processors. Items write to places of their own, so results do not depend on
// the number of goroutines.
func parallel(items int, work func(i int)) {
	var next atomic.Int64
	var wg sync.WaitGroup
	for range min(items, runtime.GOMAXPROCS(0)) {
		wg.Go(func() {
			for i := int(next.Add(1)) - 1; i < items; i = int(next.Add(1)) - 1 {
				work(i)
			}
		})
	}
	wg.Wait()
}
