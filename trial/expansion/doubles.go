package expansion

import (
	"cmp"
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
	sides  [2]excitedSide
	full   []float64 // E_ai d of one walker or block
	result []float64

	// in lanes
	half     []float64
	up, down excitations
	terms    lanes.Terms
	members  []int32 // walkers sorted by references
	minors   [2][]float64
}

func (s *Source) newDoubles() doubles {
	switch c := s.c.(type) {
	case *dense:
		d := &denseDoubles{s: s, c: c, unit: blockUnit, numbers: halfMemory, down: s.newExciter(hamiltonian.Down, c.rows, c.strings[hamiltonian.Up], c.planes)}
		if s.symmetric {
			d.down.triangle = c.triangle()
		}
		if d.moves = d.down.moves; s.spaces[0] != s.spaces[1] {
			d.moves = newMoves(s.active, s.spaces[0].electrons)
		}
		return d
	case *factored:
		d := &factoredDoubles{s: s}
		for spin := range 2 {
			d.sides[spin] = s.newExciter(spin, c.rows[spin], c.rank, c.planes)
		}
		return d
	case *sparse:
		return &sparseDoubles{s: s, c: c}
	}
	panic("expansion: unknown form of the coefficients")
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
			slices.SortFunc(order, func(x, y int) int { return cmp.Compare(list.To[x], list.To[y]) })
			m := &all[b*active+j]
			for _, k := range order {
				m.from, m.to, m.sign = append(m.from, list.From[k]), append(m.to, list.To[k]), append(m.sign, list.Sign[k])
			}
		}
	}
	return all
}

// exciter applies a matrix to E_bj d for all excitations of a tile of walkers of
// one spin: it works through pairs of orbitals b, j, gathering the rows of the
// matrix that belong to the strings with b and without j, for all walkers whose
// reference holds j and not b. 4·C(no−2,ne−1) flops (twice that for a complex
// matrix) for each column, excitation and walker.
type exciter struct {
	space  *space
	moves  []moves   // of E_bj, at b·no+j
	rows   []float64 // strings × columns, plane after plane
	planes int
	width  int // columns
	// triangle, where not nil, holds half of a symmetric matrix: the columns at
	// and beyond the row, the diagonal halved.
	triangle []float64
}

// excitedSide is the scratch of an exciter.
type excitedSide struct {
	order    []int32   // walkers sorted by reference
	place    []int32   // of each walker in order
	groups   []group   // ranges of order with one reference
	excited  []float64 // E_bj d: blocks (group, excitation), rows (walker, part)
	gathered []float64
	products []float64
	half     []float64 // rows (excitation, walker in order, part)
}

// group is a range of the sorted walkers that have one reference.
type group struct {
	frame    *frame
	from, to int
}

func (s *Source) newExciter(spin int, rows []float64, width, planes int) *exciter {
	space := s.spaces[spin]
	return &exciter{space: space, moves: newMoves(space.active, space.electrons), rows: rows, planes: planes, width: width}
}

