package expansion

import (
	"math/cmplx"

	"leadline/hamiltonian"
	"leadline/trial"
	"leadline/trial/expansion/internal/lanes"
)

// sparse holds the nonzero elements of C*, row by row for each spin, and acts in
// lanes; 4 flops (8 if complex) for each element and vector.
type sparse struct {
	strings [2]int
	rows    [2]lanes.Weights // up strings over down ones, and the other way
}

// element is one nonzero of C.
type element struct {
	at    [2]int32 // up and down string
	value complex128
}

func newSparse(up, down int, elements []element, isComplex bool) *sparse {
	c := &sparse{strings: [2]int{up, down}}
	for spin, n := range c.strings {
		r := &c.rows[spin]
		r.Real = !isComplex
		r.Start = make([]int32, n+1)
		for _, e := range elements {
			r.Start[e.at[spin]+1]++
		}
		for k := range n {
			r.Start[k+1] += r.Start[k]
		}
		r.List = make([]lanes.Weight, len(elements))
		next := append([]int32(nil), r.Start...)
		for _, e := range elements {
			k := next[e.at[spin]]
			next[e.at[spin]]++
			r.List[k] = lanes.NewWeight(int(e.at[1-spin]), cmplx.Conj(e.value))
		}
	}
	return c
}

func (c *sparse) contract(y, d []float64, count, spin int, _ *[]float64) {
	n, other := c.strings[spin], c.strings[1-spin]
	for b := range blocks(count) {
		c.rows[spin].Combine(numbers(y, b*n, n), numbers(d, b*other, other))
	}
}

// sparseDoubles works through blocks of walkers in lanes, once for each pair of
// references in a block, and excitations b, j: E_bj d_down, C† of it, and the sums
// over up strings, 8·x_down·(elements of C + S_up-strings' excitations) flops in
// all for each walker.
type sparseDoubles struct {
	s *Source
	c *sparse
}

// excitations lists, for each excitation of a frame, the strings that it leads
// to with the minor that it leads from.
type excitations struct {
	string, minor []int32
	sign          []float64
	start         []int32
}

func (d *sparseDoubles) mixed(dst []complex128, a *doublesArea, up, down *form, count int) {
	s := d.s
	nUp, nDown := d.c.strings[0], d.c.strings[1]
	spaceUp, spaceDown := s.spaces[0], s.spaces[1]
	xUp, xDown := spaceUp.excitations(), spaceDown.excitations()
	a.half, a.full = trial.Grow(a.half, nUp*lanes.Size), trial.Grow(a.full, nDown*lanes.Size)
	a.result = trial.Grow(a.result, xUp*lanes.Size)
	for b := range blocks(count) {
		mUp, mDown := up.blockMinors(spaceUp, b), down.blockMinors(spaceDown, b)
		first, last := b*lanes.Width, min(count, (b+1)*lanes.Width)
		for i := first; i < last; i++ {
			if up.frames[i] == nil || down.frames[i] == nil || earlier(up, down, first, i) {
				continue
			}
			spaceUp.list(&a.up, up.frames[i])
			a.up.terms(&a.terms)
			spaceDown.list(&a.down, down.frames[i])
			for x := range xDown {
				d.excite(a, x, mDown)
				d.c.rows[hamiltonian.Up].Combine(a.half, a.full)
				a.terms.Multiply(a.result, a.half, mUp, false)
				for j := i; j < last; j++ {
					if up.frames[j] == up.frames[i] && down.frames[j] == down.frames[i] {
						for k := range xUp {
							at := k*lanes.Size + j%lanes.Width
							dst[(j*xDown+x)*xUp+k] = complex(a.result[at], a.result[at+lanes.Width])
						}
					}
				}
			}
		}
	}
}

// earlier reports whether a walker from first on and before i has the references
// of walker i.
func earlier(up, down *form, first, i int) bool {
	for j := first; j < i; j++ {
		if up.frames[j] == up.frames[i] && down.frames[j] == down.frames[i] {
			return true
		}
	}
	return false
}

// excite sets a.full to E_bj d_down for excitation number x, in lanes.
func (d *sparseDoubles) excite(a *doublesArea, x int, m []float64) {
	clear(a.full)
	for k := a.down.start[x]; k < a.down.start[x+1]; k++ {
		sign := a.down.sign[k]
		from, to := numbers(m, int(a.down.minor[k]), 1), numbers(a.full, int(a.down.string[k]), 1)
		for l := range lanes.Size {
			to[l] = sign * from[l]
		}
	}
}

// terms turns a list into terms of products with the strings.
func (e *excitations) terms(t *lanes.Terms) {
	t.Reset()
	for x := range len(e.start) - 1 {
		for k := e.start[x]; k < e.start[x+1]; k++ {
			t.List = append(t.List, lanes.NewTerm(int(e.string[k]), int(e.minor[k]), e.sign[k] < 0))
		}
		t.End()
	}
}

// list sets e to the excitations of a frame.
func (s *space) list(e *excitations, f *frame) {
	x := s.excitations()
	e.start = trial.Grow(e.start, x+2)
	clear(e.start)
	for pass := range 2 {
		if pass == 1 {
			for k := range x {
				e.start[k+2] += e.start[k+1]
			}
			n := int(e.start[x+1])
			e.string, e.minor, e.sign = trial.Grow(e.string, n), trial.Grow(e.minor, n), trial.Grow(e.sign, n)
		}
		for number, at := range f.place {
			k, p, h := s.locate(int(at))
			if k == 0 {
				continue
			}
			particles, holes := &s.particles.levels[k], &s.holes.levels[k]
			below := s.holes.count(k - 1)
			for r := range k {
				for c := range k {
					excitation := int(particles.member[p*k+r])*s.electrons + int(holes.member[h*k+c])
					if pass == 0 {
						e.start[excitation+2]++
						continue
					}
					to := e.start[excitation+1]
					e.start[excitation+1]++
					e.string[to] = int32(number)
					e.minor[to] = int32(s.offset[k-1]+int(particles.less[p*k+r])*below) + holes.less[h*k+c]
					e.sign[to] = f.sign[number]
					if (r+c)%2 == 1 {
						e.sign[to] = -f.sign[number]
					}
				}
			}
		}
	}
	e.start = e.start[:x+1]
}

// locate returns size, particles and holes of a minor.
func (s *space) locate(at int) (k, p, h int) {
	for s.offset[k+1] <= at {
		k++
	}
	width := s.holes.count(k)
	return k, (at - s.offset[k]) / width, (at - s.offset[k]) % width
}
