package matchgate

// Weights returns the table 2^{-n} W(e) over the numbers e_c of chosen edges,
//
//	W(e) = Σ_k g_k [z^k] Π_c (z^{e_c} + p_c z^{m_c−e_c}),
//
// 0 ≤ e_c < m_c, the last cycle running fastest, where g_k = 1/λ_k and bit c of
// p tells that p_c = −1. It appends to dst; scratch is reused and returned
// grown. The cycles are taken one at a time: multiplying by one factor and
// dropping the degrees above those left is a sum of two shifted vectors, so the
// whole table costs a few operations per entry.
func (m *Matching) Weights(dst, g []float64, p uint64, scratch []float64) (table, grown []float64) {
	n := m.N
	need := n + 1
	entries, left := 1, n
	for _, size := range m.Cycles {
		entries *= size
		left -= size
		need = max(need, entries*(left+1))
	}
	if cap(scratch) < 2*need {
		scratch = make([]float64, 2*need)
	}
	scratch = scratch[:2*need]
	from, to := scratch[:need], scratch[need:]
	scale := 1.0
	for range n {
		scale /= 2
	}
	for k, v := range g {
		from[k] = scale * v
	}
	entries, left = 1, n
	for c, size := range m.Cycles {
		rest := left - size
		out := 0
		for v := range entries {
			vector := from[v*(left+1) : (v+1)*(left+1)]
			for e := range size {
				low := vector[e : e+rest+1]
				high := vector[size-e : size-e+rest+1]
				row := to[out : out+rest+1]
				if p>>c&1 == 0 {
					for k := range row {
						row[k] = low[k] + high[k]
					}
				} else {
					for k := range row {
						row[k] = low[k] - high[k]
					}
				}
				out += rest + 1
			}
		}
		entries *= size
		left = rest
		from, to = to, from
	}
	return append(dst, from[:entries]...), scratch
}

// Polynomial fills dst, n+1 numbers, with the coefficients of
// 2^n <0|G_z|0> = Π_c (1 + p_c z^{m_c}).
func (m *Matching) Polynomial(dst []float64, p uint64) {
	clear(dst)
	dst[0] = 1
	for c, size := range m.Cycles {
		sign := 1 - 2*float64(p>>c&1)
		for k := m.N; k >= size; k-- {
			dst[k] += sign * dst[k-size]
		}
	}
}

// Entries returns the length of the table of weights.
func (m *Matching) Entries() int {
	entries := 1
	for _, size := range m.Cycles {
		entries *= size
	}
	return entries
}

// Index maps y to its place in the table of weights by adding one number for
// each group of Width bits of y.
type Index struct {
	Width  int
	Groups int
	// Add holds Groups tables of 2^Width numbers.
	Add []uint32
}

// maxWidth bounds the tables of an Index to 16 kB each.
const maxWidth = 12

// Index fills in the map for the matching, reusing the storage of x.
func (m *Matching) Index(x *Index) {
	x.Groups = max(2, (m.Bits+maxWidth-1)/maxWidth)
	x.Width = max(1, (m.Bits+x.Groups-1)/x.Groups)
	size := 1 << x.Width
	if cap(x.Add) < x.Groups*size {
		x.Add = make([]uint32, x.Groups*size)
	}
	x.Add = x.Add[:x.Groups*size]
	var stride [64]uint32
	bit, s := m.Bits, uint32(1)
	for c := len(m.Cycles) - 1; c >= 0; c-- {
		for range m.Cycles[c] - 1 {
			bit--
			stride[bit] = s
		}
		s *= uint32(m.Cycles[c])
	}
	for group := range x.Groups {
		table := x.Add[group*size : (group+1)*size]
		table[0] = 0
		for b := range x.Width {
			var step uint32
			if at := group*x.Width + b; at < m.Bits {
				step = stride[at]
			}
			for i, v := range table[:1<<b] {
				table[1<<b+i] = v + step
			}
		}
	}
}

// At returns the place of y in the table.
func (x *Index) At(y uint64) int {
	var sum uint32
	for group := range x.Groups {
		sum += x.Add[group<<x.Width|int(y&(1<<x.Width-1))]
		y >>= x.Width
	}
	return int(sum)
}
