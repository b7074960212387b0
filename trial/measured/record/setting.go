package record

// Outcome is one bit string seen in a setting and how often.
type Outcome struct {
	// Bits are the bits as read from the device: bit j belongs to qubit j.
	// Any relabelling by GL and X of the setting is not undone yet.
	Bits  uint64
	Count uint32
}

// Setting is one measurement basis and its outcomes. Which fields are filled
// depends on the ensemble in the header; the others are empty. A Reader reuses
// the slices: what is to be kept must be copied (Clone).
type Setting struct {
	ID uint32

	// Pairs, of a matching: 2n Majorana indices; qubit j reads the pair
	// (Pairs[2j], Pairs[2j+1]) = (a, b), bit 0 meaning −i g_a g_b = +1.
	Pairs []uint8

	// R and B, of an affine quadratic form: k rows of a reduced echelon matrix
	// over n columns, and the symmetric k×k phase matrix.
	R, B []uint64
	// GL holds the n columns of an invertible matrix, and X a mask: the device
	// prints GL·b ⊕ X. GL is empty and X is 0 where the record has none.
	GL []uint64
	X  uint64

	// TX, TZ and TSign, of a tableau: row j is
	// U†Z_jU = (−1)^{TSign_j} i^{|x_j∧z_j|} X^{x_j} Z^{z_j}.
	TX, TZ []uint64
	TSign  uint64

	// Q, of an orthogonal rotation: 2n×2n numbers, row-major.
	Q []float64

	Shots []Outcome
}

// Count returns the number of shots of the setting.
func (s *Setting) Count() int64 {
	var n int64
	for _, o := range s.Shots {
		n += int64(o.Count)
	}
	return n
}

// Clone returns a copy that shares nothing with s.
func (s *Setting) Clone() *Setting {
	c := new(Setting)
	c.CopyFrom(s)
	return c
}

// CopyFrom makes s a copy of o that shares nothing with it, reusing the
// storage of s.
func (s *Setting) CopyFrom(o *Setting) {
	s.ID, s.X, s.TSign = o.ID, o.X, o.TSign
	s.Pairs = append(s.Pairs[:0], o.Pairs...)
	s.R = append(s.R[:0], o.R...)
	s.B = append(s.B[:0], o.B...)
	s.GL = append(s.GL[:0], o.GL...)
	s.TX = append(s.TX[:0], o.TX...)
	s.TZ = append(s.TZ[:0], o.TZ...)
	s.Q = append(s.Q[:0], o.Q...)
	s.Shots = append(s.Shots[:0], o.Shots...)
}

// reset empties s, keeping its storage.
func (s *Setting) reset() {
	s.ID, s.X, s.TSign = 0, 0, 0
	s.Pairs, s.R, s.B, s.GL = s.Pairs[:0], s.R[:0], s.B[:0], s.GL[:0]
	s.TX, s.TZ, s.Q, s.Shots = s.TX[:0], s.TZ[:0], s.Q[:0], s.Shots[:0]
}
