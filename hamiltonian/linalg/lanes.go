package linalg

import "unsafe"

// laneLimit is the largest matrix that is eliminated in lanes, one matrix in
// each: larger ones fill vectors by themselves and fit better into the caches.
const laneLimit = 24

// lanesCall asks for the elimination of one matrix per lane. The generator knows
// the layout.
type lanesCall struct {
	n        int
	whole    int            // 1: Gauss–Jordan, 0: to triangular form
	matrix   unsafe.Pointer // re[n][n][lanes], im[n][n][lanes]
	scratch  unsafe.Pointer // four rows, [n][lanes] each
	diagonal unsafe.Pointer // pivots, [n]{re, im}[lanes]
	pivots   unsafe.Pointer // their rows, [n][lanes] int, of 64 bits
}

// laneBatch eliminates as many matrices at once as there are lanes.
type laneBatch struct {
	tier                      tier
	n, lanes                  int
	matrix, scratch, diagonal []float64
	back                      []float64 // matrices one after another
	pivots                    []int
}

func newLaneBatch(t tier, w *workspace, n int) *laneBatch {
	l := lanes[float64](t)
	x := w.reserve(4*n*n*l+4*n*l+2*n*l, n*l)
	b := &w.lanes
	*b = laneBatch{tier: t, n: n, lanes: l, pivots: w.pivots[:n*l]}
	b.matrix, x = x[:2*n*n*l], x[2*n*n*l:]
	b.scratch, x = x[:4*n*l], x[4*n*l:]
	b.diagonal, b.back = x[:2*n*l], x[2*n*l:]
	return b
}

// run eliminates the first matrices of a.
func (b *laneBatch) run(a []float64, whole bool) {
	size := 2 * b.n * b.n
	transposeInto(b.matrix, b.lanes, a, size, b.lanes, size)
	call := lanesCall{
		n: b.n, matrix: unsafe.Pointer(&b.matrix[0]), scratch: unsafe.Pointer(&b.scratch[0]),
		diagonal: unsafe.Pointer(&b.diagonal[0]), pivots: unsafe.Pointer(&b.pivots[0]),
	}
	if whole {
		call.whole = 1
	}
	runLanes(b.tier, &call)
}

// determinant returns the determinant of the matrix in one lane.
func (b *laneBatch) determinant(lane int) determinant {
	det := one
	for k := range b.n {
		d := complex(b.diagonal[2*k*b.lanes+lane], b.diagonal[(2*k+1)*b.lanes+lane])
		det.multiply(d)
		if d == 0 {
			break
		}
		if b.pivots[k*b.lanes+lane] != k {
			det.mantissa = -det.mantissa
		}
	}
	return det
}

// inverse writes the inverse in one lane to block, after unload.
func (b *laneBatch) inverse(lane int, block []float64, order []int) {
	n := b.n
	undoExchanges(order, b.pivots[lane:], b.lanes)
	from := b.back[lane*2*n*n:][:2*n*n]
	for i := 0; i < len(from); i += n {
		to, row := block[i:][:n], from[i:][:n]
		for j, c := range order {
			to[j] = row[c]
		}
	}
}

// unload brings the numbers of each matrix together again.
func (b *laneBatch) unload() {
	size := 2 * b.n * b.n
	transposeInto(b.back, size, b.matrix, b.lanes, size, b.lanes)
}
