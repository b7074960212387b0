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

// Blocks of C small enough that gonum stays on the calling goroutine.
const (
	portableRows = 64
	portableCols = 192
)

// gonumProduct is the product where no kernel runs.
func gonumProduct[T float](m, n, k int, alpha T, a, b operand[T], beta T, c []T, ldc int) {
	for i := 0; i < m; i += portableRows {
		rows := min(portableRows, m-i)
		ai := i * a.ld
		if a.trans {
			ai = i
		}
		for j := 0; j < n; j += portableCols {
			cols := min(portableCols, n-j)
			bj := j
			if b.trans {
				bj = j * b.ld
			}
			ta, tb := transpose(a.trans), transpose(b.trans)
			switch c := any(c[i*ldc+j:]).(type) {
			case []float64:
				gonum.Implementation{}.Dgemm(ta, tb, rows, cols, k, float64(alpha), any(a.data[ai:]).([]float64), a.ld,
					any(b.data[bj:]).([]float64), b.ld, float64(beta), c, ldc)
			case []float32:
				gonum.Implementation{}.Sgemm(ta, tb, rows, cols, k, float32(alpha), any(a.data[ai:]).([]float32), a.ld,
					any(b.data[bj:]).([]float32), b.ld, float32(beta), c, ldc)
			}
		}
	}
}
