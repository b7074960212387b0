package exact

import (
	"math"
	"sync"

	"gonum.org/v1/gonum/blas/gonum"
	"gonum.org/v1/gonum/mat"

	"leadline/hamiltonian/linalg"
)

// subspace is an orthonormal basis of at most limit vectors, their images under
// H and the matrix of H between them.
type subspace struct {
	limit        int
	apply        func(dst, x []float64)
	basis, image [][]float64 // allocated as needed, the first size in use
	size, dim    int
	matrix       []float64 // limit × limit
	scratch      sync.Pool // of restart
}

// restartWidth is the length of the pieces that a restart works on.
const restartWidth = 1024

func newSubspace(dim, limit int, apply func(dst, x []float64)) *subspace {
	s := &subspace{limit: limit, apply: apply, dim: dim, matrix: make([]float64, limit*limit)}
	s.scratch.New = func() any { return make([]float64, 2*limit*min(dim, restartWidth)) }
	return s
}

// orthogonalise makes x orthogonal to the basis and of unit norm; false where less
// than 1e-10 of it is left, or it is not finite.
func (s *subspace) orthogonalise(x []float64) bool {
	first := math.Sqrt(dot(x, x))
	if first == 0 || math.IsNaN(first) || math.IsInf(first, 0) {
		return false
	}
	parts := pieces(s.dim, chunk)
	norm, left := first, 1.0
	// Twice is enough, unless x lies in the span to rounding.
	for range 3 {
		overlaps := make([]float64, parts*s.size)
		each(parts, func(item int) {
			from, to := piece(s.dim, parts, item)
			for j, v := range s.basis[:s.size] {
				overlaps[item*s.size+j] = gonum.Implementation{}.Ddot(to-from, v[from:to], 1, x[from:to], 1) / norm
			}
		})
		for item := 1; item < parts; item++ {
			for j := range s.size {
				overlaps[j] += overlaps[item*s.size+j]
			}
		}
		each(parts, func(item int) {
			from, to := piece(s.dim, parts, item)
			gonum.Implementation{}.Dscal(to-from, 1/norm, x[from:to], 1)
			for j, v := range s.basis[:s.size] {
				gonum.Implementation{}.Daxpy(to-from, -overlaps[j], v[from:to], 1, x[from:to], 1)
			}
		})
		norm = math.Sqrt(dot(x, x))
		left *= norm
		if left < 1e-10 {
			return false
		}
		if math.Abs(norm-1) < 1e-14 {
			break
		}
	}
	each(parts, func(item int) {
		from, to := piece(s.dim, parts, item)
		gonum.Implementation{}.Dscal(to-from, 1/norm, x[from:to], 1)
	})
	return true
}

// add takes a copy of x, orthonormal to the basis, into it. There must be room.
func (s *subspace) add(x []float64) {
	if s.size == len(s.basis) {
		s.basis, s.image = append(s.basis, make([]float64, s.dim)), append(s.image, make([]float64, s.dim))
	}
	k := s.size
	copy(s.basis[k], x)
	s.apply(s.image[k], s.basis[k])
	s.size++
	for j := range s.size {
		v := dot(s.basis[j], s.image[k])
		s.matrix[j*s.limit+k], s.matrix[k*s.limit+j] = v, v
	}
}

// ritz returns the eigenvalues of H in the subspace, ascending, and the
// eigenvectors as columns, size × size. ok is false where there are none, for
// numbers that are not finite.
func (s *subspace) ritz() (values []float64, vectors *mat.Dense, ok bool) {
	small := mat.NewSymDense(s.size, nil)
	for i := range s.size {
		for j := range i + 1 {
			small.SetSym(i, j, s.matrix[i*s.limit+j])
		}
	}
	var eigen mat.EigenSym
	if !eigen.Factorize(small, true) {
		return nil, nil, false
	}
	vectors = new(mat.Dense)
	eigen.VectorsTo(vectors)
	values = eigen.Values(nil)
	return values, vectors, !math.IsNaN(values[0]) && !math.IsInf(values[0], 0)
}

// residual writes Hx − θx for Ritz vector k into dst and returns its norm.
func (s *subspace) residual(dst []float64, value float64, vectors *mat.Dense, k int) float64 {
	rows, _ := vectors.Dims() // may be fewer than size, after additions
	parts := pieces(s.dim, chunk)
	each(parts, func(item int) {
		from, to := piece(s.dim, parts, item)
		clear(dst[from:to])
		for j := range rows {
			y := vectors.At(j, k)
			gonum.Implementation{}.Daxpy(to-from, y, s.image[j][from:to], 1, dst[from:to], 1)
			gonum.Implementation{}.Daxpy(to-from, -value*y, s.basis[j][from:to], 1, dst[from:to], 1)
		}
	})
	return math.Sqrt(dot(dst, dst))
}

// restart replaces the basis by its first keep Ritz vectors, in place; vectors
// added since they were found are forgotten. 4·dim·size·keep flops.
func (s *subspace) restart(keep int, values []float64, vectors *mat.Dense) {
	size, _ := vectors.Dims()
	keep = min(keep, size)
	parts := pieces(s.dim, restartWidth)
	raw := vectors.RawMatrix()
	each(parts, func(item int) {
		scratch := s.scratch.Get().([]float64)
		defer s.scratch.Put(scratch)
		from, to := piece(s.dim, parts, item)
		width := to - from
		in, out := scratch[:size*width], scratch[size*width:]
		for _, set := range [][][]float64{s.basis, s.image} {
			for j := range size {
				copy(in[j*width:(j+1)*width], set[j][from:to])
			}
			linalg.Gemm(true, false, keep, width, size, 1, raw.Data, raw.Stride, in, width, 0, out, width)
			for k := range keep {
				copy(set[k][from:to], out[k*width:(k+1)*width])
			}
		}
	})
	s.size = keep
	clear(s.matrix)
	for k := range keep {
		s.matrix[k*s.limit+k] = values[k]
	}
}
