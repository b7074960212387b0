package molecule

import (
	"fmt"
	"math"
	"runtime"
	"sync"
	"sync/atomic"

	"gonum.org/v1/gonum/mat"
)

// orthogonalise fills r.Orbitals from the overlap and returns the number of
// functions removed.
func (r *Result) orthogonalise(threshold float64) (removed int, err error) {
	x, err := orthonormal(r.Overlap, threshold)
	if err != nil {
		return 0, err
	}
	n, m := x.Dims()
	r.Orbitals = x
	return n - m, nil
}

// orthonormal returns S^{−1/2}, or, with eigenvalues of S below the threshold, its
// other eigenvectors over the roots of their eigenvalues.
func orthonormal(s *mat.SymDense, threshold float64) (*mat.Dense, error) {
	n := s.SymmetricDim()
	var eigen mat.EigenSym
	if !eigen.Factorize(s, true) {
		return nil, fmt.Errorf("diagonalisation of the %d×%d overlap matrix did not converge", n, n)
	}
	values := eigen.Values(nil)
	var u mat.Dense
	eigen.VectorsTo(&u)
	removed := 0
	for removed < n && values[removed] < threshold {
		removed++
	}
	kept := mat.DenseCopyOf(u.Slice(0, n, removed, n))
	for i := range n {
		for j := range n - removed {
			kept.Set(i, j, kept.At(i, j)/math.Sqrt(values[removed+j]))
		}
	}
	if removed > 0 {
		return kept, nil
	}
	var x mat.Dense
	x.Mul(kept, u.T())
	return &x, nil
}

// parallel calls the function that worker returns once for every index below n,
// from GOMAXPROCS goroutines with a worker each.
func parallel(n int, worker func() func(int)) {
	var next atomic.Int64
	var group sync.WaitGroup
	for range min(n, runtime.GOMAXPROCS(0)) {
		group.Go(func() {
			do := worker()
			for i := int(next.Add(1)) - 1; i < n; i = int(next.Add(1)) - 1 {
				do(i)
			}
		})
	}
	group.Wait()
}
