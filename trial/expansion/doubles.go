package expansion

import (
	"slices"

	"leadline/hamiltonian"
	"leadline/hamiltonian/linalg"
	"leadline/hamiltonian/strings"
	"leadline/trial"
	"leadline/trial/expansion/internal/lanes"
)

// doubles computes D_bj,ai = (E_bj d_down)ᵀ C† (E_ai d_up) of every walker of a
// tile, x_down × x_up, b, a over particles and j, i over holes of the walker's own
// references.
type doubles interface {
	mixed(dst []complex128, a *doublesArea, up, down *form, count int)
}

type doublesArea struct {
	gathered []float64 // rows of C†
	excited  []float64 // E_bj d of all walkers and excitations
	products []float64
	half     []float64 // C† E_bj d: rows (excitation, walker, part)
	full     []float64 // E_ai d of one walker: rows (part, excitation)
	result   []float64 // D of all walkers: [Re; Im]·[Re | Im], 2x_down × 2x_up
	up, down excitations
	terms    lanes.Terms
	order    []int32 // walkers sorted by reference
	groups   []group
}

// group is a range of the sorted walkers that have one reference.
type group struct {
	frame    *frame
	from, to int
}

func (s *Source) newDoubles() doubles {
	switch c := s.c.(type) {
	case *dense:
		d := &denseDoubles{s: s, c: c}
		for spin := range 2 {
			if spin == hamiltonian.Down && s.spaces[0] == s.spaces[1] {
				d.moves[1] = d.moves[0]
				break
			}
			d.moves[spin] = newMoves(s.active, s.spaces[spin].electrons)
		}
		return d
	case *sparse:
		return &sparseDoubles{s: s, c: c}
	}
	panic("expansion: unknown form of the coefficients")
}

// denseDoubles works through pairs of orbitals b, j, gathering the rows of C† of
// the strings with b and without j, for all walkers whose reference holds j and
// not b: 4·S_up·C(no−2,ne−1) flops for each pair and walker; then through
// walkers: 8·S_up·x_up·x_down flops.
type denseDoubles struct {
	s     *Source
	c     *dense
	moves [2][]moves // of E_bj, at b·no+j
}

// moves lists what E_bj does to the strings: (E_bj d)_to = sign·d_from, ordered
// by to.
type moves struct {
	from, to []int32
	sign     []float64
}

func newMoves(active, electrons int) []moves {
	table := strings.New(active, electrons)
	all := make([]moves, active*active)
	for b := range active {
		for j := range active {
			if b == j {
				continue
			}
			list := table.Single(b, j)
			order := make([]int, list.Len())
			for k := range order {
				order[k] = k
			}
			slices.SortFunc(order, func(x, y int) int { return int(list.To[x]) - int(list.To[y]) })
			m := &all[b*active+j]
			for _, k := range order {
				m.from, m.to, m.sign = append(m.from, list.From[k]), append(m.to, list.To[k]), append(m.sign, list.Sign[k])
			}
		}
	}
	return all
}

// A block of up strings is a multiple of blockUnit wide, three vectors of the
// product kernel, and about so that the intermediate has halfMemory numbers.
const (
	blockUnit  = 24
	halfMemory = 1 << 18
)

func (d *denseDoubles) mixed(dst []complex128, a *doublesArea, up, down *form, count int) {
	s := d.s
	nUp := d.c.strings[hamiltonian.Up]
	xUp, xDown := s.spaces[0].excitations(), s.spaces[1].excitations()
	a.sortByReference(down, count)
	a.result = trial.Grow(a.result, count*4*xUp*xDown)
	d.excite(a, down)
	step := max(1, halfMemory/(2*xDown*count*blockUnit)) * blockUnit
	for from := 0; from < nUp; from += step {
		to := min(nUp, from+step)
		width := to - from
		a.half = trial.Grow(a.half, xDown*count*2*width)
		a.full = trial.Grow(a.full, 2*xUp*width)
		for b := range s.active {
			for j := range s.active {
				if b != j {
					d.pair(a, count, b, j, from, to)
				}
			}
		}
		beta := 1.0
		if from == 0 {
			beta = 0
		}
		for _, g := range a.groups {
			for k := g.from; k < g.to; k++ {
				i := int(a.order[k])
				out := a.result[i*4*xUp*xDown:][:4*xUp*xDown]
				if up.frames[i] == nil {
					continue
				}
				d.exciteOne(a.full, up, i, from, to)
				for part := range 2 {
					linalg.Gemm(false, true, xDown, 2*xUp, width, 1, a.half[(2*k+part)*width:], 2*count*width,
						a.full, width, beta, out[part*xDown*2*xUp:], 2*xUp)
				}
			}
		}
	}
	for _, i := range a.order {
		if up.frames[i] != nil {
			combineComplex(dst[int(i)*xUp*xDown:], a.result[int(i)*4*xUp*xDown:], xDown, xUp)
		}
	}
}

