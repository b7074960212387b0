package linalg

import "math"

// InvertBatch replaces each of count complex n×n matrices by its inverse, by
// Gauss–Jordan elimination with partial pivoting. Matrix w is the block
// a[w·2n² : (w+1)·2n²]: n² real parts, row-major, then n² imaginary parts.
//
// logAbs[w] and phase[w] receive log|det| and det/|det|. An exactly singular
// matrix gives -Inf and 0 and is replaced by zeros; a matrix with a NaN or an
// infinity gives NaN throughout. The result for a matrix does not depend on its
// place in the batch. 8·n³ flops each. Safe for concurrent use on disjoint data.
func InvertBatch(n, count int, a []float64, logAbs []float64, phase []complex128) {
	checkBatch(n, count, a, logAbs, phase)
	pivots := make([]int, n)
	for w := range count {
		re, im := planes(n, w, a)
		logAbs[w], phase[w] = invert(n, re, im, pivots)
	}
}

// LogDetBatch returns log|det| and det/|det| of count complex n×n matrices, in
// the layout of [InvertBatch] and with the same conventions. It destroys a.
// (8/3)·n³ flops each.
func LogDetBatch(n, count int, a []float64, logAbs []float64, phase []complex128) {
	checkBatch(n, count, a, logAbs, phase)
	for w := range count {
		re, im := planes(n, w, a)
		logAbs[w], phase[w] = logDet(n, re, im)
	}
}

func checkBatch(n, count int, a []float64, logAbs []float64, phase []complex128) {
	if n < 0 || count < 0 {
		panic("linalg: negative size")
	}
	if len(a) < 2*n*n*count || len(logAbs) < count || len(phase) < count {
		panic("linalg: slice too short for the batch")
	}
}

func planes(n, w int, a []float64) (re, im []float64) {
	a = a[w*2*n*n : (w+1)*2*n*n]
	return a[:n*n], a[n*n:]
}

// invert is one matrix of InvertBatch; pivots is scratch of length n.
func invert(n int, re, im []float64, pivots []int) (logAbs float64, phase complex128) {
	phase = 1
	for k := range n {
		p := pivot(n, k, re, im)
		pivots[k] = p
		if p != k {
			swapRows(n, k, p, re, im)
			phase = -phase
		}
		d := complex(re[k*n+k], im[k*n+k])
		if d == 0 {
			clear(re)
			clear(im)
			return math.Inf(-1), 0
		}
		logAbs, phase = accumulate(logAbs, phase, d)
		re[k*n+k], im[k*n+k] = 1, 0
		inv := 1 / d
		kre, kim := re[k*n:k*n+n], im[k*n:k*n+n]
		scale(inv, kre, kim)
		for i := range n {
			if i == k {
				continue
			}
			f := complex(re[i*n+k], im[i*n+k])
			re[i*n+k], im[i*n+k] = 0, 0
			subtract(f, kre, kim, re[i*n:i*n+n], im[i*n:i*n+n])
		}
	}
	for k := n - 1; k >= 0; k-- {
		if p := pivots[k]; p != k {
			for i := 0; i < n*n; i += n {
				re[i+k], re[i+p] = re[i+p], re[i+k]
				im[i+k], im[i+p] = im[i+p], im[i+k]
			}
		}
	}
	return logAbs, phase
}

// logDet is one matrix of LogDetBatch.
func logDet(n int, re, im []float64) (logAbs float64, phase complex128) {
	phase = 1
	for k := range n {
		if p := pivot(n, k, re, im); p != k {
			swapRows(n, k, p, re, im)
			phase = -phase
		}
		d := complex(re[k*n+k], im[k*n+k])
		if d == 0 {
			return math.Inf(-1), 0
		}
		logAbs, phase = accumulate(logAbs, phase, d)
		inv := 1 / d
		kre, kim := re[k*n+k+1:k*n+n], im[k*n+k+1:k*n+n]
		for i := k + 1; i < n; i++ {
			f := complex(re[i*n+k], im[i*n+k]) * inv
			subtract(f, kre, kim, re[i*n+k+1:i*n+n], im[i*n+k+1:i*n+n])
		}
	}
	return logAbs, phase
}

// pivot returns the row at or below k with the largest |re|+|im| in column k;
// the first NaN wins.
func pivot(n, k int, re, im []float64) int {
	best, at := -1.0, k
	for i := k; i < n; i++ {
		size := math.Abs(re[i*n+k]) + math.Abs(im[i*n+k])
		if size != size {
			return i
		}
		if size > best {
			best, at = size, i
		}
	}
	return at
}

func swapRows(n, i, j int, re, im []float64) {
	for q := range n {
		re[i*n+q], re[j*n+q] = re[j*n+q], re[i*n+q]
		im[i*n+q], im[j*n+q] = im[j*n+q], im[i*n+q]
	}
}

// accumulate multiplies a number held as log-magnitude and phase by d.
func accumulate(logAbs float64, phase, d complex128) (float64, complex128) {
	size := math.Hypot(real(d), imag(d))
	if math.IsInf(size, 0) {
		size = math.NaN()
	}
	return logAbs + math.Log(size), phase * complex(real(d)/size, imag(d)/size)
}

// scale multiplies a complex row by f.
func scale(f complex128, re, im []float64) {
	fr, fi := real(f), imag(f)
	im = im[:len(re)]
	for j, r := range re {
		re[j], im[j] = fr*r-fi*im[j], fr*im[j]+fi*r
	}
}

// subtract computes y ← y − f·x for complex rows.
func subtract(f complex128, xre, xim, yre, yim []float64) {
	fr, fi := real(f), imag(f)
	xim, yre, yim = xim[:len(xre)], yre[:len(xre)], yim[:len(xre)]
	for j, r := range xre {
		yre[j] -= fr*r - fi*xim[j]
		yim[j] -= fr*xim[j] + fi*r
	}
}
