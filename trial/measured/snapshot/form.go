// Package snapshot holds the common shape of a measured snapshot in a
// stabilizer basis, global Clifford or matching of Majorana operators alike:
// a quadratic form over F2. The estimated amplitude of determinant D in the
// row of determinant r is
//
//	i^{Σ_i a_i y_i + 2 Σ_{i<j} B_ij y_i y_j} · (−1)^{t·y} · w(y),  y = Y·(D⊕r),
//
// wherever the syndrome of D⊕r vanishes, and zero elsewhere. Y, the syndrome, a
// and B belong to the setting, the signs t and the weight w to the outcome. For
// Clifford bases w is a constant; for matchings it depends on y only through
// the number of chosen edges on each cycle.
//
// The forms are those of Aaronson and Gottesman, Phys. Rev. A 70, 052328 (2004)
// and Dehaene and De Moor, Phys. Rev. A 68, 042318 (2003) (both from memory);
// the reduction of a matching to the same shape is derived in package matchgate.
package snapshot

import "math/bits"

// MaxModes is the largest number of modes: masks are 64-bit words.
const MaxModes = 64

// Form is the part of a snapshot that a setting fixes. Everything but the phase
// is linear in the determinant, so it is stored by mode: what the occupation of
// mode p contributes to y, to B·y (diagonal included) and to the syndrome, and
// the phase of p alone, a power of i.
type Form struct {
	Modes        int
	Bits         int // of y
	SyndromeBits int

	Y, Cross, Syndrome [MaxModes]uint64
	Phase              [MaxModes]uint8
}

// Value is a form evaluated at a determinant, or at the part of it that one
// string of electrons contributes.
type Value struct {
	Y, Cross, Syndrome uint64
	// Phase is the power of i, to be taken modulo 4.
	Phase uint32
}

// At evaluates the form at a mask.
func (f *Form) At(mask uint64) Value {
	var v Value
	for ; mask != 0; mask &= mask - 1 {
		p := bits.TrailingZeros64(mask) & (MaxModes - 1)
		y := f.Y[p]
		v.Phase += uint32(f.Phase[p]) + 2*uint32(bits.OnesCount64(v.Cross&y))
		v.Y ^= y
		v.Cross ^= f.Cross[p]
		v.Syndrome ^= f.Syndrome[p]
	}
	return v
}

// Join is the value at the symmetric difference of the masks of v and w:
// phase(y⊕y') = phase(y) + phase(y') + 2 y·B·y' (mod 4), also where y and y'
// overlap, because B carries the parities of a on its diagonal.
func (v Value) Join(w Value) Value {
	return Value{v.Y ^ w.Y, v.Cross ^ w.Cross, v.Syndrome ^ w.Syndrome,
		v.Phase + w.Phase + 2*uint32(bits.OnesCount64(v.Cross&w.Y))}
}

// Power returns i^p.
func Power(p uint32) complex128 {
	switch p & 3 {
	case 0:
		return 1
	case 1:
		return 1i
	case 2:
		return -1
	}
	return -1i
}
