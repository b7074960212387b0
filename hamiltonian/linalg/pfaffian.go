package linalg

import "math"

// Pfaffian returns log|pf A| and pf A/|pf A| of a complex antisymmetric n×n
// matrix held as row-major planes of real and imaginary parts, n² each. Only
// the strict upper triangle is read. A zero Pfaffian (always so for odd n) gives
// -Inf and 0; the empty one is 1; a NaN or an infinity gives NaN.
//
// With u and v the first two rows right of the leading 2×2 block and
// a = A_12, eliminating that block leaves the antisymmetric Schur complement
//
//	A′ = A − (u vᵀ − v uᵀ)/a,   pf A = a·pf A′,
//
// the scheme of Parlett and Reid with the row pivoted so that |a| is the
// largest of the first row (a swap of indices changes the sign): Wimmer, ACM
// Trans. Math. Softw. 38, 30 (2012). (8/3)·n³ flops on both triangles together.
func Pfaffian(n int, re, im []float64) (logAbs float64, phase complex128) {
	if n < 0 || len(re) < n*n || len(im) < n*n {
		panic("linalg: slice too short for the matrix")
	}
	if n%2 == 1 {
		return math.Inf(-1), 0
	}
	w := takeWorkspace()
	defer giveWorkspace(w)
	t := active
	ld, lane := padded(t, n), lanes[float64](t)
	x := w.reserve(2*n*ld, 0)
	clear(x)
	a := planes{re: x[:n*ld], im: x[n*ld:], stride: ld}
	for i := range n {
		copy(a.re[i*ld+i:], re[i*n+i:i*n+n])
		copy(a.im[i*ld+i:], im[i*n+i:i*n+n])
	}
	pf := one
	for k := 0; k < n; k += 2 {
		if p := a.skewPivot(n, k); p != k+1 {
			skewSwap(n, ld, k, k+1, p, a.re)
			skewSwap(n, ld, k, k+1, p, a.im)
			pf.mantissa = -pf.mantissa
		}
		d := a.at(k, k+1)
		pf.multiply(d)
		if d == 0 {
			break
		}
		a.scaleRow(k, k/lane*lane, reciprocal(d))
		if k+2 == n {
			break
		}
		// Rows of the lower triangle go along unread.
		u := planes{re: a.re[k*ld+k+2 : k*ld+n], im: a.im[k*ld+k+2 : k*ld+n]}
		v := planes{re: a.re[(k+1)*ld+k+2 : (k+1)*ld+n], im: a.im[(k+1)*ld+k+2 : (k+1)*ld+n]}
		j := (k + 2) / lane * lane
		a.subtractOuter(t, k+2, n-k-2, j, u, a, k+1)
		for i, x := range v.re {
			v.re[i], v.im[i] = -x, -v.im[i]
		}
		a.subtractOuter(t, k+2, n-k-2, j, v, a, k)
	}
	return pf.polar()
}

// skewPivot returns the column right of k with the largest |re|+|im| in row k;
// a NaN counts as the largest.
func (a planes) skewPivot(n, k int) int {
	best, at := uint64(0), k+1
	for j := k + 1; j < n; j++ {
		size := math.Float64bits(math.Abs(a.re[k*a.stride+j]) + math.Abs(a.im[k*a.stride+j]))
		if size > best {
			best, at = size, j
		}
	}
	return at
}

// skewSwap exchanges indices i < j of the block that starts at k ≤ i of an
// antisymmetric matrix with rows ld apart, of which only the strict upper
// triangle is kept.
func skewSwap(n, ld, k, i, j int, a []float64) {
	for p := k; p < i; p++ {
		a[p*ld+i], a[p*ld+j] = a[p*ld+j], a[p*ld+i]
	}
	for p := i + 1; p < j; p++ {
		a[i*ld+p], a[p*ld+j] = -a[p*ld+j], -a[i*ld+p]
	}
	a[i*ld+j] = -a[i*ld+j]
	for p := j + 1; p < n; p++ {
		a[i*ld+p], a[j*ld+p] = a[j*ld+p], a[i*ld+p]
	}
}
