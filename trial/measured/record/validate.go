package record

import (
	"cmp"
	"math"
	"math/bits"
	"slices"
)

// orthogonality is the largest error of QQᵀ that the format allows.
const orthogonality = 1e-8

// Validate refuses a setting that is not a measurement basis of the header's
// ensemble, or has no valid outcome. A Reader and a Writer have called it
// already.
func (s *Setting) Validate(h *Header) error {
	if e := s.validate(h); e != nil {
		return e
	}
	return nil
}

// validate checks what both forms of the file have in common.
func (s *Setting) validate(h *Header) *Error {
	n := h.Qubits
	var e *Error
	switch h.Ensemble {
	case Matching:
		e = validatePairs(s.Pairs, n)
	case Lagrangian:
		e = s.validateForm(n)
	case Tableau:
		e = s.validateTableau(n)
	case Orthogonal:
		e = validateOrthogonal(s.Q, 2*n)
	}
	if e != nil {
		return e
	}
	if len(s.Shots) == 0 {
		return refusef(CodeCount, "setting %d has no outcome, expected at least one", s.ID)
	}
	for _, o := range s.Shots {
		if o.Bits&^lowBits(n) != 0 {
			return refusef(CodeBits, "outcome %#x has bits beyond qubit %d", o.Bits, n-1)
		}
		if o.Count == 0 {
			return refusef(CodeCount, "count is 0, expected at least 1")
		}
	}
	if repeated(s.Shots) {
		return refusef(CodeDuplicate, "setting %d lists an outcome twice", s.ID)
	}
	return nil
}

// repeated reports whether two outcomes have the same bits.
func repeated(shots []Outcome) bool {
	ascending := true
	for i := 1; i < len(shots); i++ {
		if shots[i].Bits <= shots[i-1].Bits {
			ascending = false
			break
		}
	}
	if ascending {
		return false
	}
	words := make([]uint64, len(shots))
	for i, o := range shots {
		words[i] = o.Bits
	}
	slices.Sort(words)
	for i := 1; i < len(words); i++ {
		if words[i] == words[i-1] {
			return true
		}
	}
	return false
}

// sortShots puts outcomes in ascending order of their words.
func sortShots(shots []Outcome) {
	slices.SortFunc(shots, func(a, b Outcome) int { return cmp.Compare(a.Bits, b.Bits) })
}

func validatePairs(pairs []uint8, n int) *Error {
	if len(pairs) != 2*n {
		return refusef(CodeLength, "setting has %d Majorana indices, expected %d", len(pairs), 2*n)
	}
	var seen [2]uint64
	for _, a := range pairs {
		if int(a) >= 2*n {
			return refusef(CodePairing, "Majorana index %d, expected 0 to %d", a, 2*n-1)
		}
		if seen[a>>6]>>(a&63)&1 != 0 {
			return refusef(CodePairing, "Majorana %d appears twice in pairs, expected every one of 0 to %d once", a, 2*n-1)
		}
		seen[a>>6] |= 1 << (a & 63)
	}
	return nil
}

