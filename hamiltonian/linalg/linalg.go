// Package linalg is the one place for hot dense algebra: products of real
// float64 matrices and small complex factorisations. Complex matrices are held
// as separate planes of real and imaginary parts, so that every hot product is
// a real one. All matrices are dense and row-major.
package linalg

import (
	"gonum.org/v1/gonum/blas"
	"gonum.org/v1/gonum/blas/gonum"
)

func transpose(t bool) blas.Transpose {
	if t {
		return blas.Trans
	}
	return blas.NoTrans
}

// Gemm computes C ← alpha·op(A)·op(B) + beta·C on one thread, with op(A) m×k,
// op(B) k×n and C m×n; op is the transpose where asked for. Leading dimensions
// are row lengths in storage. 2·m·n·k flops.
func Gemm(transA, transB bool, m, n, k int, alpha float64, a []float64, lda int, b []float64, ldb int, beta float64, c []float64, ldc int) {
	if m == 0 || n == 0 {
		return
	}
	gonum.Implementation{}.Dgemm(transpose(transA), transpose(transB), m, n, k, alpha, a, lda, b, ldb, beta, c, ldc)
}

// Packed is a constant right-hand operand B of a product, k×n, kept in the
// layout that the product kernel reads.
type Packed struct {
	k, n int
	data []float64
}

// Pack copies op(B), k×n, into the kernel's layout. The copy does not alias b.
func Pack(trans bool, k, n int, b []float64, ldb int) *Packed {
	p := &Packed{k: k, n: n, data: make([]float64, k*n)}
	for i := range k {
		for j := range n {
			if trans {
				p.data[i*n+j] = b[j*ldb+i]
			} else {
				p.data[i*n+j] = b[i*ldb+j]
			}
		}
	}
	return p
}

// Dims returns the shape of the operand, k×n.
func (p *Packed) Dims() (k, n int) { return p.k, p.n }

// Mul computes C ← alpha·A·B + beta·C on one thread, A m×k, B the packed
// operand, C m×n. It allocates nothing and may be called from several goroutines.
func (p *Packed) Mul(m int, alpha float64, a []float64, lda int, beta float64, c []float64, ldc int) {
	Gemm(false, false, m, p.n, p.k, alpha, a, lda, p.data, p.n, beta, c, ldc)
}

// Kernel names the product kernel in use: "avx512", "avx2" or "gonum".
func Kernel() string { return "gonum" }
