package integral

import (
	"cmp"
	"context"
	"fmt"
	"math"
	"slices"

	"leadline/hamiltonian/linalg"
)

const (
	// most is the largest number of columns of a round.
	most = 128
	// span: a round takes pivots down to this part of the largest residual at
	// its start (Koch, Sánchez de Merás and Pedersen 2003 use 0.01).
	span = 0.01
	// damping: a row is no longer computed once the bound √(D_ab·D_max) of its
	// residual elements is below this part of the tolerance (same paper, sec. II).
	damping = 1e-3
	// stripe is the number of rows that one work item of the products updates.
	stripe = 256
	// lost is the negative diagonal, relative to the largest integral, beyond which
	// rounding no longer explains it.
	lost = 1e-10
	// bundle is the number of bra primitives that one work item of the integrals
	// takes.
	bundle = 512
)

// Cholesky holds factors of the repulsion integrals, (pq|rs) ≈ Σ_g L^g_pq L^g_rs.
type Cholesky struct {
	// Residual is the largest error left on any diagonal integral (pq|pq),
	// hartree. By the inequality of Schwarz no other integral is off by more than
	// the tolerance asked for: the error matrix is positive semidefinite but for
	// rows that were dropped when their errors were a thousandth of it.
	Residual float64
	// Quartets counts the quartets of shell pairs evaluated.
	Quartets int64

	functions int
	rows      [][2]int32
	blocks    [][]float64 // vectors × rows
}

// Count returns the number of factors.
func (c *Cholesky) Count() int {
	n := 0
	for _, b := range c.blocks {
		n += c.vectors(b)
	}
	return n
}

func (c *Cholesky) vectors(block []float64) int { return len(block) / max(1, len(c.rows)) }

// Blocks returns the number of blocks that hold the factors.
func (c *Cholesky) Blocks() int { return len(c.blocks) }

// Unpack returns how many factors a block holds and a function that writes the
// factor i of it into dst as a full symmetric matrix, functions × functions. The
// function may be called from several goroutines.
func (c *Cholesky) Unpack(block int) (count int, unpack func(dst []float64, i int)) {
	b, n := c.blocks[block], c.functions
	return c.vectors(b), func(dst []float64, i int) {
		clear(dst[:n*n])
		for r, v := range b[i*len(c.rows) : (i+1)*len(c.rows)] {
			p, q := int(c.rows[r][0]), int(c.rows[r][1])
			dst[p*n+q], dst[q*n+p] = v, v
		}
	}
}

// Release frees the storage of a block that is no longer needed.
func (c *Cholesky) Release(block int) { c.blocks[block] = nil }

// Factorise returns Cholesky factors with full pivoting in rounds, straight from
// shells: only the columns of chosen pivots are ever computed (Beebe and
// Linderberg, Int. J. Quantum Chem. 12, 683 (1977)); a round takes many pivots
// and drops rows that no longer matter (Koch, Sánchez de Merás and Pedersen,
// J. Chem. Phys. 118, 9481 (2003)). Tolerance is the largest error to leave on
// any diagonal integral, hartree.
//
// Flops for n rows and g factors, without the integrals: 2·n·g². Memory: n·g and
// 128·n numbers. The work is spread over GOMAXPROCS goroutines; the result does
// not depend on their number. Progress, if not nil, is called after every round
// with the part done, in decades of the residual.
func (f *Functions) Factorise(ctx context.Context, tolerance float64, progress func(done, total int64)) (*Cholesky, error) {
	if !(tolerance > 0) {
		panic("integral: tolerance is not positive")
	}
	s := &factorisation{f: f, tolerance: tolerance, chol: &Cholesky{functions: f.count}}
	s.prepare()
	largest := s.largest()
	s.scale = largest
	if rounding := 64 * 0x1p-52 * largest; tolerance < rounding {
		return nil, fmt.Errorf("factor tolerance is %.1e, expected at least %.1e: the rounding of repulsion integrals up to %.3g", tolerance, rounding, largest)
	}
	decades := math.Log10(largest / tolerance)
	for d := largest; d > tolerance; d = s.largest() {
		if err := ctx.Err(); err != nil {
			return nil, err
		}
		if err := s.round(ctx, d); err != nil {
			return nil, err
		}
		if progress != nil && decades > 0 {
			rest := max(0, math.Log10(s.largest()/tolerance))
			progress(int64(1000*(1-min(1, rest/decades))), 1000)
		}
	}
	s.chol.Residual = s.largest()
	return s.chol, nil
}

// factorisation is the state of one run.
type factorisation struct {
	f         *Functions
	tolerance float64
	scale     float64 // largest integral
	chol      *Cholesky
	d         []float64 // residual diagonal
	bundles   [][2]int  // pairs of equal order and about as many primitives
	active    []bool    // pairs still computed
	columns   []float64 // columns of the round, columns × rows
	kets      []ket     // of the round
	first     []int     // first column of each ket
}

func (s *factorisation) prepare() {
	f := s.f
	s.active = make([]bool, len(f.pairs))
	start, load := 0, 0
	for i, p := range f.pairs {
		s.active[i] = true
		s.d = append(s.d, p.diag...)
		s.chol.rows = append(s.chol.rows, p.rows...)
		load += len(p.p)
		if i+1 == len(f.pairs) || load >= bundle || f.pairs[i+1].order != p.order {
			s.bundles = append(s.bundles, [2]int{start, i + 1})
			start, load = i+1, 0
		}
	}
}

