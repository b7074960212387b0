package expansion

import (
	"cmp"
	"math/cmplx"
	"slices"

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

// sparseDoubles works through eights of walkers with the same references, in
// lanes: excitations b, j, E_bj d_down, C† of it, and the sums over up strings,
// 8·x_down·(elements of C + excitations that lead to the up strings) flops in all
// for each walker.
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
	alike := func(i, j int32) bool { return up.frames[i] == up.frames[j] && down.frames[i] == down.frames[j] }
	a.members = a.members[:0]
	for i := range count {
		if up.frames[i] != nil && down.frames[i] != nil {
			a.members = append(a.members, int32(i))
		}
	}
	slices.SortStableFunc(a.members, func(i, j int32) int {
		return cmp.Or(cmp.Compare(up.frames[i].reference, up.frames[j].reference), cmp.Compare(down.frames[i].reference, down.frames[j].reference))
	})
	for from := 0; from < len(a.members); {
		to := from + 1
		for to < min(len(a.members), from+lanes.Width) && alike(a.members[from], a.members[to]) {
			to++
		}
		members := a.members[from:to]
		from = to
		d.eight(dst, a, members, up.frames[members[0]], down.frames[members[0]],
			s.spaces[0].together(&a.minors[0], up, members), s.spaces[1].together(&a.minors[1], down, members))
	}
}

// together returns the minors of up to eight walkers in lanes, one after the
// other: their block's own, or copies.
func (s *space) together(copies *[]float64, form *form, members []int32) []float64 {
	block := int(members[0]) / lanes.Width
	whole := len(members) == lanes.Width
	for lane, i := range members {
		whole = whole && int(i) == block*lanes.Width+lane
	}
	if whole {
		return form.blockMinors(s, block)
	}
	*copies = trial.Grow(*copies, s.minors()*lanes.Size)
	for lane, i := range members {
		from := form.blockMinors(s, int(i)/lanes.Width)[int(i)%lanes.Width:]
		to := (*copies)[lane:]
		for at := 0; at < len(from); at += lanes.Width {
			to[at] = from[at]
		}
	}
	return *copies
}

// eight computes D of up to eight walkers with the same references.
func (d *sparseDoubles) eight(dst []complex128, a *doublesArea, members []int32, up, down *frame, mUp, mDown []float64) {
	spaceUp, spaceDown := d.s.spaces[0], d.s.spaces[1]
	xUp, xDown := spaceUp.excitations(), spaceDown.excitations()
	a.half, a.full = trial.Grow(a.half, d.c.strings[0]*lanes.Size), trial.Grow(a.full, d.c.strings[1]*lanes.Size)
	a.result = trial.Grow(a.result, xUp*lanes.Size)
	spaceUp.list(&a.up, up)
	a.up.terms(&a.terms)
	spaceDown.list(&a.down, down)
	for x := range xDown {
		d.excite(a, x, mDown)
		d.c.rows[hamiltonian.Up].Combine(a.half, a.full)
		a.terms.Multiply(a.result, a.half, mUp, false)
		for lane, i := range members {
			for k := range xUp {
				at := k*lanes.Size + lane
				dst[(int(i)*xDown+x)*xUp+k] = complex(a.result[at], a.result[at+lanes.Width])
			}
		}
	}
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