// start sorts the walkers and sets E_bj d for the excitations of each walker's
// reference, one number for each string with b and without j.
func (e *exciter) start(a *excitedSide, form *form, count int) {
	a.order, a.groups = a.order[:0], a.groups[:0]
	for i := range count {
		if form.frames[i] != nil {
			a.order = append(a.order, int32(i))
		}
	}
	slices.SortStableFunc(a.order, func(x, y int32) int {
		return cmp.Compare(form.frames[x].reference, form.frames[y].reference)
	})
	for k, i := range a.order {
		f := form.frames[i]
		if last := len(a.groups) - 1; last >= 0 && a.groups[last].frame.reference == f.reference {
			a.groups[last].to = k + 1
			continue
		}
		a.groups = append(a.groups, group{frame: f, from: k, to: k + 1})
	}
	n, ne, length := len(e.space.masks), e.space.electrons, e.space.single()
	a.excited = trial.Grow(a.excited, len(a.order)*e.space.excitations()*2*length)
	at := 0
	for _, g := range a.groups {
		for _, particle := range g.frame.orbital[ne:] {
			for _, hole := range g.frame.orbital[:ne] {
				list := &e.moves[particle*e.space.active+hole]
				for k := g.from; k < g.to; k++ {
					for part := range 2 {
						from, to := form.strings[(2*int(a.order[k])+part)*n:][:n], a.excited[at:][:length]
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

// apply sets a.half for the columns from ≤ I < to of the matrix.
// With a triangle in place of rows, which vanishes for columns below the row, only
// the rows below to are looked at.
func (e *exciter) apply(a *excitedSide, rows []float64, from, to int) {
	a.half = trial.Grow(a.half, e.space.excitations()*len(a.order)*2*(to-from))
	for b := range e.space.active {
		for j := range e.space.active {
			if b != j {
				e.pair(a, rows, b, j, from, to)
			}
		}
	}
}

// pair does the work of apply for one pair of orbitals.
func (e *exciter) pair(a *excitedSide, rows []float64, b, j, from, to int) {
	width, x, ne, length := to-from, e.space.excitations(), e.space.electrons, e.space.single()
	n, planes := len(e.space.masks), e.planes
	used := length
	if e.triangle != nil && &rows[0] == &e.triangle[0] {
		used, _ = slices.BinarySearch(e.moves[b*e.space.active+j].to, int32(to))
	}
	gathered := false
	for _, g := range a.groups {
		if g.frame.reference>>j&1 == 0 || g.frame.reference>>b&1 == 1 {
			continue
		}
		if !gathered {
			gathered = true
			a.gathered = trial.Grow(a.gathered, used*planes*width)
			for l, row := range e.moves[b*e.space.active+j].to[:used] {
				for plane := range planes {
					copy(a.gathered[(l*planes+plane)*width:][:width], rows[(plane*n+int(row))*e.width+from:])
				}
			}
		}
		excitation := (g.frame.position[b]-ne)*ne + g.frame.position[j]
		members := g.to - g.from
		left := a.excited[(g.from*x+excitation*members)*2*length:]
		half := a.half[(excitation*len(a.order)+g.from)*2*width:]
		if planes == 1 {
			linalg.Gemm(false, false, 2*members, width, used, 1, left, length, a.gathered, width, 0, half, width)
			continue
		}
		a.products = trial.Grow(a.products, 4*members*width)
		linalg.Gemm(false, false, 2*members, 2*width, used, 1, left, length, a.gathered, 2*width, 0, a.products, 2*width)
		for k := range members {
			combine(half[2*k*width:], half[(2*k+1)*width:], a.products[4*k*width:], 1, width)
		}
	}
}

// denseDoubles applies C† to the down strings' excitations and goes on walker by
// walker with those of the up strings, 8·S_up·x_up·x_down flops.
type denseDoubles struct {
	s     *Source
	c     *dense
	down  *exciter
	moves []moves // of the up strings
	// A block of up strings is a multiple of unit wide, and so that the
	// intermediate has about so many numbers.
	unit, numbers int
}

// blockUnit is three vectors of the product kernel.
const (
	blockUnit  = 24
	halfMemory = 1 << 19
)

func (d *denseDoubles) mixed(dst []complex128, a *doublesArea, up, down *form, count int) {
	s, side := d.s, &a.sides[hamiltonian.Down]
	nUp := d.c.strings[hamiltonian.Up]
	xUp, xDown := s.spaces[0].excitations(), s.spaces[1].excitations()
	a.result = trial.Grow(a.result, count*4*xUp*xDown)
	d.down.start(side, down, count)
	rows, triangular := d.down.rows, up == down && d.down.triangle != nil
	if triangular {
		rows = d.down.triangle
	}
	step := max(1, d.numbers/(2*xDown*count*d.unit)) * d.unit
	for from := 0; from < nUp; from += step {
		to := min(nUp, from+step)
		width := to - from
		d.down.apply(side, rows, from, to)
		a.full = trial.Grow(a.full, 2*xUp*width)
		beta := 1.0
		if from == 0 {
			beta = 0
		}
		for k, i := range side.order {
			if up.frames[i] == nil {
				continue
			}
			out := a.result[int(i)*4*xUp*xDown:][:4*xUp*xDown]
			d.excite(a.full, up, int(i), from, to)
			for part := range 2 {
				linalg.Gemm(false, true, xDown, 2*xUp, width, 1, side.half[(2*k+part)*width:], 2*len(side.order)*width,
					a.full, width, beta, out[part*xDown*2*xUp:], 2*xUp)
			}
		}
	}
	for _, i := range side.order {
		if up.frames[i] != nil {
			out := dst[int(i)*xUp*xDown:][:xUp*xDown]
			combineComplex(out, a.result[int(i)*4*xUp*xDown:], xDown, xUp)
			if triangular {
				addTranspose(out, xUp)
			}
		}
	}
}

// addTranspose adds the transpose of an n×n matrix to it.
func addTranspose(x []complex128, n int) {
	for i := range n {
		for j := range i {
			x[i*n+j] += x[j*n+i]
			x[j*n+i] = x[i*n+j]
		}
		x[i*n+i] *= 2
	}
}

// excite writes E_ai d_up of walker i for the strings from ≤ I < to, rows
// (part, excitation).
func (d *denseDoubles) excite(dst []float64, up *form, i, from, to int) {
	s := d.s
	n, width, x, ne := d.c.strings[0], to-from, s.spaces[0].excitations(), s.spaces[0].electrons
	f := up.frames[i]
	re, im := up.strings[2*i*n:][:n], up.strings[(2*i+1)*n:][:n]
	clear(dst[:2*x*width])
	for p, particle := range f.orbital[ne:] {
		for h, hole := range f.orbital[:ne] {
			list := &d.moves[particle*s.active+hole]
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