func (s *factorisation) largest() float64 {
	if len(s.d) == 0 {
		return 0
	}
	return slices.Max(s.d)
}

// round takes pivots down to span times the largest residual.
func (s *factorisation) round(ctx context.Context, largest float64) error {
	stop := max(s.tolerance, span*largest)
	pivots := s.choose(largest, stop)
	s.integrals()
	if err := ctx.Err(); err != nil {
		return err
	}
	s.subtract(pivots)
	n, k := len(s.d), len(pivots)
	small := make([]float64, k*k)
	for i := range k {
		for j, row := range pivots {
			small[i*k+j] = s.columns[i*n+row]
		}
	}
	order, inverse := pivoted(small, k, stop)
	if len(order) == 0 { // what seemed left of the diagonal was rounding
		for i, row := range pivots {
			if small[i*k+i] < -lost*s.scale {
				return fmt.Errorf("repulsion integrals lost their positivity: a diagonal of %.3g is left where 0 or more was expected", small[i*k+i])
			}
			s.d[row] = max(0, small[i*k+i])
		}
		return nil
	}
	block := make([]float64, len(order)*n)
	s.stripes(func(from, to int) {
		linalg.Gemm(false, false, len(order), to-from, k, 1, inverse, k, s.columns[from:], n, 0, block[from:], n)
		for g := range order {
			d := s.d[from:to]
			for i, v := range block[g*n+from : g*n+to] {
				d[i] = max(0, d[i]-v*v)
			}
		}
	})
	for _, i := range order {
		s.d[pivots[i]] = 0
	}
	s.chol.blocks = append(s.chol.blocks, block)
	return nil
}

// choose selects the pairs of the round, makes their kets, marks the pairs still
// active and returns the row of every column.
func (s *factorisation) choose(largest, stop float64) []int {
	f := s.f
	type candidate struct {
		pair    int
		largest float64
	}
	var list []candidate
	for i, p := range f.pairs {
		if !s.active[i] {
			continue
		}
		top := slices.Max(s.d[p.first : p.first+len(p.rows)])
		s.active[i] = top*largest > damping*damping*s.tolerance*s.tolerance
		if top >= stop {
			list = append(list, candidate{i, top})
		}
	}
	slices.SortStableFunc(list, func(a, b candidate) int { return cmp.Compare(b.largest, a.largest) })
	var pivots []int
	s.first = s.first[:0]
	for _, c := range list {
		p := f.pairs[c.pair]
		var chosen []int
		for r, d := range s.d[p.first : p.first+len(p.rows)] {
			if d >= stop {
				chosen = append(chosen, r)
			}
		}
		if len(pivots) > 0 && len(pivots)+len(chosen) > most {
			break
		}
		if len(s.first) == len(s.kets) {
			s.kets = append(s.kets, ket{})
		}
		s.kets[len(s.first)].set(p, chosen, f.tables.sign)
		s.first = append(s.first, len(pivots))
		for _, r := range chosen {
			pivots = append(pivots, p.first+r)
		}
	}
	if size := len(pivots) * len(s.d); size > cap(s.columns) {
		s.columns = make([]float64, size)
	} else {
		s.columns = s.columns[:size]
		clear(s.columns)
	}
	return pivots
}

// integrals computes the columns: one work item is a ket and a bundle of pairs.
func (s *factorisation) integrals() {
	n := len(s.d)
	for range s.first {
		for i := range s.active {
			if s.active[i] {
				s.chol.Quartets++
			}
		}
	}
	each(len(s.first)*len(s.bundles), func() func(int) {
		q := newQuartets(s.f)
		var bra []*pair
		return func(item int) {
			// Heavy bundles, those of high order, first.
			b := s.bundles[len(s.bundles)-1-item/len(s.first)]
			k := item % len(s.first)
			bra = bra[:0]
			for i := b[0]; i < b[1]; i++ {
				if s.active[i] {
					bra = append(bra, s.f.pairs[i])
				}
			}
			q.columns(bra, &s.kets[k], s.columns[s.first[k]*n:], n)
		}
	})
}

// subtract takes what earlier factors give off the columns.
func (s *factorisation) subtract(pivots []int) {
	n, k := len(s.d), len(pivots)
	at := make([][]float64, len(s.chol.blocks)) // columns × vectors: factors at the pivots
	for b, block := range s.chol.blocks {
		v := s.chol.vectors(block)
		at[b] = make([]float64, k*v)
		for g := range v {
			for i, row := range pivots {
				at[b][i*v+g] = block[g*n+row]
			}
		}
	}
	s.stripes(func(from, to int) {
		for b, block := range s.chol.blocks {
			v := s.chol.vectors(block)
			linalg.Gemm(false, false, k, to-from, v, -1, at[b], v, block[from:], n, 1, s.columns[from:], n)
		}
	})
	for i, p := range s.f.pairs {
		if !s.active[i] {
			for c := range k {
				clear(s.columns[c*n+p.first : c*n+p.first+len(p.rows)])
			}
		}
	}
}

// stripes calls do for those of the fixed stripes of rows that hold active pairs.
func (s *factorisation) stripes(do func(from, to int)) {
	n := len(s.d)
	live := make([]bool, (n+stripe-1)/stripe)
	for i, p := range s.f.pairs {
		if s.active[i] {
			for k := p.first / stripe; k <= (p.first+len(p.rows)-1)/stripe; k++ {
				live[k] = true
			}
		}
	}
	each(len(live), func() func(int) {
		return func(i int) {
			if live[i] {
				do(i*stripe, min(n, (i+1)*stripe))
			}
		}
	})
}
