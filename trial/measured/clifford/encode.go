package clifford

import "math/bits"

// Encoder is the inverse of Decode for one basis.
type Encoder struct {
	basis   *Basis
	columns [64]uint64
}

// Encoder returns the map from (t, u) to outcomes. It keeps a pointer to c.
func (c *Basis) Encoder() (e Encoder) {
	e.basis = c
	var rows [64]uint64
	copy(rows[:], c.tRow[:c.K])
	at := c.K
	for j := range c.N {
		if c.Pivots>>j&1 == 0 {
			rows[at] = c.uRow[j]
			at++
		}
	}
	if !invert(c.N, rows[:c.N], &e.columns) {
		panic("clifford: outcomes of the basis are not distinct")
	}
	return e
}

// Bits returns the outcome that names the state (t, u).
func (e *Encoder) Bits(t, u uint64) (b uint64) {
	c := e.basis
	for rest := t ^ c.t0; rest != 0; rest &= rest - 1 {
		b ^= e.columns[bits.TrailingZeros64(rest)]
	}
	for rest := u ^ c.u0; rest != 0; rest &= rest - 1 {
		// The place of a non-pivot column among the non-pivots.
		j := bits.TrailingZeros64(rest)
		b ^= e.columns[c.K+bits.OnesCount64(^c.Pivots&(1<<j-1))]
	}
	return b
}

// Generators returns x and z of n independent Paulis i^{|x∧z|} X^x Z^z whose
// eigenvectors are the states of the basis.
func (c *Basis) Generators() (x, z []uint64) {
	for i := range c.K {
		var zi uint64
		for j := range c.K {
			zi |= c.B[i] >> j & 1 << c.Pivot[j]
		}
		x, z = append(x, c.R[i]), append(z, zi)
	}
	for j := range c.N {
		if c.Pivots>>j&1 != 0 {
			continue
		}
		w := uint64(1) << j
		for i := range c.K {
			w |= c.R[i] >> j & 1 << c.Pivot[i]
		}
		x, z = append(x, 0), append(z, w)
	}
	return x, z
}
