package integral

import (
	"math"

	"gonum.org/v1/gonum/mat"

	"leadline/hamiltonian"
	"leadline/hamiltonian/linalg"
)

const (
	// batchWidth is the aimed number of columns (primitive pair × Hermite index)
	// of a batch, batchSize the most primitive pairs in one, ketRows the most
	// rows (primitive pair × Hermite index) of the ket handled at once: the
	// matrix of Hermite integrals stays in the second-level cache.
	batchWidth = 512
	batchSize  = 64
	ketRows    = 96
)

// quartets evaluates repulsion integrals; it is the storage of one goroutine and
// allocates nothing once it has grown.
type quartets struct {
	f        *Functions
	coulomb  coulomb
	segments []segment
	order    int       // of the bra pairs in the batch
	hermite  []float64 // ket rows × batch columns
	half     []float64 // ket functions × batch columns
	p        []float64
	center   [3][]float64
}

// segment is the part of a batch that belongs to one pair.
type segment struct {
	pair                *pair
	from, count, offset int // first primitive, number, place in the batch
}

func newQuartets(f *Functions) *quartets {
	return &quartets{f: f, coulomb: coulomb{tables: f.tables}}
}

// ket is the right-hand side of a column block: chosen functions of a pair.
type ket struct {
	pair *pair
	// e holds the coefficients with their signs (−1)^{t+u+v}, functions ×
	// (primitive, Hermite index).
	e     []float64
	count int // functions
}

// set makes the ket of the chosen rows of a pair.
func (k *ket) set(p *pair, rows []int, sign []float64) {
	k.pair, k.count = p, len(rows)
	n, h := len(p.p)*hermites(p.order), hermites(p.order)
	if cap(k.e) < n*k.count {
		k.e = make([]float64, n*k.count)
	}
	k.e = k.e[:n*k.count]
	for i, row := range rows {
		for j := range n {
			k.e[i*n+j] = p.e[j*len(p.rows)+row] * sign[j%h]
		}
	}
}

// columns adds the integrals (ab|cd) to out[cd·ld + row of ab], for the pairs
// ab, all of the same order, and the functions cd of the ket.
func (q *quartets) columns(bra []*pair, k *ket, out []float64, ld int) {
	if len(bra) == 0 {
		return
	}
	q.order = bra[0].order
	size := max(1, min(batchSize, batchWidth/hermites(q.order)))
	q.grow(size, k)
	q.segments = q.segments[:0]
	filled := 0
	for _, p := range bra {
		for from := 0; from < len(p.p); {
			n := min(size-filled, len(p.p)-from)
			q.segments = append(q.segments, segment{p, from, n, filled})
			for i := range n {
				q.p[filled+i] = p.p[from+i]
				for axis := range 3 {
					q.center[axis][filled+i] = p.center[from+i][axis]
				}
			}
			from += n
			if filled += n; filled == size {
				q.flush(filled, k, out, ld)
				q.segments, filled = q.segments[:0], 0
			}
		}
	}
	if filled > 0 {
		q.flush(filled, k, out, ld)
	}
}

func (q *quartets) grow(size int, k *ket) {
	q.coulomb.grow(size, q.order+k.pair.order)
	if size > len(q.p) {
		q.p = make([]float64, size)
		for axis := range 3 {
			q.center[axis] = make([]float64, size)
		}
	}
	width := size * hermites(q.order)
	if n := max(ketRows, hermites(k.pair.order)) * width; n > len(q.hermite) {
		q.hermite = make([]float64, n)
	}
	if n := k.count * width; n > len(q.half) {
		q.half = make([]float64, n)
	}
}

// flush evaluates the batch of n bra primitives.
func (q *quartets) flush(n int, k *ket, out []float64, ld int) {
	hb, hk := hermites(q.order), hermites(k.pair.order)
	width := n * hb
	together := max(1, ketRows/hk) // ket primitives handled at once
	total := len(k.pair.p)
	beta := 0.0
	for from := 0; from < total; from += together {
		to := min(from+together, total)
		for j := from; j < to; j++ {
			q.integrals(n, k.pair.p[j], &k.pair.center[j], k.pair.order, q.hermite[(j-from)*hk*width:])
		}
		linalg.Gemm(false, false, k.count, width, (to-from)*hk, 1, k.e[from*hk:], total*hk, q.hermite, width, beta, q.half, width)
		beta = 1
	}
	for _, s := range q.segments {
		rows := len(s.pair.rows)
		linalg.Gemm(false, false, k.count, rows, s.count*hb, 1, q.half[s.offset*hb:], width, s.pair.e[s.from*hb*rows:], rows, 1, out[s.pair.first:], ld)
	}
}

