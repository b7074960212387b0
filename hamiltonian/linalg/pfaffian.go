package linalg

import "math"

// Pfaffian returns log|pf A| and pf A/|pf A| of a complex antisymmetric n×n
// matrix held as row-major planes of real and imaginary parts, n² each. Only
// the strict upper triangle is read; both planes are overwritten. A zero
// Pfaffian (always so for odd n) gives -Inf and 0; the empty one is 1.
//
// With u and v the first two rows right of the leading 2×2 block and
// a = A_12, eliminating that block leaves the antisymmetric Schur complement
//
//	A′ = A − (u vᵀ − v uᵀ)/a,   pf A = a·pf A′,
//
// the scheme of Parlett and Reid with the row pivoted so that |a| is the
// largest of the first row (a swap of indices changes the sign): Wimmer, ACM
// Trans. Math. Softw. 38, 30 (2012). (4/3)·n³ multiplications and additions
// of reals each.
func Pfaffian(n int, re, im []float64) (logAbs float64, phase complex128) {
	if n < 0 || len(re) < n*n || len(im) < n*n {
		panic("linalg: slice too short for the matrix")
	}
	if n%2 == 1 {
		return math.Inf(-1), 0
	}
	phase = 1
	for k := 0; k < n; k += 2 {
		if p := skewPivot(n, k, re, im); p != k+1 {
			skewSwap(n, k, k+1, p, re)
			skewSwap(n, k, k+1, p, im)
			phase = -phase
		}
		d := complex(re[k*n+k+1], im[k*n+k+1])
		if d == 0 {
			return math.Inf(-1), 0
		}
		logAbs, phase = accumulate(logAbs, phase, d)
		ure, uim := re[k*n:k*n+n], im[k*n:k*n+n]
		vre, vim := re[k*n+n:k*n+2*n], im[k*n+n:k*n+2*n]
		scale(1/d, ure[k+2:], uim[k+2:])
		for i := k + 2; i < n; i++ {
			wre, wim := re[i*n+i+1:i*n+n], im[i*n+i+1:i*n+n]
			subtract(complex(ure[i], uim[i]), vre[i+1:], vim[i+1:], wre, wim)
			subtract(-complex(vre[i], vim[i]), ure[i+1:], uim[i+1:], wre, wim)
		}
	}
	return logAbs, phase
}

// skewPivot returns the column right of k with the largest |re|+|im| in row k;
// the first NaN wins.
func skewPivot(n, k int, re, im []float64) int {
	best, at := -1.0, k+1
	for j := k + 1; j < n; j++ {
		size := math.Abs(re[k*n+j]) + math.Abs(im[k*n+j])
		if size != size {
			return j
		}
		if size > best {
			best, at = size, j
		}
	}
	return at
}

// skewSwap exchanges indices i < j, i > k, of the block that starts at k of an
// antisymmetric matrix of which only the strict upper triangle is kept.
func skewSwap(n, k, i, j int, a []float64) {
	for p := k; p < i; p++ {
		a[p*n+i], a[p*n+j] = a[p*n+j], a[p*n+i]
	}
	for p := i + 1; p < j; p++ {
		a[i*n+p], a[p*n+j] = -a[p*n+j], -a[i*n+p]
	}
	a[i*n+j] = -a[i*n+j]
	for p := j + 1; p < n; p++ {
		a[i*n+p], a[j*n+p] = a[j*n+p], a[i*n+p]
	}
}
