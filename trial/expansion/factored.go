package expansion

import (
	"math"
	"math/rand/v2"

	"leadline/hamiltonian"
	"leadline/hamiltonian/linalg"
	"leadline/trial"
)

// factored holds C* as a product A Bᵀ of low rank r, A up strings × r and B down
// strings × r; 4·r·(S_up + S_down) flops for each vector, twice that if complex.
type factored struct {
	strings [2]int
	rank    int
	planes  int
	rows    [2][]float64      // A and B, plane after plane
	in, out [2]*linalg.Packed // [Re | Im] of A, B: strings × r; of Aᵀ, Bᵀ: r × strings
}

// What counts as low rank: a fraction of the smaller number of strings that makes
// the products shorter, and the largest residual, relative to the largest element
// of C.
const (
	rankFraction  = 0.35
	rankTolerance = 1e-13
)

// newFactored returns nil unless C, up × down strings, has a low rank. C is
// reduced by Gaussian elimination with complete pivoting, after a random
// projection has shown that this is worth while.
func newFactored(up, down int, re, im []float64) *factored {
	limit := int(rankFraction * float64(min(up, down)))
	if limit < 1 || project(up, down, limit+1, re, im) > limit {
		return nil
	}
	rest := make([]complex128, up*down)
	for k, v := range re {
		rest[k] = complex(v, 0)
		if im != nil {
			rest[k] = complex(v, -im[k])
		}
	}
	left, right := eliminate(rest, up, down, limit)
	if left == nil {
		return nil
	}
	c := &factored{strings: [2]int{up, down}, rank: len(left), planes: 1}
	if im != nil {
		c.planes = 2
	}
	for spin, vectors := range [2][][]complex128{left, right} {
		n := c.strings[spin]
		c.rows[spin] = make([]float64, c.planes*n*c.rank)
		in, out := make([]float64, n*c.planes*c.rank), make([]float64, c.rank*c.planes*n)
		for r, vector := range vectors {
			for k, v := range vector {
				for plane := range c.planes {
					x := real(v)
					if plane == 1 {
						x = imag(v)
					}
					c.rows[spin][(plane*n+k)*c.rank+r] = x
					in[(k*c.planes+plane)*c.rank+r] = x
					out[(r*c.planes+plane)*n+k] = x
				}
			}
		}
		c.in[spin] = linalg.Pack(false, n, c.planes*c.rank, in, c.planes*c.rank)
		c.out[spin] = linalg.Pack(false, c.rank, c.planes*n, out, c.planes*n)
	}
	return c
}

// project returns the rank of GᵀC G′ for Gaussian G, G′ of n columns: that of C,
// as far as it is less than n.
func project(up, down, n int, re, im []float64) int {
	rng := rand.New(rand.NewPCG(1, 2))
	gauss := func(size int) []float64 {
		x := make([]float64, size)
		for k := range x {
			x[k] = rng.NormFloat64()
		}
		return x
	}
	left, right := gauss(up*n), gauss(down*n)
	half, part := make([]float64, up*n), make([]float64, n*n)
	small := make([]complex128, n*n)
	for plane, x := range [2][]float64{re, im} {
		if x == nil {
			continue
		}
		linalg.Gemm(false, false, up, n, down, 1, x, down, right, n, 0, half, n)
		linalg.Gemm(true, false, n, n, up, 1, left, n, half, n, 0, part, n)
		for k, v := range part {
			if plane == 0 {
				small[k] += complex(v, 0)
			} else {
				small[k] += complex(0, v)
			}
		}
	}
	if vectors, _ := eliminate(small, n, n, n-1); vectors != nil {
		return len(vectors)
	}
	return n
}

// eliminate takes one product of a column and a row after the other off x, rows ×
// columns, until no element is larger than rankTolerance times the largest of
// the start; nil if that takes more than limit. It destroys x.
func eliminate(x []complex128, rows, columns, limit int) (left, right [][]complex128) {
	var bound float64
	for {
		at, most := 0, 0.0
		for k, v := range x {
			if a := math.Abs(real(v)) + math.Abs(imag(v)); a > most {
				at, most = k, a
			}
		}
		if bound == 0 {
			bound = rankTolerance * most
		}
		if most <= bound {
			return left, right
		}
		if len(left) == limit {
			return nil, nil
		}
		i, j := at/columns, at%columns
		column, row := make([]complex128, rows), make([]complex128, columns)
		for k := range column {
			column[k] = x[k*columns+j]
		}
		inverse := 1 / x[at]
		for k, v := range x[i*columns : (i+1)*columns] {
			row[k] = v * inverse
		}
		for k, f := range column {
			if f == 0 {
				continue
			}
			for l, v := range row {
				x[k*columns+l] -= f * v
			}
		}
		left, right = append(left, column), append(right, row)
	}
}

// contract implements coefficients.
func (c *factored) contract(y, d []float64, count, spin int, scratch *[]float64) {
	n, other := c.strings[spin], c.strings[1-spin]
	if c.planes == 1 {
		*scratch = trial.Grow(*scratch, 2*count*c.rank)
		c.in[1-spin].Mul(2*count, 1, d, other, 0, *scratch, c.rank)
		c.out[spin].Mul(2*count, 1, *scratch, c.rank, 0, y, n)
		return
	}
	*scratch = trial.Grow(*scratch, count*(6*c.rank+4*n))
	middle, wide := (*scratch)[:2*count*c.rank], (*scratch)[2*count*c.rank:]
	c.in[1-spin].Mul(2*count, 1, d, other, 0, wide, 2*c.rank)
	for i := range count {
		combine(middle[2*i*c.rank:], middle[(2*i+1)*c.rank:], wide[4*i*c.rank:], 1, c.rank)
	}
	c.out[spin].Mul(2*count, 1, middle, c.rank, 0, wide, 2*n)
	for i := range count {
		combine(y[2*i*n:], y[(2*i+1)*n:], wide[4*i*n:], 1, n)
	}
}

// factoredDoubles applies A and B to the excitations of their spin, 4·r·x·C(no−2,
// ne−1) flops each, and joins them walker by walker, 8·r·x_up·x_down flops.
type factoredDoubles struct {
	s     *Source
	sides [2]*exciter
}

func (d *factoredDoubles) mixed(dst []complex128, a *doublesArea, up, down *form, count int) {
	var place [2][]int32
	for spin, form := range [2]*form{up, down} {
		side := &a.sides[spin]
		d.sides[spin].start(side, form, count)
		d.sides[spin].apply(side, d.sides[spin].rows, 0, d.sides[spin].width)
		side.place = trial.Grow(side.place, count)
		for k, i := range side.order {
			side.place[i] = int32(k)
		}
		place[spin] = side.place
	}
	rank := d.sides[0].width
	xUp, xDown := d.s.spaces[0].excitations(), d.s.spaces[1].excitations()
	a.result = trial.Grow(a.result, 4*xUp*xDown)
	left, right := &a.sides[hamiltonian.Down], &a.sides[hamiltonian.Up]
	for i := range count {
		if up.frames[i] == nil || down.frames[i] == nil {
			continue
		}
		k, l := int(place[1][i]), int(place[0][i])
		for p := range 2 {
			for q := range 2 {
				linalg.Gemm(false, true, xDown, xUp, rank, 1, left.half[(2*k+p)*rank:], 2*len(left.order)*rank,
					right.half[(2*l+q)*rank:], 2*len(right.order)*rank, 0, a.result[p*xDown*2*xUp+q*xUp:], 2*xUp)
			}
		}
		combineComplex(dst[i*xUp*xDown:], a.result, xDown, xUp)
	}
}
