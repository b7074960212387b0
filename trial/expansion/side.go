package expansion

import (
	"math"
	"math/bits"

	"leadline/hamiltonian/linalg"
	"leadline/trial"
	"leadline/trial/expansion/internal/lanes"
)

// form is the pivoted form of one spin of the walkers of a tile: one block for
// each walker in every array or, for arrays in lanes, one block for each eight
// walkers (see package lanes).
type form struct {
	support  []float64    // S†φ: rows (walker, column, part), core+active numbers
	exchange []complex128 // S†φ of one walker while columns and rows are exchanged
	inverse  []complex128 // (φ_occ)⁻¹, columns of the walker × occupied orbitals (core, reference)
	theta    []complex128 // Θ, particles × occupied orbitals
	active   []float64    // θ, the columns of the reference: particles × holes, in lanes
	frames   []*frame     // nil where core or active rows have no full rank
	spare    []frame
	log      []float64 // ln |det φ_occ|
	phase    []complex128
	levels   []int     // size of the largest minor, for each block
	minors   []float64 // in lanes
	strings  []float64 // d, laid out as the coefficients want it
	row, col []int     // pivots, in the order of occupied orbitals
	taken    []bool    // rows, then columns
}

// side adds to a form what comes from the coefficients and the other spin.
type side struct {
	*form
	dual     []float64    // y, laid out alike
	adjoint  []float64    // y of one block in the order of the minors, in lanes
	slope    []float64    // ∂F/∂θ of one block, in lanes
	gradient []complex128 // W = ∂ ln F/∂θ, particles × holes
	planes   []float64    // left factor of a density
	product  []float64
	particle []complex128
}

// prepare computes the pivoted form of the walkers of one spin, their minors and
// the strings' values d. Flops for each walker: 4·M·N·(nc+no) for S†φ, 8·N²·(nc+no)
// for the exchange and 8·Σ_k k·C(ne,k)·C(no−ne,k) for the minors.
func (s *Source) prepare(a *form, w trial.Walkers, spin int) {
	space := s.spaces[spin]
	n, ns, np := s.sector.Electrons(spin), s.supported(), s.active-space.electrons
	count := w.Count
	s.projectOnSupport(a, w, spin)
	a.exchange = trial.Grow(a.exchange, ns*n)
	a.inverse = trial.Grow(a.inverse, count*n*n)
	a.theta = trial.Grow(a.theta, count*np*n)
	a.log, a.phase = trial.Grow(a.log, count), trial.Grow(a.phase, count)
	a.frames = trial.Grow(a.frames, count)
	for len(a.spare) < count {
		a.spare = append(a.spare, frame{})
	}
	x, blocks := space.excitations(), blocks(count)
	a.active = trial.Grow(a.active, blocks*x*lanes.Size)
	a.levels = trial.Grow(a.levels, blocks)
	clear(a.active)
	clear(a.levels)
	for i := range count {
		reference, ok := s.pivot(a, i, spin)
		if !ok {
			a.frames[i] = nil
			continue
		}
		f := space.frame(reference, &a.spare[i])
		a.frames[i] = f
		a.levels[i/lanes.Width] = max(a.levels[i/lanes.Width], f.levels)
		s.arrange(a, i, spin, f)
	}
	a.minors = trial.Grow(a.minors, blocks*space.minors()*lanes.Size)
	for b := range blocks {
		space.computeMinors(a.blockMinors(space, b), numbers(a.active, b*x, x), a.levels[b])
	}
	v := s.layout(spin)
	a.strings = trial.Grow(a.strings, v.size(count))
	for i := range blocks * lanes.Width {
		if i >= count && !v.lanes {
			break
		}
		at, step, part := v.walker(i)
		if i >= count || a.frames[i] == nil {
			for range space.masks {
				a.strings[at], a.strings[at+part] = 0, 0
				at += step
			}
			continue
		}
		m := a.blockMinors(space, i/lanes.Width)[i%lanes.Width:]
		f := a.frames[i]
		for k, place := range f.place {
			sign, from := f.sign[k], int(place)*lanes.Size
			a.strings[at], a.strings[at+part] = sign*m[from], sign*m[from+lanes.Width]
			at += step
		}
	}
}

// blocks returns the number of blocks of eight walkers.
func blocks(count int) int { return (count + lanes.Width - 1) / lanes.Width }

// blockMinors returns the minors of one block.
func (a *form) blockMinors(s *space, block int) []float64 {
	return numbers(a.minors, block*s.minors(), s.minors())
}

// layout says how a batch of vectors over the strings of one spin is laid out:
// rows 2i and 2i+1 for real and imaginary part of walker i, or in lanes.
type layout struct {
	lanes bool
	n     int // strings
}

func (s *Source) layout(spin int) layout {
	_, lanes := s.c.(*sparse)
	return layout{lanes: lanes, n: len(s.spaces[spin].masks)}
}

// size returns the length of a batch.
func (v layout) size(count int) int {
	if v.lanes {
		return blocks(count) * v.n * lanes.Size
	}
	return 2 * count * v.n
}

// walker returns where the first string of walker i is, the distance to the next
// string and that to the imaginary part.
func (v layout) walker(i int) (at, step, part int) {
	if v.lanes {
		return i/lanes.Width*v.n*lanes.Size + i%lanes.Width, lanes.Size, lanes.Width
	}
	return 2 * i * v.n, 1, v.n
}

