package integral

import (
	"cmp"
	"math"
	"slices"
)

// negligible is the size of √(ij|ij), hartree^½, below which a primitive pair is
// left out. By the inequality of Schwarz it can change no integral (ab|cd) by
// more than this times √(cd|cd).
const negligible = 1e-15

// pair is the expansion of all function products of two groups.
type pair struct {
	a, b    int // groups, a ≥ b
	order   int // highest Hermite degree
	rows    [][2]int32
	first   int          // its first row among all
	largest float64      // largest diagonal integral
	diag    []float64    // (ab|ab) of each row
	p       []float64    // sums of exponents
	center  [][3]float64 // centres of the primitive products
	// e holds the coefficients, (primitive, Hermite index) × rows, multiplied by
	// chargeScale/p.
	e []float64
}

// makePairs expands all pairs of groups and sorts them.
func (f *Functions) makePairs() {
	var list []*pair
	for a := range f.groups {
		for b := range a + 1 {
			list = append(list, &pair{a: a, b: b})
		}
	}
	each(len(list), func() func(int) {
		q := newQuartets(f)
		return func(i int) {
			f.expand(list[i], q)
		}
	})
	list = slices.DeleteFunc(list, func(p *pair) bool { return len(p.p) == 0 })
	slices.SortStableFunc(list, func(p, q *pair) int {
		return cmp.Or(cmp.Compare(p.order, q.order), cmp.Compare(q.largest, p.largest))
	})
	for _, p := range list {
		p.first = f.rows
		f.rows += len(p.rows)
	}
	f.pairs = list
}

// expand fills the pair: rows, primitives, coefficients, diagonal integrals.
func (f *Functions) expand(p *pair, q *quartets) {
	a, b := &f.groups[p.a], &f.groups[p.b]
	p.order = a.l + b.l
	for _, s := range a.shells {
		for i := range f.angles[s.l].count {
			for _, t := range b.shells {
				for j := range f.angles[t.l].count {
					if p.a != p.b || s.first+i >= t.first+j {
						p.rows = append(p.rows, [2]int32{int32(s.first + i), int32(t.first + j)})
					}
				}
			}
		}
	}
	e := newExpander(f, a, b)
	for i := range a.exponents {
		for j := range b.exponents {
			if p.a == p.b && j > i {
				break
			}
			// Equal groups: both orders of a primitive pair share p and centre.
			e.clear()
			e.add(i, j)
			if p.a == p.b && j < i {
				e.add(j, i)
			}
			block := e.rows(p.a == p.b)
			sum := a.exponents[i] + b.exponents[j]
			for k := range block {
				block[k] *= chargeScale / sum
			}
			if q.primitiveBound(block, len(p.rows), p.order, sum) >= negligible {
				p.p = append(p.p, sum)
				p.center = append(p.center, e.center)
				p.e = append(p.e, block...)
			}
		}
	}
	if len(p.p) == 0 {
		return
	}
	p.diag = make([]float64, len(p.rows))
	q.diagonal(p)
	p.largest = slices.Max(p.diag)
}

// expander makes the Hermite coefficients of one primitive pair after another.
type expander struct {
	f        *Functions
	a, b     *group
	order    int
	center   [3]float64
	one      [3][maxL + 1][maxL + 3][2*maxL + 3]float64 // E_t^{ij} of each axis (two more for the kinetic energy)
	full     []float64                                  // all products, function of a × function of b × Hermite index
	out      []float64
	monomial []float64
	half     []float64
}

func newExpander(f *Functions, a, b *group) *expander {
	e := &expander{f: f, a: a, b: b, order: a.l + b.l}
	e.full = make([]float64, a.functions*b.functions*hermites(e.order))
	e.out = make([]float64, len(e.full))
	return e
}

func (e *expander) clear() { clear(e.full) }

// axes fills the one-dimensional coefficients of exponents x at a and y at b:
//
//	E_0^{00} = exp(−μ·AB²),  E_t^{i+1,j} = E_{t−1}^{ij}/(2p) + PA·E_t^{ij} + (t+1)·E_{t+1}^{ij}
//
// and likewise with PB for j (McMurchie and Davidson 1978, eqs. 2.20–2.22).
func (e *expander) axes(x, y float64) {
	p := x + y
	for axis := range 3 {
		ca, cb := e.a.center[axis], e.b.center[axis]
		ab := ca - cb
		e.center[axis] = (x*ca + y*cb) / p
		pa, pb := -y/p*ab, x/p*ab
		t := &e.one[axis]
		t[0][0][0] = math.Exp(-x * y / p * ab * ab)
		raise := func(to, from *[2*maxL + 3]float64, n int, shift float64) {
			for k := range n + 2 {
				v := 0.0
				if k > 0 {
					v += from[k-1] / (2 * p)
				}
				if k <= n {
					v += shift * from[k]
				}
				if k < n {
					v += float64(k+1) * from[k+1]
				}
				to[k] = v
			}
		}
		for i := range e.a.l + 1 {
			if i > 0 {
				raise(&t[i][0], &t[i-1][0], i-1, pa)
			}
			for j := range e.b.l {
				raise(&t[i][j+1], &t[i][j], i+j, pb)
			}
		}
	}
}

