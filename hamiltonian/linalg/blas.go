package linalg

import (
	"gonum.org/v1/gonum/blas"
	"gonum.org/v1/gonum/blas/gonum"
)

// BLAS returns an implementation for [gonum.org/v1/gonum/blas/blas64.Use]:
// gonum's with the matrix product of this package, from which gonum's
// factorisations gain. Unlike gonum's, the product stays on one goroutine.
func BLAS() blas.Float64 { return implementation{} }

type implementation struct{ gonum.Implementation }

// Dgemm computes C ← alpha·op(A)·op(B) + beta·C; see [Gemm].
func (implementation) Dgemm(tA, tB blas.Transpose, m, n, k int, alpha float64, a []float64, lda int, b []float64, ldb int, beta float64, c []float64, ldc int) {
	if invalid(tA) || invalid(tB) {
		panic("linalg: bad transpose")
	}
	Gemm(tA != blas.NoTrans, tB != blas.NoTrans, m, n, k, alpha, a, lda, b, ldb, beta, c, ldc)
}

func invalid(t blas.Transpose) bool {
	return t != blas.NoTrans && t != blas.Trans && t != blas.ConjTrans
}