// inner returns Σ_I d_I y_I of walker i.
func (v layout) inner(d, y []float64, i int) complex128 {
	at, step, part := v.walker(i)
	var re, im float64
	for range v.n {
		dRe, dIm, yRe, yIm := d[at], d[at+part], y[at], y[at+part]
		re += dRe*yRe - dIm*yIm
		im += dRe*yIm + dIm*yRe
		at += step
	}
	return complex(re, im)
}

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

// weigh turns the dual vectors y of a tile into W = ∂ ln F/∂θ and sets total to
// F = Σ_I d_I y_I; a zero or unusable F leaves W zero.
func (s *Source) weigh(a *side, total []complex128, count, spin int) {
	space := s.spaces[spin]
	x := space.excitations()
	a.slope = trial.Grow(a.slope, x*lanes.Size)
	a.gradient = trial.Grow(a.gradient, count*x)
	var sums [lanes.Size]float64
	for b := range blocks(count) {
		m, levels := a.blockMinors(space, b), a.levels[b]
		s.adjoin(a, b, count, spin)
		space.innerProduct(sums[:], a.adjoint, m, levels)
		space.gradient(a.slope, a.adjoint, m, numbers(a.active, b*x, x), levels)
		for i := b * lanes.Width; i < min(count, (b+1)*lanes.Width); i++ {
			w, lane := a.gradient[i*x:][:x], i%lanes.Width
			total[i] = complex(sums[lane], sums[lanes.Width+lane])
			if a.frames[i] == nil {
				total[i] = 0
			}
			if total[i] == 0 || total[i] != total[i] {
				clear(w)
				continue
			}
			inverse := 1 / total[i]
			for k := range w {
				w[k] = inverse * complex(a.slope[k*lanes.Size+lane], a.slope[k*lanes.Size+lanes.Width+lane])
			}
		}
	}
}

// adjoin writes the dual vectors of a block in the order of the minors.
func (s *Source) adjoin(a *side, block, count, spin int) {
	space := s.spaces[spin]
	a.adjoint = trial.Grow(a.adjoint, space.minors()*lanes.Size)
	clear(a.adjoint[:space.offset[a.levels[block]+1]*lanes.Size])
	v := s.layout(spin)
	for i := block * lanes.Width; i < min(count, (block+1)*lanes.Width); i++ {
		f := a.frames[i]
		if f == nil {
			continue
		}
		g := a.adjoint[i%lanes.Width:]
		at, step, part := v.walker(i)
		for k, place := range f.place {
			sign, to := f.sign[k], int(place)*lanes.Size
			g[to], g[to+lanes.Width] = sign*a.dual[at], sign*a.dual[at+part]
			at += step
		}
	}
}

// leftFactor sets a.planes to G′ with D = G′ φᵀ, (core+active)×N, real then
// imaginary part:
//
//	G′_a = Σ_i W_ai (φ_occ)⁻¹_·i,   G′_o = (φ_occ)⁻¹_·o − Σ_a Θ_ao G′_a
func (s *Source) leftFactor(a *side, i, spin int) {
	n, ns, ne := s.sector.Electrons(spin), s.supported(), s.spaces[spin].electrons
	np := s.active - ne
	f := a.frames[i]
	a.planes = trial.Grow(a.planes, 2*ns*n)
	re, im := a.planes[:ns*n], a.planes[ns*n:]
	inverse, theta := a.inverse[i*n*n:][:n*n], a.theta[i*np*n:][:np*n]
	w := a.gradient[i*np*ne:][:np*ne]
	a.particle = trial.Grow(a.particle, np*n) // G′ of the particles
	row := a.particle
	for p := range np {
		for k := range n {
			var sum complex128
			for j, v := range w[p*ne : p*ne+ne] {
				sum += v * inverse[k*n+s.core+j]
			}
			row[p*n+k] = sum
			at := (s.core+f.orbital[ne+p])*n + k
			re[at], im[at] = real(sum), imag(sum)
		}
	}
	for o := range n {
		orbital := o
		if o >= s.core {
			orbital = s.core + f.orbital[o-s.core]
		}
		for k := range n {
			sum := inverse[k*n+o]
			for p := range np {
				sum -= theta[p*n+o] * row[p*n+k]
			}
			re[orbital*n+k], im[orbital*n+k] = real(sum), imag(sum)
		}
	}
}

// density writes D = G′ φᵀ of walker i, rows of M.
func (s *Source) density(a *side, w trial.Walkers, i, spin int, re, im []float64) {
	n, ns, m := s.sector.Electrons(spin), s.supported(), s.sector.Orbitals
	a.product = trial.Grow(a.product, 4*ns*m)
	linalg.Gemm(false, false, 2*ns, 2*m, n, 1, a.planes, n, w.Spin(i, spin), 2*m, 0, a.product, 2*m)
	combine(re, im, a.product, ns, m)
}

// combine turns the product [Re; Im]·[Re | Im], 2r×2c, into complex planes, r×c.
func combine(re, im, product []float64, rows, columns int) {
	for r := range rows {
		upper, lower := product[2*columns*r:][:2*columns], product[2*columns*(rows+r):][:2*columns]
		dRe, dIm := re[r*columns:][:columns], im[r*columns:][:columns]
		for q := range dRe {
			dRe[q] = upper[q] - lower[columns+q]
			dIm[q] = upper[columns+q] + lower[q]
		}
	}
}