// integrals writes R_{h+h'} of the batch and one ket primitive into dst, ket
// index × (bra primitive, bra index).
func (q *quartets) integrals(n int, exponent float64, center *[3]float64, order int, dst []float64) {
	c := &q.coulomb
	c.count = n
	p, alpha, scale := q.p[:n], c.alpha[:n], c.scale[:n]
	for i, x := range p {
		sum := 1 / (x + exponent)
		alpha[i] = x * exponent * sum
		scale[i] = math.Sqrt(sum)
	}
	for axis := range 3 {
		r, b := c.r[axis][:n], q.center[axis][:n]
		for i, x := range b {
			r[i] = x - center[axis]
		}
	}
	c.evaluate(q.order + order)
	hb, hk, total := hermites(q.order), hermites(order), hermites(q.order+order)
	if hk == 1 {
		copy(dst[:n*hb], c.out)
		return
	}
	sum := q.f.tables.sum[q.order][order]
	for h := range hk {
		index := sum[h*hb : (h+1)*hb]
		for i := range n {
			from := c.out[i*total : (i+1)*total]
			to := dst[h*n*hb+i*hb:]
			to = to[:len(index)]
			for j, at := range index {
				to[j] = from[at]
			}
		}
	}
}

// primitiveBound returns √(ij|ij) of the largest product of one primitive pair,
// from its block Hermite index × rows.
func (q *quartets) primitiveBound(block []float64, rows, order int, p float64) float64 {
	c := &q.coulomb
	c.grow(1, 2*order)
	c.count = 1
	c.alpha[0], c.scale[0] = p/2, 1/math.Sqrt(2*p)
	c.r[0][0], c.r[1][0], c.r[2][0] = 0, 0, 0
	c.evaluate(2 * order)
	n := hermites(order)
	sum := q.f.tables.sum[order][order]
	largest := 0.0
	for row := range rows {
		v := 0.0
		for k := range n {
			if block[k*rows+row] == 0 {
				continue
			}
			part := 0.0
			for b, at := range sum[k*n : (k+1)*n] {
				part += block[b*rows+row] * c.out[at]
			}
			v += q.f.tables.sign[k] * block[k*rows+row] * part
		}
		largest = max(largest, v)
	}
	return math.Sqrt(largest)
}

// diagonal fills p.diag.
func (q *quartets) diagonal(p *pair) {
	n := len(p.rows)
	all := make([]int, n)
	for i := range all {
		all[i] = i
	}
	var k ket
	k.set(p, all, q.f.tables.sign)
	block := make([]float64, n*n)
	first := p.first
	p.first = 0
	q.columns([]*pair{p}, &k, block, n)
	p.first = first
	for i := range n {
		p.diag[i] = max(0, block[i*n+i])
	}
}

// Repulsion returns all integrals (pq|rs) as a symmetric matrix over function
// pairs, at the places of [hamiltonian.Pair]. It is meant for checks: the matrix
// has n²(n+1)²/4 elements.
func (f *Functions) Repulsion() *mat.SymDense {
	out := mat.NewSymDense(hamiltonian.Pairs(f.count), nil)
	q := newQuartets(f)
	at := make([]int, f.rows)
	for _, p := range f.pairs {
		for i, r := range p.rows {
			at[p.first+i] = hamiltonian.Pair(int(r[0]), int(r[1]))
		}
	}
	var k ket
	for _, p := range f.pairs {
		all := make([]int, len(p.rows))
		for i := range all {
			all[i] = i
		}
		k.set(p, all, f.tables.sign)
		block := make([]float64, len(all)*f.rows)
		for _, bra := range f.pairs {
			q.columns([]*pair{bra}, &k, block, f.rows)
		}
		for i := range all {
			for row := range f.rows {
				out.SetSym(at[p.first+i], at[row], block[i*f.rows+row])
			}
		}
	}
	return out
}
