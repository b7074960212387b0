package exact

import (
	"math/bits"

	"leadline/hamiltonian/linalg"
	"leadline/hamiltonian/strings"
)

// unlike is the two-body part of unlike spins, Σ V_pq,rs E^up_pq E^down_rs. For
// each up string I the rows J with I = E_pq J are gathered and multiplied by the
// matrix of V over (down rs) × (up pq), which gives the amplitude of every
// down excitation rs at every down string; these are then moved.
//
// With symmetric factors only, (rs) and (sr) share a row ("channel"); channels
// that V does not use are left out, so that a lattice model costs little.
type unlike struct {
	space *Space
	// up[p*M+q] is the channel of E_pq, −1 where V vanishes.
	up             []int
	v              []float64 // up channels × down channels
	down           int       // number of down channels
	parts          int       // parts of the down strings
	steps          [][]step  // per part and down channel, part·down + channel
	positive       []int     // how many of those, the first, have sign +
	flops          float64
	largest, width int // largest number of rows gathered; largest part
}

// step moves down string from (counted from the start of its part) to string to.
type step struct{ from, to int32 }

// columnsPerPart bounds the scratch of the unlike part to the second-level cache.
const columnsPerPart = 512

func newUnlike(space *Space, two *tensor) *unlike {
	if space.Up.Electrons() == 0 || space.Down.Electrons() == 0 {
		return nil
	}
	m := space.Orbitals()
	u := &unlike{space: space, up: make([]int, m*m)}
	ordered := two.antisymmetric != nil
	type operator struct{ p, q int }
	var all []operator
	for p := range m {
		for q := range m {
			if ordered || p >= q {
				all = append(all, operator{p, q})
			}
		}
	}
	var ups, downs []operator
	for _, a := range all {
		var left, right bool
		for _, b := range all {
			left = left || two.at(a.p, a.q, b.p, b.q) != 0
			right = right || two.at(b.p, b.q, a.p, a.q) != 0
		}
		if left {
			ups = append(ups, a)
		}
		if right {
			downs = append(downs, a)
		}
	}
	if len(ups) == 0 {
		return nil
	}
	for i := range u.up {
		u.up[i] = -1
	}
	u.down = len(downs)
	u.v = make([]float64, len(ups)*len(downs))
	for i, a := range ups {
		u.up[a.p*m+a.q] = i
		if !ordered {
			u.up[a.q*m+a.p] = i
		}
		for j, b := range downs {
			u.v[i*u.down+j] = two.at(a.p, a.q, b.p, b.q)
		}
	}
	u.parts = pieces(space.Down.Len(), columnsPerPart)
	u.steps, u.positive = make([][]step, u.parts*u.down), make([]int, u.parts*u.down)
	for j, b := range downs {
		u.list(j, space.Down.Single(b.p, b.q))
		if !ordered && b.p != b.q {
			u.list(j, space.Down.Single(b.q, b.p))
		}
	}
	u.measure()
	return u
}

// list adds moves to the steps of a channel, keeping those of sign + first.
func (u *unlike) list(channel int, moves *strings.Moves) {
	next := 0
	for part := range u.parts {
		from, to := piece(u.space.Down.Len(), u.parts, part)
		end := next
		for end < moves.Len() && int(moves.From[end]) < to {
			end++
		}
		place := part*u.down + channel
		old := u.steps[place]
		positive := u.positive[place]
		steps := make([]step, 0, len(old)+end-next)
		steps = append(steps, old[:positive]...)
		for _, sign := range []float64{1, -1} {
			for k := next; k < end; k++ {
				if moves.Sign[k] == sign {
					steps = append(steps, step{moves.From[k] - int32(from), moves.To[k]})
				}
			}
			if sign > 0 {
				u.positive[place] = len(steps)
			}
		}
		u.steps[place] = append(steps, old[positive:]...)
		next = end
	}
}

// measure counts the operations in matrix products and sizes the scratch.
func (u *unlike) measure() {
	var n neighbours
	for i := range u.space.Up.Len() {
		u.find(i, &n)
		u.flops += 2 * float64(len(n.row)) * float64(u.down) * float64(u.space.Down.Len())
		u.largest = max(u.largest, len(n.row))
	}
	for part := range u.parts {
		from, to := piece(u.space.Down.Len(), u.parts, part)
		u.width = max(u.width, to-from)
	}
}

