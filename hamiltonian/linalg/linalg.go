// Package linalg is the one place for hot dense algebra: products of real
// matrices and small complex factorisations. Complex matrices are held as
// separate planes of real and imaginary parts, so that every hot product is a
// real one. All matrices are dense and row-major.
//
// On amd64 the products run in kernels for AVX-512 or for AVX2 with FMA,
// whichever is the best the processor has; elsewhere, and with the build tag
// noasm, they are gonum's. GODEBUG=cpu.avx512f=off takes AVX-512 away from a
// process, GODEBUG=cpu.all=off both; see [Kernel].
//
// Both kernel tiers give the same bits. An element of C depends only on its row
// of A, its column of B, its old value, alpha, beta and k: not on m, n, strides,
// transpositions, packing or alignment. So a walker's numbers do not change with
// the batch it is in. (gonum's product, the fallback, has no such guarantee and
// skips zeros of A, so that 0·NaN is lost.)
//
// Everything here runs on the calling goroutine, may be called concurrently as
// long as the outputs are disjoint, and allocates nothing once warm, unless said
// otherwise.
package linalg

// Gemm computes C ← alpha·op(A)·op(B) + beta·C, with op(A) m×k, op(B) k×n and
// C m×n; op is the transpose where asked for. Leading dimensions are row lengths
// in storage. C must not overlap A or B, and is not read if beta is zero; A and
// B are not read if alpha or k is zero. 2·m·n·k flops.
func Gemm(transA, transB bool, m, n, k int, alpha float64, a []float64, lda int, b []float64, ldb int, beta float64, c []float64, ldc int) {
	product(active, transA, transB, m, n, k, alpha, a, lda, b, ldb, beta, c, ldc)
}

// Gemm32 is [Gemm] in single precision, about twice as fast.
func Gemm32(transA, transB bool, m, n, k int, alpha float32, a []float32, lda int, b []float32, ldb int, beta float32, c []float32, ldc int) {
	product(active, transA, transB, m, n, k, alpha, a, lda, b, ldb, beta, c, ldc)
}

// Kernel names the product kernels in use: "avx512", "avx2" or "gonum".
func Kernel() string { return active.String() }

func product[T float](t tier, transA, transB bool, m, n, k int, alpha T, a []T, lda int, b []T, ldb int, beta T, c []T, ldc int) {
	if m < 0 || n < 0 || k < 0 {
		panic("linalg: negative size")
	}
	if m == 0 || n == 0 {
		return
	}
	check(m, n, c, ldc)
	if k == 0 || alpha == 0 {
		scaleMatrix(m, n, beta, c, ldc)
		return
	}
	if transA {
		check(k, m, a, lda)
	} else {
		check(m, k, a, lda)
	}
	if transB {
		check(n, k, b, ldb)
	} else {
		check(k, n, b, ldb)
	}
	left := operand[T]{data: a, ld: lda, trans: transA}
	right := operand[T]{data: b, ld: ldb, trans: transB}
	if t == portable {
		gonumProduct(m, n, k, alpha, left, right, beta, c, ldc)
	} else {
		kernelProduct(t, m, n, k, alpha, left, right, beta, c, ldc)
	}
}

type float interface{ float32 | float64 }

// operand is a factor of a product as the caller stores it.
type operand[T float] struct {
	data  []T
	ld    int
	trans bool
}

func check[T float](rows, cols int, a []T, ld int) {
	if ld < cols {
		panic("linalg: leading dimension shorter than a row")
	}
	if len(a) < (rows-1)*ld+cols {
		panic("linalg: slice too short for the matrix")
	}
}

// scaleMatrix computes C ← beta·C; zero overwrites NaNs.
func scaleMatrix[T float](m, n int, beta T, c []T, ldc int) {
	for i := range m {
		row := c[i*ldc : i*ldc+n]
		switch beta {
		case 0:
			clear(row)
		case 1:
		default:
			for j := range row {
				row[j] *= beta
			}
		}
	}
}
