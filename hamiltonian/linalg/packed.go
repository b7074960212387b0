package linalg

import "unsafe"

// Packed is a constant right-hand operand B of a product, k×n, kept in the
// layout that the product kernel reads. It may be used concurrently.
type Packed struct{ packed[float64] }

// Packed32 is [Packed] in single precision.
type Packed32 struct{ packed[float32] }

// Pack copies op(B), k×n, into the kernel's layout. The copy does not alias b.
func Pack(trans bool, k, n int, b []float64, ldb int) *Packed {
	return &Packed{pack(active, trans, k, n, b, ldb)}
}

// Pack32 is [Pack] in single precision.
func Pack32(trans bool, k, n int, b []float32, ldb int) *Packed32 {
	return &Packed32{pack(active, trans, k, n, b, ldb)}
}

// Dims returns the shape of the operand, k×n.
func (p *Packed) Dims() (k, n int) { return p.k, p.n }

// Dims returns the shape of the operand, k×n.
func (p *Packed32) Dims() (k, n int) { return p.k, p.n }

// Mul computes C ← alpha·A·B + beta·C, A m×k, B the packed operand, C m×n, with
// the same bits as [Gemm]. It pays from about 8 rows on.
func (p *Packed) Mul(m int, alpha float64, a []float64, lda int, beta float64, c []float64, ldc int) {
	p.multiply(m, alpha, a, lda, beta, c, ldc)
}

// Mul is [Packed.Mul] in single precision.
func (p *Packed32) Mul(m int, alpha float32, a []float32, lda int, beta float32, c []float32, ldc int) {
	p.multiply(m, alpha, a, lda, beta, c, ldc)
}

// packed holds op(B) in blocks of columns, each cut into panels, each k×width.
// On the portable tier it is one row-major matrix.
type packed[T float] struct {
	tier tier
	k, n int
	data []T
}

// packedBytes is a row of a block of columns, short enough that the block of C
// stays in the second-level cache.
const packedBytes = 240 * 8

func pack[T float](t tier, trans bool, k, n int, b []T, ldb int) packed[T] {
	if k < 0 || n < 0 {
		panic("linalg: negative size")
	}
	p := packed[T]{tier: t, k: k, n: n}
	if k == 0 || n == 0 {
		return p
	}
	if trans {
		check(n, k, b, ldb)
	} else {
		check(k, n, b, ldb)
	}
	if t == portable {
		p.data = make([]T, k*n)
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
	l := lanes[T](t)
	p.data = make([]T, (n+l-1)/l*l*k)
	cols := packedBytes / int(unsafe.Sizeof(b[0]))
	for j := 0; j < n; j += cols {
		packRight(t, p.data[j*k:], operand[T]{data: b, ld: ldb, trans: trans}, 0, k, j, min(cols, n-j))
	}
	return p
}

func (p *packed[T]) multiply(m int, alpha T, a []T, lda int, beta T, c []T, ldc int) {
	if m < 0 {
		panic("linalg: negative size")
	}
	if m == 0 || p.n == 0 {
		return
	}
	if p.tier == portable || p.k == 0 || alpha == 0 {
		product(portable, false, false, m, p.n, p.k, alpha, a, lda, p.data, p.n, beta, c, ldc)
		return
	}
	check(m, p.k, a, lda)
	check(m, p.n, c, ldc)
	size := int(unsafe.Sizeof(alpha))
	cols, step := packedBytes/size, depth(p.k)
	call := panel[T]{alpha: alpha, cRow: ldc * size}
	for i := 0; i < m; i += maxRows {
		call.m = min(maxRows, m-i)
		for j := 0; j < p.n; j += cols {
			for l := 0; l < p.k; l += step {
				call.k, call.beta = min(step, p.k-l), 1
				if l == 0 {
					call.beta = beta
				}
				call.left(p.tier, operand[T]{data: a, ld: lda}, i, l)
				sweep(p.tier, &call, min(cols, p.n-j), source[T]{data: p.data[j*p.k:], depth: p.k, skip: l}, c[i*ldc+j:])
			}
		}
	}
}