func (s *Setting) validateForm(n int) *Error {
	k := len(s.R)
	if k > n {
		return refusef(CodeLength, "R has %d rows, expected at most %d", k, n)
	}
	if len(s.B) != k {
		return refusef(CodeLength, "B has %d rows, expected %d as R", len(s.B), k)
	}
	if len(s.GL) != 0 && len(s.GL) != n {
		return refusef(CodeLength, "gl has %d columns, expected %d", len(s.GL), n)
	}
	var pivots uint64
	reduced := true
	for i, row := range s.R {
		if row&^lowBits(n) != 0 || s.B[i]&^lowBits(k) != 0 {
			return refusef(CodeBits, "row %d of R or B has bits beyond its columns", i)
		}
		pivots |= row & -row
	}
	for i, row := range s.R {
		// Within the pivots a row of a reduced matrix has its own bit only.
		if row&pivots != row&-row || row == 0 {
			reduced = false
		}
		for j := range i {
			if s.B[i]>>j&1 != s.B[j]>>i&1 {
				return refusef(CodeSymmetric, "B[%d][%d] is %d but B[%d][%d] is %d", i, j, s.B[i]>>j&1, j, i, s.B[j]>>i&1)
			}
		}
	}
	if !reduced || bits.OnesCount64(pivots) != k {
		if r := rank(s.R); r != k {
			return refusef(CodeRank, "R has %d rows of rank %d, expected independent rows", k, r)
		}
		return refusef(CodeRREF, "R is not in reduced echelon form: the lowest bit of a row must be set in no other row")
	}
	if len(s.GL) == 0 {
		if s.X&^lowBits(n) != 0 {
			return refusef(CodeBits, "x has bits beyond qubit %d", n-1)
		}
		return nil
	}
	for _, c := range s.GL {
		if c&^lowBits(n) != 0 {
			return refusef(CodeBits, "gl has bits beyond row %d", n-1)
		}
	}
	if s.X&^lowBits(n) != 0 {
		return refusef(CodeBits, "x has bits beyond qubit %d", n-1)
	}
	if r := rank(s.GL); r != n {
		return refusef(CodeRank, "gl has rank %d, expected an invertible matrix of rank %d", r, n)
	}
	return nil
}

// rank is the rank over F2 of rows of up to 64 bits.
func rank(rows []uint64) int {
	var echelon [64]uint64 // by lowest set bit
	r := 0
	for _, row := range rows {
		for row != 0 {
			p := bits.TrailingZeros64(row)
			if echelon[p] == 0 {
				echelon[p] = row
				r++
				break
			}
			row ^= echelon[p]
		}
	}
	return r
}

func (s *Setting) validateTableau(n int) *Error {
	if len(s.TX) != n || len(s.TZ) != n {
		return refusef(CodeLength, "tableau has %d x rows and %d z rows, expected %d", len(s.TX), len(s.TZ), n)
	}
	all := s.TSign
	for j := range n {
		all |= s.TX[j] | s.TZ[j]
	}
	if all&^lowBits(n) != 0 {
		return refusef(CodeBits, "tableau has bits beyond qubit %d", n-1)
	}
	for i := range n {
		xi, zi := s.TX[i], s.TZ[i]
		for j := range i {
			if bits.OnesCount64(xi&s.TZ[j]^zi&s.TX[j])&1 != 0 {
				return refusef(CodeCommute, "generators %d and %d anticommute", j, i)
			}
		}
	}
	// Rank of the 2n-bit rows: first by x, what is left by z.
	var byX, zOf, byZ [64]uint64
	for j := range n {
		x, z := s.TX[j], s.TZ[j]
		for x != 0 {
			p := bits.TrailingZeros64(x)
			if byX[p] == 0 {
				byX[p], zOf[p] = x, z
				break
			}
			x ^= byX[p]
			z ^= zOf[p]
		}
		if x != 0 {
			continue
		}
		for z != 0 {
			p := bits.TrailingZeros64(z)
			if byZ[p] == 0 {
				byZ[p] = z
				break
			}
			z ^= byZ[p]
		}
		if z == 0 {
			return refusef(CodeRank, "generator %d is a product of those before it, expected %d independent ones", j, n)
		}
	}
	return nil
}

func validateOrthogonal(q []float64, n int) *Error {
	if len(q) != n*n {
		return refusef(CodeLength, "Q has %d numbers, expected %d", len(q), n*n)
	}
	for _, v := range q {
		if math.IsNaN(v) || math.IsInf(v, 0) {
			return refusef(CodeNumber, "Q holds %v, expected finite numbers", v)
		}
	}
	for i := range n {
		ri := q[i*n : (i+1)*n]
		for j := 0; j <= i; j++ {
			rj := q[j*n : (j+1)*n]
			dot := 0.0
			for c, v := range ri {
				dot += v * rj[c]
			}
			want := 0.0
			if i == j {
				want = 1
			}
			if !(math.Abs(dot-want) <= orthogonality) {
				return refusef(CodeOrthogonal, "rows %d and %d of Q have the product %.12g, expected %g within %g", j, i, dot, want, orthogonality)
			}
		}
	}
	return nil
}
