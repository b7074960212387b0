package linalg

import "unsafe"

// planes is a complex matrix as two row-major planes with rows stride apart.
type planes struct {
	re, im []float64
	stride int
}

// at returns one element.
func (a planes) at(i, j int) complex128 {
	return complex(a.re[i*a.stride+j], a.im[i*a.stride+j])
}

// swapRows exchanges two rows from column j on.
func (a planes) swapRows(i, k, j int) {
	for _, x := range [2][]float64{a.re, a.im} {
		x, y := x[i*a.stride+j:(i+1)*a.stride], x[k*a.stride+j:(k+1)*a.stride]
		for c, v := range x {
			x[c], y[c] = y[c], v
		}
	}
}

// scaleRow multiplies row i by f from column j on.
func (a planes) scaleRow(i, j int, f complex128) {
	re, im := a.re[i*a.stride+j:(i+1)*a.stride], a.im[i*a.stride+j:(i+1)*a.stride]
	fr, fi := real(f), imag(f)
	for c, r := range re {
		re[c], im[c] = fr*r-fi*im[c], fr*im[c]+fi*r
	}
}

// padded returns the row length, at least n, that subtractOuter wants: whole
// vectors.
func padded(t tier, n int) int {
	l := lanes[float64](t)
	return (n + l - 1) / l * l
}

// outer is an update A ← A − f·pᵀ as the kernels take it. The generator knows
// the layout.
type outer struct {
	rows, vectors    int // both positive
	left, leftIm     unsafe.Pointer
	right, rightIm   unsafe.Pointer
	matrix, matrixIm unsafe.Pointer
	stride           int // bytes
}

// subtractOuter computes A ← A − f·pᵀ over rows [i, i+rows) of A and its columns
// from j, a multiple of the lanes, to the end; p is row k of P with the same
// columns, f holds one number per row. Row k may be one of A if its f is zero.
// 8·rows·columns flops.
func (a planes) subtractOuter(t tier, i, rows, j int, f planes, p planes, k int) {
	cols := a.stride - j
	if rows == 0 || cols == 0 {
		return
	}
	f = planes{re: f.re[:rows], im: f.im[:rows]}
	p = planes{re: p.re[k*p.stride+j:][:cols], im: p.im[k*p.stride+j:][:cols]}
	if t != portable {
		last := (i+rows-1)*a.stride + j + cols - 1
		_, _ = a.re[last], a.im[last]
		o := outer{
			rows: rows, vectors: cols / lanes[float64](t), stride: 8 * a.stride,
			left: unsafe.Pointer(&f.re[0]), leftIm: unsafe.Pointer(&f.im[0]),
			right: unsafe.Pointer(&p.re[0]), rightIm: unsafe.Pointer(&p.im[0]),
			matrix: unsafe.Pointer(&a.re[i*a.stride+j]), matrixIm: unsafe.Pointer(&a.im[i*a.stride+j]),
		}
		runOuter(t, &o)
		return
	}
	for r, fr := range f.re {
		fi := f.im[r]
		if fr == 0 && fi == 0 {
			continue
		}
		re, im := a.re[(i+r)*a.stride+j:][:cols], a.im[(i+r)*a.stride+j:][:cols]
		for c, x := range p.re {
			y := p.im[c]
			re[c] -= fr*x - fi*y
			im[c] -= fr*y + fi*x
		}
	}
}