// sortByReference sets order and groups for the walkers with a reference.
func (a *doublesArea) sortByReference(down *form, count int) {
	a.order, a.groups = a.order[:0], a.groups[:0]
	for i := range count {
		if down.frames[i] != nil {
			a.order = append(a.order, int32(i))
		}
	}
	slices.SortStableFunc(a.order, func(x, y int32) int {
		rx, ry := down.frames[x].reference, down.frames[y].reference
		switch {
		case rx < ry:
			return -1
		case rx > ry:
			return 1
		}
		return 0
	})
	for k, i := range a.order {
		f := down.frames[i]
		if last := len(a.groups) - 1; last >= 0 && a.groups[last].frame.reference == f.reference {
			a.groups[last].to = k + 1
			continue
		}
		a.groups = append(a.groups, group{frame: f, from: k, to: k + 1})
	}
}

// excite sets a.excited to E_bj d_down for the excitations of each walker's
// reference: blocks (group, excitation), rows (walker, part), one number for each
// string with b and without j.
func (d *denseDoubles) excite(a *doublesArea, down *form) {
	s := d.s
	space := s.spaces[hamiltonian.Down]
	n, ne, length := d.c.strings[1], space.electrons, space.single()
	a.excited = trial.Grow(a.excited, len(a.order)*space.excitations()*2*length)
	at := 0
	for _, g := range a.groups {
		for _, particle := range g.frame.orbital[ne:] {
			for _, hole := range g.frame.orbital[:ne] {
				list := &d.moves[1][particle*s.active+hole]
				for k := g.from; k < g.to; k++ {
					for part := range 2 {
						from, to := down.strings[(2*int(a.order[k])+part)*n:][:n], a.excited[at:][:length]
						for l, sign := range list.sign {
							to[l] = sign * from[list.from[l]]
						}
						at += length
					}
				}
			}
		}
	}
}

// single returns the number of strings with one given orbital and without
// another.
func (s *space) single() int { return strings.Count(s.active-2, s.electrons-1) }

// pair sets the rows of a.half for E_bj, up strings from ≤ I < to.
func (d *denseDoubles) pair(a *doublesArea, count, b, j, from, to int) {
	s := d.s
	space := s.spaces[hamiltonian.Down]
	nUp, nDown, planes := d.c.strings[0], d.c.strings[1], d.c.planes
	width, x, ne, length := to-from, space.excitations(), space.electrons, space.single()
	gathered := false
	for _, g := range a.groups {
		if g.frame.reference>>j&1 == 0 || g.frame.reference>>b&1 == 1 {
			continue
		}
		if !gathered {
			gathered = true
			a.gathered = trial.Grow(a.gathered, length*planes*width)
			for l, row := range d.moves[1][b*s.active+j].to {
				for plane := range planes {
					copy(a.gathered[(l*planes+plane)*width:][:width], d.c.rows[(plane*nDown+int(row))*nUp+from:])
				}
			}
		}
		excitation := (g.frame.position[b]-ne)*ne + g.frame.position[j]
		members := g.to - g.from
		left := a.excited[(g.from*x+excitation*members)*2*length:]
		half := a.half[(excitation*count+g.from)*2*width:]
		if planes == 1 {
			linalg.Gemm(false, false, 2*members, width, length, 1, left, length, a.gathered, width, 0, half, width)
			continue
		}
		a.products = trial.Grow(a.products, 4*members*width)
		linalg.Gemm(false, false, 2*members, 2*width, length, 1, left, length, a.gathered, 2*width, 0, a.products, 2*width)
		for k := range members {
			re, im := half[2*k*width:][:width], half[(2*k+1)*width:][:width]
			upper, lower := a.products[4*k*width:][:2*width], a.products[(4*k+2)*width:][:2*width]
			for q := range re {
				re[q] = upper[q] - lower[width+q]
				im[q] = upper[width+q] + lower[q]
			}
		}
	}
}

// exciteOne writes E_ai d_up of walker i for the strings from ≤ I < to, rows
// (part, excitation).
func (d *denseDoubles) exciteOne(dst []float64, up *form, i, from, to int) {
	s := d.s
	n, width, x, ne := d.c.strings[0], to-from, s.spaces[0].excitations(), s.spaces[0].electrons
	f := up.frames[i]
	re, im := up.strings[2*i*n:][:n], up.strings[(2*i+1)*n:][:n]
	clear(dst[:2*x*width])
	for p, particle := range f.orbital[ne:] {
		for h, hole := range f.orbital[:ne] {
			list := &d.moves[0][particle*s.active+hole]
			first, _ := slices.BinarySearch(list.to, int32(from))
			last, _ := slices.BinarySearch(list.to, int32(to))
			dRe, dIm := dst[(p*ne+h)*width:][:width], dst[(x+p*ne+h)*width:][:width]
			signs, sources := list.sign[first:last], list.from[first:last]
			for k, t := range list.to[first:last] {
				at, source, sign := int(t)-from, sources[k], signs[k]
				dRe[at], dIm[at] = sign*re[source], sign*im[source]
			}
		}
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
