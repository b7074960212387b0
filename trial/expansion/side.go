package expansion

import (
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