// neighbours is the list of up strings J, channels and signs with
// ⟨I|E_pq|J⟩ ≠ 0 for one I. The first is I itself where any E_pp has a channel.
type neighbours struct {
	row, channel []int
	sign         []float64
}

func (u *unlike) find(i int, out *neighbours) {
	m := u.space.Orbitals()
	mask := u.space.Up.Mask(i)
	out.row, out.channel, out.sign = out.row[:0], out.channel[:0], out.sign[:0]
	for o := mask; o != 0; o &= o - 1 {
		p := bits.TrailingZeros64(o)
		if u.up[p*m+p] >= 0 {
			out.row, out.channel, out.sign = append(out.row, i), append(out.channel, -1), append(out.sign, 1)
			break
		}
	}
	for o := mask; o != 0; o &= o - 1 {
		p := bits.TrailingZeros64(o)
		for q := range m {
			channel := u.up[p*m+q]
			if mask>>q&1 == 1 || channel < 0 {
				continue
			}
			out.row = append(out.row, u.space.Up.Index(mask^(1<<p|1<<q)))
			out.channel = append(out.channel, channel)
			out.sign = append(out.sign, strings.Sign(mask&strings.Between(p, q)))
		}
	}
}

// fill writes the rows of V that belong to the neighbours, with their signs, into
// dst, len(row) × down channels.
func (u *unlike) fill(dst []float64, i int, n *neighbours) {
	m := u.space.Orbitals()
	for k, channel := range n.channel {
		row := dst[k*u.down : (k+1)*u.down]
		if channel >= 0 {
			for j, v := range u.v[channel*u.down : (channel+1)*u.down] {
				row[j] = n.sign[k] * v
			}
			continue
		}
		clear(row)
		for o := u.space.Up.Mask(i); o != 0; o &= o - 1 {
			p := bits.TrailingZeros64(o)
			if c := u.up[p*m+p]; c >= 0 {
				for j, v := range u.v[c*u.down : (c+1)*u.down] {
					row[j] += v
				}
			}
		}
	}
}

// unlikeScratch is the workspace of one goroutine.
type unlikeScratch struct {
	neighbours
	v, in, out []float64
}

func (u *unlike) scratch() *unlikeScratch {
	return &unlikeScratch{
		v:   make([]float64, u.largest*u.down),
		in:  make([]float64, u.largest*u.width),
		out: make([]float64, u.down*u.width),
	}
}

// add adds row i of the product with the vector src to dst, of length S_down.
func (u *unlike) add(dst, src []float64, i int, s *unlikeScratch) {
	u.find(i, &s.neighbours)
	n := len(s.row)
	if n == 0 {
		return
	}
	u.fill(s.v, i, &s.neighbours)
	columns := u.space.Down.Len()
	for part := range u.parts {
		from, to := piece(columns, u.parts, part)
		width := to - from
		for k, row := range s.row {
			copy(s.in[k*width:(k+1)*width], src[row*columns+from:row*columns+to])
		}
		linalg.Gemm(true, false, u.down, width, n, 1, s.v, u.down, s.in, width, 0, s.out, width)
		for channel := range u.down {
			out := s.out[channel*width : (channel+1)*width]
			place := part*u.down + channel
			steps, positive := u.steps[place], u.positive[place]
			for _, step := range steps[:positive] {
				dst[step.to] += out[step.from]
			}
			for _, step := range steps[positive:] {
				dst[step.to] -= out[step.from]
			}
		}
	}
}

// diagonal returns Σ_{p∈I, q∈J} V_pp,qq for all J of one up string I into dst.
func diagonal(dst []float64, occupied []int, space *Space, two *tensor) {
	m := space.Orbitals()
	potential := make([]float64, m)
	for q := range potential {
		for _, p := range occupied {
			potential[q] += two.at(p, p, q, q)
		}
	}
	for j, mask := range space.Down.Masks() {
		dst[j] = 0
		for ; mask != 0; mask &= mask - 1 {
			dst[j] += potential[bits.TrailingZeros64(mask)]
		}
	}
}