// add adds the products of primitive i of the first group and j of the second to
// full.
func (e *expander) add(i, j int) {
	e.axes(e.a.exponents[i], e.b.exponents[j])
	n := hermites(e.order)
	rowA := 0
	for sa := range e.a.shells {
		a := &e.a.shells[sa]
		rowB := 0
		for sb := range e.b.shells {
			b := &e.b.shells[sb]
			block := e.product(a.l, b.l)
			c := a.coef[i] * b.coef[j]
			na, nb, nh := e.f.angles[a.l].count, e.f.angles[b.l].count, hermites(a.l+b.l)
			for fa := range na {
				for fb := range nb {
					dst := e.full[((rowA+fa)*e.b.functions+rowB+fb)*n:]
					for h, v := range block[(fa*nb+fb)*nh : (fa*nb+fb+1)*nh] {
						dst[h] += c * v
					}
				}
			}
			rowB += nb
		}
		rowA += e.f.angles[a.l].count
	}
}

// product returns the coefficients of the products of all angular functions of
// degrees la and lb, functions of a × functions of b × H(la+lb).
func (e *expander) product(la, lb int) []float64 {
	n := hermites(la + lb)
	ma, mb := monomials(la), monomials(lb)
	e.monomial = slices.Grow(e.monomial[:0], len(ma)*len(mb)*n)[:len(ma)*len(mb)*n]
	clear(e.monomial)
	for ca, p := range ma {
		for cb, q := range mb {
			dst := e.monomial[(ca*len(mb)+cb)*n:]
			x, y, z := &e.one[0][p[0]][q[0]], &e.one[1][p[1]][q[1]], &e.one[2][p[2]][q[2]]
			for t := range p[0] + q[0] + 1 {
				for u := range p[1] + q[1] + 1 {
					for v := range p[2] + q[2] + 1 {
						dst[hermite(t, u, v)] = x[t] * y[u] * z[v]
					}
				}
			}
		}
	}
	return e.angular(la, lb, n)
}

// angular turns monomial, (monomials of a × monomials of b × n), into angular
// functions.
func (e *expander) angular(la, lb, n int) []float64 {
	ma, mb := len(monomials(la)), len(monomials(lb))
	fa, fb := e.f.angles[la], e.f.angles[lb]
	e.half = transform(e.half, fb.coef, e.monomial, ma, mb, n)
	e.monomial = transform(e.monomial, fa.coef, e.half, 1, ma, fb.count*n)
	return e.monomial
}

// transform returns out[i][f][k] = Σ_c coef[f][c]·in[i][c][k], in the storage of
// out.
func transform(out []float64, coef [][]float64, in []float64, outer, old, inner int) []float64 {
	size := outer * len(coef) * inner
	out = slices.Grow(out[:0], size)[:size]
	clear(out)
	for i := range outer {
		for f, row := range coef {
			dst := out[(i*len(coef)+f)*inner : (i*len(coef)+f+1)*inner]
			for c, factor := range row {
				if factor == 0 {
					continue
				}
				for k, v := range in[(i*old+c)*inner : (i*old+c+1)*inner] {
					dst[k] += factor * v
				}
			}
		}
	}
	return out
}

// rows returns full as Hermite index × rows of the pair; with equal groups only
// products of a function with itself and earlier ones.
func (e *expander) rows(equal bool) []float64 {
	n := hermites(e.order)
	count := e.a.functions * e.b.functions
	if equal {
		count = e.a.functions * (e.a.functions + 1) / 2
	}
	row := 0
	for fa := range e.a.functions {
		for fb := range e.b.functions {
			if equal && fb > fa {
				break
			}
			for h, v := range e.full[(fa*e.b.functions+fb)*n : (fa*e.b.functions+fb+1)*n] {
				e.out[h*count+row] = v
			}
			row++
		}
	}
	return e.out[:n*count]
}
