package linalg

import (
	"fmt"
	"math"
)

// Orthonormalize replaces the columns of a complex rows×cols matrix A by those
// of Q in the thin factorisation A = QR, R upper triangular with a real positive
// diagonal, and returns log det R = log|R_11·…·R_NN|. Row p of the matrix holds
// its cols real parts at a[p·stride:] and its cols imaginary parts right after.
//
// It is an error if the columns are not linearly independent to working
// precision or not finite; the matrix is then left in an undefined state.
//
// Cholesky QR done twice, Q orthonormal to rounding if A, its columns scaled, has
// a condition number below some 1e7: Yamamoto, Nakatsukasa, Yanagisawa and Fukaya,
// Electron. Trans. Numer. Anal. 44, 306 (2015), from memory. What fails its
// check is done again column by column. About 32·rows·cols² flops.
func Orthonormalize(rows, cols int, a []float64, stride int) (logDet float64, err error) {
	if rows < 0 || cols < 0 || stride < 2*cols {
		panic("linalg: bad shape")
	}
	if cols == 0 {
		return 0, nil
	}
	if rows < cols {
		return 0, fmt.Errorf("linalg: %d columns of %d rows cannot be linearly independent", cols, rows)
	}
	if len(a) < (rows-1)*stride+2*cols {
		panic("linalg: slice too short for the matrix")
	}
	w := takeWorkspace()
	defer giveWorkspace(w)
	q := newCholeskyQR(active, w, rows, cols)
	first, ok := q.pass(a, stride, q.half, 2*cols, math.Inf(1))
	if ok {
		// The bound of the paper on |Q†Q − 1| after the first pass.
		second, ok := q.pass(q.half, 2*cols, a, stride, 5./64)
		if ok {
			return first + second, nil
		}
	}
	return gramSchmidt(rows, cols, a, stride)
}

// choleskyQR is memory for the factorisation of a rows×cols matrix.
type choleskyQR struct {
	tier       tier
	rows, cols int
	half       []float64 // result of the first pass, rows×2cols
	square     []float64 // 2cols×2cols
	gram       planes    // G, then R in its upper triangle
	inverse    planes    // R⁻¹
	column     planes
}

func newCholeskyQR(t tier, w *workspace, rows, cols int) choleskyQR {
	ld := padded(t, cols)
	x := w.reserve(2*rows*cols+4*cols*cols+4*cols*ld+2*ld, 0)
	cut := func(n int) []float64 {
		y := x[:n]
		x = x[n:]
		return y
	}
	q := choleskyQR{tier: t, rows: rows, cols: cols}
	q.gram = planes{re: cut(cols * ld), im: cut(cols * ld), stride: ld}
	q.inverse = planes{re: cut(cols * ld), im: cut(cols * ld), stride: ld}
	q.column = planes{re: cut(ld), im: cut(ld)}
	q.square, q.half = cut(4*cols*cols), cut(2*rows*cols)
	return q
}

// pass factors src = QR by Cholesky, writes Q to dst and returns log det R. It
// gives up, dst untouched, on a bad pivot and where |src†src − 1| > deviation in
// the Frobenius norm.
func (q *choleskyQR) pass(src []float64, srcStride int, dst []float64, dstStride int, deviation float64) (logDet float64, ok bool) {
	n := q.cols
	product(q.tier, true, false, 2*n, 2*n, q.rows, 1, src, srcStride, src, srcStride, 0, q.square, 2*n)
	g, s := q.gram, q.square
	clear(g.re)
	clear(g.im)
	var norm float64
	for i := range n {
		for j := i; j < n; j++ {
			re, im := s[i*2*n+j]+s[(n+i)*2*n+n+j], s[i*2*n+n+j]-s[(n+i)*2*n+j]
			g.re[i*g.stride+j], g.im[i*g.stride+j] = re, im
			if i == j {
				norm += (re - 1) * (re - 1)
			} else {
				norm += 2 * (re*re + im*im)
			}
		}
	}
	if !(norm <= deviation*deviation) {
		return 0, false
	}
	if logDet, ok = q.cholesky(); !ok {
		return 0, false
	}
	q.invert()
	for i := range n {
		for j := range n {
			re, im := q.inverse.re[i*q.inverse.stride+j], q.inverse.im[i*q.inverse.stride+j]
			s[i*2*n+j], s[i*2*n+n+j] = re, im
			s[(n+i)*2*n+j], s[(n+i)*2*n+n+j] = -im, re
		}
	}
	product(q.tier, false, false, q.rows, 2*n, 2*n, 1, src, srcStride, s, 2*n, 0, dst, dstStride)
	return logDet, true
}

