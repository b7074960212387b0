package expansion

import (
	"math"
	"math/bits"

	"leadline/trial"
	"leadline/trial/expansion/internal/lanes"
)

// projectOnSupport sets a.support.
func (s *Source) projectOnSupport(a *form, w trial.Walkers, spin int) {
	n, ns, m := s.sector.Electrons(spin), s.supported(), s.sector.Orbitals
	a.support = trial.Grow(a.support, w.Count*2*n*ns)
	if s.columns == nil {
		for i := range w.Count {
			columns := w.Spin(i, spin)
			for r := range 2 * n {
				copy(a.support[(i*2*n+r)*ns:][:ns], columns[r*m:])
			}
		}
		return
	}
	if w.Columns() == n {
		s.columns.Mul(w.Count*2*n, 1, w.Data, m, 0, a.support, ns)
		return
	}
	for i := range w.Count {
		s.columns.Mul(2*n, 1, w.Spin(i, spin), m, 0, a.support[i*2*n*ns:], ns)
	}
}

// largestTheta is the largest element of θ, |re|+|im|, that is accepted of the
// preferred reference. It bounds the loss of digits; what it buys is that most
// walkers of a tile have one reference.
const largestTheta = 16

// pivot exchanges every column of S†φ with a row: those of the core and of the
// preferred reference or, where that would be unstable, of the core and then of
// the active rows that have the largest elements left. The exchanged rows then
// hold (φ_occ)⁻¹, the others φ (φ_occ)⁻¹. It sets log and phase of det φ_occ, rows
// ascending, and returns the active rows taken as a string; ok is false where the
// rows' rank is too small or a number is not finite (then log is NaN).
func (s *Source) pivot(a *form, i, spin int) (reference uint64, ok bool) {
	if s.pivotWith(a, i, spin, s.preferred[spin]) && s.thetaSize(a, spin) <= largestTheta {
		return s.preferred[spin], true
	}
	if !s.pivotWith(a, i, spin, 0) {
		return 0, false
	}
	for _, row := range a.row[s.core:s.sector.Electrons(spin)] {
		reference |= 1 << (row - s.core)
	}
	return reference, true
}

// thetaSize returns the largest |re|+|im| of the active rows not exchanged.
func (s *Source) thetaSize(a *form, spin int) float64 {
	n := s.sector.Electrons(spin)
	var most float64
	for r := s.core; r < s.supported(); r++ {
		if a.taken[r] {
			continue
		}
		for _, col := range a.col[s.core:n] {
			v := a.exchange[r*n+col]
			most = max(most, math.Abs(real(v))+math.Abs(imag(v)))
		}
	}
	return most
}

