package expansion

import (
	"slices"

	"leadline/hamiltonian"
	"leadline/hamiltonian/linalg"
	"leadline/hamiltonian/strings"
	"leadline/trial"
)

// doubles computes D_bj,ai = (E_bj d_down)ᵀ C† (E_ai d_up) of every walker of a
// tile, b, a over particles and j, i over holes of the walker's own references.
// dst holds for each walker the real product [Re; Im]·[Re | Im] of the two
// complex factors, 2x_down × 2x_up; see combineComplex.
type doubles interface {
	mixed(dst []float64, a *doublesArea, up, down *form, count int)
}

type doublesArea struct {
	gathered []float64 // rows of C†
	excited  []float64 // E_bj d
	products []float64
	half     []float64 // C† E_bj d: rows (walker, part, excitation)
	full     []float64 // E_ai d of one walker: rows (part, excitation)
	members  []int32
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

// halfMemory bounds the intermediate of a block of up strings, in numbers.
const halfMemory = 1 << 18

func (d *denseDoubles) mixed(dst []float64, a *doublesArea, up, down *form, count int) {
	s := d.s
	nUp := d.c.strings[hamiltonian.Up]
	xUp, xDown := s.spaces[0].excitations(), s.spaces[1].excitations()
	clear(dst[:count*4*xUp*xDown])
	blocks := min(nUp, max(1, (nUp*2*xDown*count+halfMemory-1)/halfMemory))
	for block := range blocks {
		from, to := block*nUp/blocks, (block+1)*nUp/blocks
		width := to - from
		a.half = trial.Grow(a.half, count*2*xDown*width)
		a.full = trial.Grow(a.full, 2*xUp*width)
		for b := range s.active {
			for j := range s.active {
				if b != j {
					d.pair(a, down, count, b, j, from, to)
				}
			}
		}
		for i := range count {
			if up.frames[i] == nil || down.frames[i] == nil {
				continue
			}
			d.excite(a.full, up, i, from, to)
			linalg.Gemm(false, true, 2*xDown, 2*xUp, width, 1, a.half[i*2*xDown*width:], width, a.full, width, 1, dst[i*4*xUp*xDown:], 2*xUp)
		}
	}
}

// pair sets the rows of a.half for E_bj, up strings from ≤ I < to.
func (d *denseDoubles) pair(a *doublesArea, down *form, count, b, j, from, to int) {
	s := d.s
	nUp, nDown, planes := d.c.strings[0], d.c.strings[1], d.c.planes
	width, x, ne := to-from, s.spaces[1].excitations(), s.spaces[1].electrons
	a.members = a.members[:0]
	for i := range count {
		if f := down.frames[i]; f != nil && f.reference>>j&1 == 1 && f.reference>>b&1 == 0 {
			a.members = append(a.members, int32(i))
		}
	}
	if len(a.members) == 0 {
		return
	}
	list := &d.moves[1][b*s.active+j]
	length := len(list.to)
	a.excited = trial.Grow(a.excited, 2*len(a.members)*length)
	for k, i := range a.members {
		for part := range 2 {
			from, to := down.strings[(2*int(i)+part)*nDown:][:nDown], a.excited[(2*k+part)*length:][:length]
			for l, sign := range list.sign {
				to[l] = sign * from[list.from[l]]
			}
		}
	}
	a.gathered = trial.Grow(a.gathered, length*planes*width)
	for l, row := range list.to {
		for plane := range planes {
			copy(a.gathered[(l*planes+plane)*width:][:width], d.c.rows[(plane*nDown+int(row))*nUp+from:])
		}
	}
	a.products = trial.Grow(a.products, 2*len(a.members)*planes*width)
	linalg.Gemm(false, false, 2*len(a.members), planes*width, length, 1, a.excited, length, a.gathered, planes*width, 0, a.products, planes*width)
	for k, i := range a.members {
		f := down.frames[i]
		at := (f.position[b]-ne)*ne + f.position[j]
		re, im := a.half[(2*int(i)*x+at)*width:][:width], a.half[((2*int(i)+1)*x+at)*width:][:width]
		upper, lower := a.products[2*k*planes*width:][:planes*width], a.products[(2*k+1)*planes*width:][:planes*width]
		if planes == 1 {
			copy(re, upper)
			copy(im, lower)
			continue
		}
		for q := range re {
			re[q] = upper[q] - lower[width+q]
			im[q] = upper[width+q] + lower[q]
		}
	}
}

// excite writes E_ai d_up of walker i for the strings from ≤ I < to.
func (d *denseDoubles) excite(dst []float64, up *form, i, from, to int) {
	s := d.s
	n, width, x, ne := d.c.strings[0], to-from, s.spaces[0].excitations(), s.spaces[0].electrons
	f := up.frames[i]
	re, im := up.strings[2*i*n:][:n], up.strings[(2*i+1)*n:][:n]
	clear(dst[:2*x*width])
	for p, particle := range f.orbital[ne:] {
		for h, hole := range f.orbital[:ne] {
			list := &d.moves[0][particle*s.active+hole]
			first, _ := slices.BinarySearch(list.to, int32(from))
			dRe, dIm := dst[(p*ne+h)*width:][:width], dst[(x+p*ne+h)*width:][:width]
			for k := first; k < len(list.to) && int(list.to[k]) < to; k++ {
				at, source, sign := int(list.to[k])-from, list.from[k], list.sign[k]
				dRe[at], dIm[at] = sign*re[source], sign*im[source]
			}
		}
	}
}

// sparseDoubles works walker by walker: for each down string J that occurs and
// each excitation that leads to it, C† is applied to the one number; then
// 8·S_up·x_up·x_down flops in a product.
type sparseDoubles struct {
	s *Source
	c *sparse
}

func (d *sparseDoubles) mixed(dst []float64, a *doublesArea, up, down *form, count int) {
	s := d.s
	nUp := d.c.strings[hamiltonian.Up]
	xUp, xDown := s.spaces[0].excitations(), s.spaces[1].excitations()
	a.half, a.full = trial.Grow(a.half, 2*xDown*nUp), trial.Grow(a.full, 2*xUp*nUp)
	list := &d.c.lists[hamiltonian.Down]
	for i := range count {
		if up.frames[i] == nil || down.frames[i] == nil {
			continue
		}
		clear(a.half)
		s.spaces[1].excitationsOf(down, i, func(string, excitation int, v complex128) {
			re, im := a.half[excitation*nUp:][:nUp], a.half[(xDown+excitation)*nUp:][:nUp]
			from, to := list.start[string], list.start[string+1]
			values := list.re[from:to]
			for l, k := range list.index[from:to] {
				re[k] += values[l] * real(v)
				im[k] += values[l] * imag(v)
			}
			if list.im != nil {
				values := list.im[from:to]
				for l, k := range list.index[from:to] {
					re[k] -= values[l] * imag(v)
					im[k] += values[l] * real(v)
				}
			}
		})
		clear(a.full)
		s.spaces[0].excitationsOf(up, i, func(string, excitation int, v complex128) {
			a.full[excitation*nUp+string], a.full[(xUp+excitation)*nUp+string] = real(v), imag(v)
		})
		linalg.Gemm(false, true, 2*xDown, 2*xUp, nUp, 1, a.half, nUp, a.full, nUp, 0, dst[i*4*xUp*xDown:], 2*xUp)
	}
}

// excitationsOf calls f with (E_ai d)_I for every string I of walker i and every
// excitation a·ne + i that leads to it.
func (s *space) excitationsOf(form *form, i int, f func(string, excitation int, v complex128)) {
	frame := form.frames[i]
	m := form.minors[i*s.minors():][:s.minors()]
	for number, at := range frame.place {
		k := 0
		for s.offset[k+1] <= int(at) {
			k++
		}
		if k == 0 {
			continue
		}
		width, below := s.holes.count(k), s.holes.count(k-1)
		p, h := (int(at)-s.offset[k])/width, (int(at)-s.offset[k])%width
		particles, holes := &s.particles.levels[k], &s.holes.levels[k]
		for x := range k {
			row := m[s.offset[k-1]+int(particles.less[p*k+x])*below:][:below]
			sign := frame.sign[number]
			if x%2 == 1 {
				sign = -sign
			}
			for y := range k {
				v := row[holes.less[h*k+y]]
				f(number, int(particles.member[p*k+x])*s.electrons+int(holes.member[h*k+y]), complex(sign*real(v), sign*imag(v)))
				sign = -sign
			}
		}
	}
}