// cholesky factors G = R†R in the upper triangle and returns log det R.
func (q *choleskyQR) cholesky() (logDet float64, ok bool) {
	g, lane := q.gram, lanes[float64](q.tier)
	det := one
	for k := range q.cols {
		d := g.re[k*g.stride+k]
		// The square of the part of column k outside of the earlier ones' span,
		// compared with its own: less is rounding.
		if !(d > 1e-13*q.diagonal(k)) || math.IsInf(d, 0) {
			return 0, false
		}
		root := math.Sqrt(d)
		det.multiply(complex(root, 0))
		g.scaleRow(k, k/lane*lane, complex(1/root, 0))
		below := q.cols - k - 1
		for i := range below {
			q.column.re[i], q.column.im[i] = g.re[k*g.stride+k+1+i], -g.im[k*g.stride+k+1+i]
		}
		g.subtractOuter(q.tier, k+1, below, (k+1)/lane*lane, q.column, g, k)
	}
	logDet, _ = det.polar()
	return logDet, true
}

// diagonal returns element (k, k) of the Gram matrix before its factorisation.
func (q *choleskyQR) diagonal(k int) float64 {
	n := q.cols
	return q.square[k*2*n+k] + q.square[(n+k)*2*n+n+k]
}

// invert computes R⁻¹ by back substitution.
func (q *choleskyQR) invert() {
	x := q.inverse
	clear(x.re)
	clear(x.im)
	for k := range q.cols {
		x.re[k*x.stride+k] = 1
	}
	lane := lanes[float64](q.tier)
	for k := q.cols - 1; k >= 0; k-- {
		j := k / lane * lane
		x.scaleRow(k, j, complex(1/q.gram.re[k*q.gram.stride+k], 0))
		for i := range k {
			q.column.re[i], q.column.im[i] = q.gram.re[i*q.gram.stride+k], q.gram.im[i*q.gram.stride+k]
		}
		x.subtractOuter(q.tier, 0, k, j, q.column, x, k)
	}
}

// gramSchmidt orthogonalises column by column, each twice against the ones
// before it ("twice is enough": Giraud, Langou and Rozložník, Comput. Math.
// Appl. 50, 1069 (2005), from memory).
func gramSchmidt(rows, cols int, a []float64, stride int) (logDet float64, err error) {
	for j := range cols {
		before := columnNorm(rows, cols, j, a, stride)
		for range 2 {
			for i := range j {
				var re, im float64
				for p := range rows {
					row := a[p*stride : p*stride+2*cols]
					re += row[i]*row[j] + row[cols+i]*row[cols+j]
					im += row[i]*row[cols+j] - row[cols+i]*row[j]
				}
				for p := range rows {
					row := a[p*stride : p*stride+2*cols]
					row[j] -= re*row[i] - im*row[cols+i]
					row[cols+j] -= re*row[cols+i] + im*row[i]
				}
			}
		}
		after := columnNorm(rows, cols, j, a, stride)
		if math.IsNaN(after) || math.IsInf(after, 0) {
			return 0, fmt.Errorf("linalg: column %d of %d holds numbers that are not finite", j+1, cols)
		}
		if !(after > before*float64(rows)*0x1p-52) {
			return 0, fmt.Errorf("linalg: column %d of %d depends linearly on the ones before it", j+1, cols)
		}
		logDet += math.Log(after)
		for p := range rows {
			a[p*stride+j] /= after
			a[p*stride+cols+j] /= after
		}
	}
	return logDet, nil
}

func columnNorm(rows, cols, j int, a []float64, stride int) float64 {
	var norm float64
	for p := range rows {
		norm = math.Hypot(norm, math.Hypot(a[p*stride+j], a[p*stride+cols+j]))
	}
	return norm
}
