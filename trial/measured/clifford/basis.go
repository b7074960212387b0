// Package clifford turns the measurement bases of the full Clifford group into
// the canonical form of a stabilizer basis, samples them uniformly, and gives
// channel and variances of the ensemble.
//
// A stabilizer basis of n qubits is a k-dimensional subspace with reduced rows
// R_i (pivot: the lowest set bit), a symmetric k×k matrix B of bits, and the
// states, one for every t in F2^k and every u off the pivots,
//
//	|s_{t,u}> = 2^{-k/2} Σ_y i^{Σ_i B_ii y_i} (−1)^{Σ_{i<j} B_ij y_i y_j + t·y} |u ⊕ yR>.
//
// The estimators are those of Huang, Kueng and Preskill, Nature Physics 16,
// 1050 (2020), applied to |0><Ψ| as in Huggins et al., Nature 603, 416 (2022).
package clifford

import (
	"fmt"
	"math/bits"

	"leadline/trial/measured/record"
	"leadline/trial/measured/snapshot"
)

// Basis is a stabilizer basis and the way its outcomes are printed.
type Basis struct {
	N, K int
	// Pivots is the mask of the pivot columns; Pivot[i] that of row i.
	Pivots uint64
	Pivot  [64]uint8
	R, B   [64]uint64

	// Bit i of t is the parity of tRow[i]∧b, plus t0; bit c of u, a non-pivot
	// column, the parity of uRow[c]∧b, plus u0.
	tRow, uRow [64]uint64
	t0, u0     uint64
}

// FromSetting makes the basis of a lagrangian or tableau setting, which the
// reader of records has validated.
func (c *Basis) FromSetting(h *record.Header, s *record.Setting) error {
	if h.Ensemble == record.Lagrangian {
		return c.Lagrangian(h.Qubits, s.R, s.B, s.GL, s.X)
	}
	return c.Tableau(h.Qubits, s.TX, s.TZ, s.TSign)
}

// Lagrangian makes the basis of reduced rows r and phases b over n qubits. The
// device prints gl·b ⊕ x, gl given by columns; nil means b ⊕ x.
func (c *Basis) Lagrangian(n int, r, b, gl []uint64, x uint64) error {
	*c = Basis{N: n, K: len(r)}
	for i, row := range r {
		c.R[i], c.B[i] = row, b[i]
		c.Pivot[i] = uint8(bits.TrailingZeros64(row))
		c.Pivots |= row & -row
	}
	var inverse [64]uint64 // rows
	for j := range n {
		inverse[j] = 1 << j
	}
	if len(gl) > 0 && !invert(n, gl, &inverse) {
		return fmt.Errorf("matrix gl of the setting is singular")
	}
	decoded := func(j uint8) (row uint64, constant uint64) {
		return inverse[j], uint64(bits.OnesCount64(inverse[j]&x) & 1)
	}
	for i := range c.K {
		row, constant := decoded(c.Pivot[i])
		c.tRow[i] = row
		c.t0 |= constant << i
	}
	for j := range n {
		if c.Pivots>>j&1 == 0 {
			row, constant := decoded(uint8(j))
			c.uRow[j] = row
			c.u0 |= constant << j
		}
	}
	return nil
}

// invert inverts the matrix over F2 with the given columns; the rows of the
// inverse go to dst.
func invert(n int, columns []uint64, dst *[64]uint64) bool {
	var left [64]uint64 // rows of the matrix
	for j, col := range columns {
		for ; col != 0; col &= col - 1 {
			left[bits.TrailingZeros64(col)] |= 1 << j
		}
	}
	for i := range n {
		dst[i] = 1 << i
	}
	for j := range n {
		p := j
		for p < n && left[p]>>j&1 == 0 {
			p++
		}
		if p == n {
			return false
		}
		left[p], left[j] = left[j], left[p]
		dst[p], dst[j] = dst[j], dst[p]
		for i := range n {
			if i != j && left[i]>>j&1 != 0 {
				left[i] ^= left[j]
				dst[i] ^= dst[j]
			}
		}
	}
	return true
}

// generator is the hermitian Pauli i^phase X^x Z^z; its sign turns round with
// the parity of sign∧b.
type generator struct {
	x, z, sign uint64
	phase      int
}

// times multiplies from the right: (p1,x1,z1)(p2,x2,z2) =
// (p1+p2+2|z1∧x2|, x1⊕x2, z1⊕z2).
func (g *generator) times(h *generator) {
	g.phase = (g.phase + h.phase + 2*bits.OnesCount64(g.z&h.x)) & 3
	g.x ^= h.x
	g.z ^= h.z
	g.sign ^= h.sign
}

