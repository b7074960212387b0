package linalg

import "math"

// InvertBatch replaces each of count complex n×n matrices by its inverse, by
// Gauss–Jordan elimination with partial pivoting. Matrix w is the block
// a[w·2n² : (w+1)·2n²]: n² real parts, row-major, then n² imaginary parts.
//
// logAbs[w] and phase[w] receive log|det| and det/|det|. A matrix with an exactly
// zero pivot gives -Inf and 0 and is replaced by zeros; one with a NaN or an
// infinity gives NaN throughout. The result for a matrix does not depend on its
// place in the batch. 8·n³ flops each.
func InvertBatch(n, count int, a []float64, logAbs []float64, phase []complex128) {
	checkBatch(n, count, a, logAbs, phase)
	w := takeWorkspace()
	defer giveWorkspace(w)
	size, done := 2*n*n, 0
	if active != portable && n > 0 && n <= laneLimit {
		b := newLaneBatch(active, w, n)
		for ; done+b.lanes <= count; done += b.lanes {
			group := a[done*size : (done+b.lanes)*size]
			b.run(group, true)
			b.unload()
			for lane := range b.lanes {
				det, block := b.determinant(lane), group[lane*size:(lane+1)*size]
				if det.mantissa == 0 {
					clear(block)
				} else {
					b.inverse(lane, block, w.order[:n])
				}
				logAbs[done+lane], phase[done+lane] = det.polar()
			}
		}
	}
	for e := newElimination(active, w, n); done < count; done++ {
		block := a[done*size : (done+1)*size]
		e.load(block)
		det := e.invert()
		if det.mantissa == 0 {
			clear(block)
		} else {
			e.storeInverse(block, w.order[:n])
		}
		logAbs[done], phase[done] = det.polar()
	}
}

// LogDetBatch returns log|det| and det/|det| of count complex n×n matrices, in
// the layout of [InvertBatch] and with the same conventions. It destroys a.
// (8/3)·n³ flops each.
func LogDetBatch(n, count int, a []float64, logAbs []float64, phase []complex128) {
	checkBatch(n, count, a, logAbs, phase)
	w := takeWorkspace()
	defer giveWorkspace(w)
	size, done := 2*n*n, 0
	if active != portable && n > 0 && n <= laneLimit {
		b := newLaneBatch(active, w, n)
		for ; done+b.lanes <= count; done += b.lanes {
			b.run(a[done*size:(done+b.lanes)*size], false)
			for lane := range b.lanes {
				logAbs[done+lane], phase[done+lane] = b.determinant(lane).polar()
			}
		}
	}
	for e := newElimination(active, w, n); done < count; done++ {
		e.load(a[done*size : (done+1)*size])
		logAbs[done], phase[done] = e.determinant().polar()
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

// elimination holds one matrix at a time, its rows padded to whole vectors.
type elimination struct {
	tier   tier
	n      int
	matrix planes
	column planes // of factors, contiguous
	pivots []int
}

func newElimination(t tier, w *workspace, n int) *elimination {
	ld := padded(t, n)
	x := w.reserve(2*n*ld+2*ld, n)
	clear(x) // the padding must not hold numbers that are slow to add
	e := &w.elimination
	*e = elimination{
		tier: t, n: n, pivots: w.pivots[:n],
		matrix: planes{re: x[:n*ld], im: x[n*ld : 2*n*ld], stride: ld},
		column: planes{re: x[2*n*ld:][:ld], im: x[2*n*ld+ld:]},
	}
	return e
}

func (e *elimination) load(block []float64) {
	n, m := e.n, e.matrix
	for i := range n {
		copy(m.re[i*m.stride:], block[i*n:i*n+n])
		copy(m.im[i*m.stride:], block[n*n+i*n:n*n+i*n+n])
	}
}

// undoExchanges sets order to where each column of the inverse of a matrix is
// found in that of the matrix with its rows exchanged: at step k with row
// pivots[k·stride].
func undoExchanges(order, pivots []int, stride int) {
	for j := range order {
		order[j] = j
	}
	for k := len(order) - 1; k >= 0; k-- {
		p := pivots[k*stride]
		order[k], order[p] = order[p], order[k]
	}
}

// storeInverse writes the matrix with the exchanges of its rows undone.
func (e *elimination) storeInverse(block []float64, order []int) {
	n, m := e.n, e.matrix
	undoExchanges(order, e.pivots, 1)
	for i := range n {
		re, im := m.re[i*m.stride:][:n], m.im[i*m.stride:][:n]
		toRe, toIm := block[i*n:][:n], block[n*n+i*n:][:n]
		for j, c := range order {
			toRe[j], toIm[j] = re[c], im[c]
		}
	}
}

// takeColumn copies rows [from, n) of column k to e.column and zeros them in the
// matrix from row zero on, and returns the row of the largest |re|+|im| at or
// below k; a NaN counts as the largest.
func (e *elimination) takeColumn(k, from int) int {
	m := e.matrix
	best, at := uint64(0), k
	for i := from; i < e.n; i++ {
		re, im := &m.re[i*m.stride+k], &m.im[i*m.stride+k]
		e.column.re[i], e.column.im[i] = *re, *im
		if i >= k {
			// Magnitudes order like their bits.
			if size := math.Float64bits(math.Abs(*re) + math.Abs(*im)); size > best {
				best, at = size, i
			}
		}
		*re, *im = 0, 0
	}
	return at
}

// step takes column k, brings the pivot row to place k and divides it by the
// pivot, from column j on; the factors of the rows from row from on are left in
// e.column. It reports whether the pivot is not zero.
func (e *elimination) step(k, from, j int, det *determinant) bool {
	p := e.takeColumn(k, from)
	e.pivots[k] = p
	re, im := e.column.re, e.column.im
	d := complex(re[p], im[p])
	det.multiply(d)
	if p != k {
		e.matrix.swapRows(k, p, j)
		det.mantissa = -det.mantissa
		re[p], im[p] = re[k], im[k]
	}
	re[k], im[k] = 0, 0
	if d == 0 {
		return false
	}
	inverse := reciprocal(d)
	e.matrix.scaleRow(k, j, inverse)
	e.matrix.re[k*e.matrix.stride+k] = real(inverse)
	e.matrix.im[k*e.matrix.stride+k] = imag(inverse)
	return true
}

// invert turns the matrix into the inverse of itself with its rows exchanged.
func (e *elimination) invert() determinant {
	det := one
	for k := range e.n {
		if !e.step(k, 0, 0, &det) {
			break
		}
		e.matrix.subtractOuter(e.tier, 0, e.n, 0, e.column, e.matrix, k)
	}
	return det
}

// determinant reduces the matrix to triangular form.
func (e *elimination) determinant() determinant {
	det := one
	lane := lanes[float64](e.tier)
	for k := range e.n {
		j := k / lane * lane
		if !e.step(k, k, j, &det) {
			break
		}
		below := planes{re: e.column.re[k+1:], im: e.column.im[k+1:]}
		e.matrix.subtractOuter(e.tier, k+1, e.n-k-1, j, below, e.matrix, k)
	}
	return det
}
