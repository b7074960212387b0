package matchgate

import (
	"math/bits"

	"leadline/trial/measured/snapshot"
)

// Matching is the cycle structure of a perfect matching of the 2n Majoranas.
// Modes are vertices with two half-edges, the Majoranas 2p and 2p+1, so the
// pairs join them into disjoint cycles. The edges of a cycle but the last, which
// closes it, carry the bits of y: edge i between v_i and v_{i+1} is chosen for a
// determinant if v_0..v_i hold an odd number of electrons. A determinant with an
// odd number on any cycle has no overlap with the snapshot (the syndrome).
type Matching struct {
	N int
	// Cycles holds the number of modes of each, in the order of y, ascending.
	Cycles []int
	// Bits is the number of bits of y, n less the number of cycles.
	Bits int

	mode  [64]uint8    // modes along the cycles, one cycle after the other
	phase [64]uint8    // a_e of path edge e, all outcomes +1
	b     [64]uint64   // B_{ee'}, diagonal included
	sign  [64]edgeSign // of path edge e
	cycle [64]cycleSign
}

// edgeSign is the sign s_e of a path edge: bit qubit of the outcome, flip if
// the pair is written (b, a) with a < b; odd tells which reference
// determinants turn it round.
type edgeSign struct {
	qubit uint8
	flip  uint8
	ends  uint64 // modes whose even Majorana is an end of the edge
}

// cycleSign is p_c, the product of the outcomes on the cycle and a constant.
type cycleSign struct {
	qubits uint64
	flip   uint8
	ends   uint64
	modes  uint64
}

// pauli is i^phase X^x Z^z.
type pauli struct {
	phase uint8
	x, z  uint64
}

// majorana is g_a under Jordan–Wigner.
func majorana(a uint8) pauli {
	bit := uint64(1) << (a / 2)
	if a&1 == 0 {
		return pauli{0, bit, bit - 1}
	}
	return pauli{1, bit, bit - 1 | bit}
}

// pairOperator returns −i g_a g_b acting on bras: <m|(−i g_a g_b) =
// i^phase (−1)^{z·m} <m⊕x|.
func pairOperator(a, b uint8) pauli {
	g, h := majorana(a), majorana(b)
	q := g.phase + h.phase + 2*uint8(bits.OnesCount64(g.z&h.x)) + 3
	return pauli{-q & 3, g.x ^ h.x, g.z ^ h.z}
}

// Set makes m the structure of the pairs (pairs[2j], pairs[2j+1]), read by
// qubit j. The caller has checked that they use every Majorana once.
func (m *Matching) Set(n int, pairs []uint8) {
	m.N, m.Bits, m.Cycles = n, 0, m.Cycles[:0]
	var partner, reader [128]uint8
	for j := range n {
		a, b := pairs[2*j], pairs[2*j+1]
		partner[a], partner[b] = b, a
		reader[a], reader[b] = uint8(j), uint8(j)
	}
	// Cycles by length: the table of weights then grows at its last level.
	var start [64]uint8
	var seen uint64
	for p := range uint8(n) {
		if seen>>p&1 != 0 {
			continue
		}
		size := 0
		for h := 2*p + 1; seen>>(h/2)&1 == 0; h = partner[h] ^ 1 {
			seen |= 1 << (h / 2)
			size++
		}
		at := len(m.Cycles)
		m.Cycles = append(m.Cycles, 0)
		for ; at > 0 && m.Cycles[at-1] > size; at-- {
			m.Cycles[at], start[at] = m.Cycles[at-1], start[at-1]
		}
		m.Cycles[at], start[at] = size, p
	}
	var x, z [64]uint64
	place := 0
	for c, size := range m.Cycles {
		cs := cycleSign{}
		phase, at := uint8(0), uint64(0)
		h := 2*start[c] + 1
		for i := range size {
			v := h / 2
			m.mode[place] = v
			place++
			cs.modes |= 1 << v
			q := partner[h]
			a, b := min(h, q), max(h, q)
			op := pairOperator(a, b)
			j := reader[h]
			e := edgeSign{qubit: j}
			if pairs[2*j] != a {
				e.flip = 1
			}
			if a&1 == 0 {
				e.ends ^= 1 << (a / 2)
			}
			if b&1 == 0 {
				e.ends ^= 1 << (b / 2)
			}
			phase += op.phase + 2*uint8(bits.OnesCount64(op.z&at))
			at ^= op.x
			cs.qubits |= 1 << j
			cs.flip ^= e.flip
			cs.ends ^= e.ends
			if i < size-1 {
				m.sign[m.Bits], m.phase[m.Bits] = e, op.phase
				x[m.Bits], z[m.Bits] = op.x, op.z
				m.Bits++
			}
			h = q ^ 1
		}
		cs.flip ^= phase >> 1 & 1
		m.cycle[c] = cs
	}
	for e := range m.Bits {
		m.b[e] = uint64(m.phase[e]&1) << e
		for f := range e {
			bit := uint64(bits.OnesCount64(x[e]&z[f]) & 1)
			m.b[e] |= bit << f
			m.b[f] |= bit << e
		}
	}
}

// Form fills in the quadratic form of the matching.
func (m *Matching) Form(f *snapshot.Form) {
	f.Modes, f.Bits, f.SyndromeBits = m.N, m.Bits, len(m.Cycles)
	place, bit := m.N, m.Bits
	for c := len(m.Cycles) - 1; c >= 0; c-- {
		// From the end of the cycle: mode v_j turns the prefixes j, j+1, ….
		var y, cross uint64
		var phase uint32
		for i := range m.Cycles[c] {
			place--
			if i > 0 {
				bit--
				phase += uint32(m.phase[bit]) + 2*uint32(cross>>bit&1)
				y |= 1 << bit
				cross ^= m.b[bit]
			}
			v := m.mode[place]
			f.Y[v], f.Cross[v], f.Phase[v], f.Syndrome[v] = y, cross, uint8(phase&3), 1<<c
		}
	}
}

// Signs decodes an outcome for the row of determinant r: bit e of t is set if
// path edge e came out −1, bit c of p if p_c = −1.
func (m *Matching) Signs(outcome, r uint64) (t, p uint64) {
	for e := range m.Bits {
		s := &m.sign[e]
		t |= (outcome>>s.qubit ^ uint64(s.flip) ^ uint64(bits.OnesCount64(s.ends&r))) & 1 << e
	}
	for c := range m.Cycles {
		s := &m.cycle[c]
		p |= uint64((bits.OnesCount64(s.qubits&outcome)+bits.OnesCount64(s.ends&r)+int(s.flip))&1) << c
	}
	return t, p
}

// RowSign is the sign that relates <r|M^{-1}(G)|D> to the form at D⊕r: the even
// Majoranas of r, ascending, act one after another on D. It reports whether
// that sign is −1.
func RowSign(det, r uint64) bool {
	sign := 0
	for rest := r; rest != 0; rest &= rest - 1 {
		p := bits.TrailingZeros64(rest)
		sign += bits.OnesCount64(det & (1<<p - 1))
		det ^= 1 << p
	}
	return sign&1 != 0
}