// Tableau makes the basis of the n generators (−1)^{r_j} i^{|x_j∧z_j|} X^{x_j}
// Z^{z_j}, which commute and are independent; bit j of an outcome is the sign
// of generator j.
func (c *Basis) Tableau(n int, x, z []uint64, r uint64) error {
	*c = Basis{N: n}
	var g [64]generator
	for j := range n {
		g[j] = generator{x[j], z[j], 1 << j, (bits.OnesCount64(x[j]&z[j]) + 2*int(r>>j&1)) & 3}
	}
	// Gauss–Jordan on x: the first K generators carry R.
	for col := range n {
		p := c.K
		for p < n && g[p].x>>col&1 == 0 {
			p++
		}
		if p == n {
			continue
		}
		g[p], g[c.K] = g[c.K], g[p]
		for i := range n {
			if i != c.K && g[i].x>>col&1 != 0 {
				g[i].times(&g[c.K])
			}
		}
		c.Pivot[c.K] = uint8(col)
		c.Pivots |= 1 << col
		c.K++
	}
	// The others are ±Z^z. Each is diagonal on one non-pivot column, whose bit
	// of u is its sign.
	next := c.K
	for col := range n {
		if c.Pivots>>col&1 != 0 {
			continue
		}
		p := next
		for p < n && g[p].z>>col&1 == 0 {
			p++
		}
		if p == n {
			return fmt.Errorf("generators of the setting are dependent or do not commute")
		}
		g[p], g[next] = g[next], g[p]
		for i := c.K; i < n; i++ {
			if i != next && g[i].z>>col&1 != 0 {
				g[i].times(&g[next])
			}
		}
		next++
	}
	for i := c.K; i < n; i++ {
		col := bits.TrailingZeros64(g[i].z &^ c.Pivots)
		c.uRow[col] = g[i].sign
		c.u0 |= uint64(g[i].phase>>1&1) << col
	}
	for i := range c.K {
		c.R[i] = g[i].x
		for j := range c.K {
			if j != i {
				c.B[i] |= uint64(bits.OnesCount64(g[i].z&g[j].x)&1) << j
			}
		}
		c.B[i] |= uint64(g[i].phase&1) << i
		// t_i is the second bit of phase_i + 2|z_i∧u|.
		c.tRow[i] = g[i].sign
		constant := g[i].phase >> 1 & 1
		for zu := g[i].z &^ c.Pivots; zu != 0; zu &= zu - 1 {
			col := bits.TrailingZeros64(zu)
			c.tRow[i] ^= c.uRow[col]
			constant ^= int(c.u0 >> col & 1)
		}
		c.t0 |= uint64(constant) << i
	}
	return nil
}

// Decode returns the state that the outcome b, as printed by the device, names.
func (c *Basis) Decode(b uint64) (t, u uint64) {
	t, u = c.t0, c.u0
	for i := range c.K {
		t ^= uint64(bits.OnesCount64(c.tRow[i]&b)&1) << i
	}
	if c.K < c.N {
		for j := range c.N {
			u ^= uint64(bits.OnesCount64(c.uRow[j]&b)&1) << j
		}
	}
	return t, u
}

// Coordinates splits a determinant into y and the u of its coset.
func (c *Basis) Coordinates(det uint64) (y, u uint64) {
	u = det
	for i := range c.K {
		bit := det >> c.Pivot[i] & 1
		y |= bit << i
		u ^= c.R[i] & -bit
	}
	return y, u
}

// cross is B·y.
func (c *Basis) cross(y uint64) uint64 {
	var r uint64
	for ; y != 0; y &= y - 1 {
		r ^= c.B[bits.TrailingZeros64(y)]
	}
	return r
}

// Phase returns the power of i in the amplitude of y, for t = 0.
func (c *Basis) Phase(y uint64) uint32 {
	var phase uint32
	var done uint64
	for rest := y; rest != 0; rest &= rest - 1 {
		i := bits.TrailingZeros64(rest)
		phase += uint32(c.B[i]>>i&1) + 2*uint32(bits.OnesCount64(c.B[i]&done))
		done |= 1 << i
	}
	return phase & 3
}

// Form fills in the quadratic form of the basis for a row of any determinant.
func (c *Basis) Form(f *snapshot.Form) {
	f.Modes, f.Bits, f.SyndromeBits = c.N, c.K, 0
	for p := range c.N {
		if c.Pivots>>p&1 == 0 {
			f.Y[p], f.Cross[p], f.Phase[p] = 0, 0, 0
			f.Syndrome[p] = 1 << f.SyndromeBits
			f.SyndromeBits++
		}
	}
	for i := range c.K {
		p := c.Pivot[i]
		f.Y[p], f.Cross[p], f.Phase[p] = 1<<i, c.B[i], uint8(c.B[i]>>i&1)
		f.Syndrome[p] = 0
		for rest := c.R[i] &^ c.Pivots; rest != 0; rest &= rest - 1 {
			f.Syndrome[p] ^= f.Syndrome[bits.TrailingZeros64(rest)]
		}
	}
}

// Row prepares the form for the row of determinant r: the coset that an outcome
// must name for its snapshot to reach r, and the signs to add to its t.
func (c *Basis) Row(r uint64) (u, sign uint64) {
	y, u := c.Coordinates(r)
	return u, c.cross(y)
}