// pivotWith is pivot for a given reference, or with complete pivoting for none,
// first in the core's rows, then in the active ones.
func (s *Source) pivotWith(a *form, i, spin int, reference uint64) bool {
	n, ns := s.sector.Electrons(spin), s.supported()
	x := a.exchange[:ns*n]
	for j := range n {
		re, im := a.support[(i*n+j)*2*ns:][:ns], a.support[((i*n+j)*2+1)*ns:][:ns]
		for r := range ns {
			x[r*n+j] = complex(re[r], im[r])
		}
	}
	a.row, a.col = trial.Grow(a.row, n), trial.Grow(a.col, n)
	a.taken = trial.Grow(a.taken, ns+n)
	clear(a.taken)
	rows, columns := a.taken[:ns], a.taken[ns:]
	magnitude, phase := 1.0, complex128(1)
	a.log[i] = 0
	for step := range n {
		from, to := 0, s.core
		switch {
		case step >= s.core && reference != 0:
			from = s.core + bits.TrailingZeros64(reference)
			to = from + 1
			reference &= reference - 1
		case step >= s.core:
			from, to = s.core, ns
		case reference != 0:
			from, to = step, step+1
		}
		row, col, size := largest(x, n, from, to, rows, columns)
		if size == 0 {
			a.log[i], a.phase[i] = math.Inf(-1), 0
			return false
		}
		d := x[row*n+col]
		absolute := math.Sqrt(real(d)*real(d) + imag(d)*imag(d))
		if !(absolute > tiny && absolute < 1/tiny) { // or NaN
			absolute = math.Hypot(real(d), imag(d))
			if math.IsNaN(absolute) || math.IsInf(absolute, 0) {
				a.log[i], a.phase[i] = math.NaN(), 0
				return false
			}
		}
		if next := magnitude * absolute; next > tiny && next < 1/tiny {
			magnitude = next
		} else {
			a.log[i] += math.Log(magnitude) + math.Log(absolute)
			magnitude = 1
		}
		phase *= complex(real(d)/absolute, imag(d)/absolute)
		exchange(x, ns, n, row, col)
		rows[row], columns[col] = true, true
		a.row[step], a.col[step] = row, col
	}
	// Sorting the rows gives the order of occupied orbitals; the sign is that of
	// the permutation from it to the columns.
	for k := 1; k < n; k++ {
		for l := k; l > 0 && a.row[l-1] > a.row[l]; l-- {
			a.row[l-1], a.row[l] = a.row[l], a.row[l-1]
			a.col[l-1], a.col[l] = a.col[l], a.col[l-1]
		}
	}
	for k := range n {
		for l := range k {
			if a.col[l] > a.col[k] {
				phase = -phase
			}
		}
	}
	a.log[i] += math.Log(magnitude)
	a.phase[i] = phase
	return true
}

// tiny bounds products whose logarithm is put off.
const tiny = 1e-140

// largest finds the element of largest |re|+|im| among rows from ≤ r < to and
// columns not yet taken; the first NaN wins.
func largest(x []complex128, n, from, to int, rows, columns []bool) (row, col int, size float64) {
	for r := from; r < to; r++ {
		if rows[r] {
			continue
		}
		for c, v := range x[r*n : r*n+n] {
			if columns[c] {
				continue
			}
			a := math.Abs(real(v)) + math.Abs(imag(v))
			if a > size {
				row, col, size = r, c, a
			} else if a != a {
				return r, c, a
			}
		}
	}
	return row, col, size
}

// exchange swaps the roles of one row and one column in y = x·z:
//
//	x_rc → 1/x_rc,  x_rj → −x_rj/x_rc,  x_ic → x_ic/x_rc,  x_ij → x_ij − x_ic x_rj/x_rc
func exchange(x []complex128, rows, n, r, c int) {
	pivot := x[r*n : r*n+n]
	inverse := 1 / pivot[c]
	for j := range pivot {
		pivot[j] *= -inverse
	}
	pivot[c] = inverse
	for i := range rows {
		if i == r {
			continue
		}
		row := x[i*n : i*n+n]
		f := row[c]
		if f == 0 {
			continue
		}
		row[c] = 0
		for j, v := range pivot {
			row[j] += f * v
		}
	}
}

// arrange copies the exchanged matrix of walker i into a.inverse, a.theta and
// a.active, orbitals in the order core, reference ascending.
func (s *Source) arrange(a *form, i, spin int, f *frame) {
	n, ne := s.sector.Electrons(spin), s.spaces[spin].electrons
	np := s.active - ne
	x := a.exchange
	inverse := a.inverse[i*n*n:][:n*n]
	for k, row := range a.row[:n] {
		from, to := x[row*n:row*n+n], inverse[a.col[k]*n:][:n]
		for o, col := range a.col[:n] {
			to[o] = from[col]
		}
	}
	theta := a.theta[i*np*n:][:np*n]
	first := i/lanes.Width*np*ne*lanes.Size + i%lanes.Width
	for p, orbital := range f.orbital[ne:] {
		from, to := x[(s.core+orbital)*n:][:n], theta[p*n:][:n]
		for o, col := range a.col[:n] {
			to[o] = from[col]
		}
		for h, v := range to[s.core:] {
			at := first + (p*ne+h)*lanes.Size
			a.active[at], a.active[at+lanes.Width] = real(v), imag(v)
		}
	}
}
