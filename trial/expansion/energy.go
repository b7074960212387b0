package expansion

import (
	"leadline/hamiltonian"
	"leadline/hamiltonian/linalg"
	"leadline/trial"
	"leadline/trial/expansion/internal/lanes"
)

// Energies implements [trial.EnergySource] by the formulas of the package
// comment. Where the expansion is over all orbitals and H|Ψ_T⟩ fits in memory it
// is computed once; else the exchange table is made where it fits in what is
// left, and replaced by products factor by factor where not.
func (s *Source) Energies(h *hamiltonian.Hamiltonian, r *trial.Rotated, memory int64) trial.Energies {
	if image := s.newImage(h, memory); image != nil {
		return image
	}
	return s.newCumulant(h, r, memory)
}

// newCumulant prepares the general form.
func (s *Source) newCumulant(h *hamiltonian.Hamiltonian, r *trial.Rotated, memory int64) *energies {
	e := &energies{
		s:       s,
		h:       h,
		spins:   2,
		scratch: trial.Scratch[energyArea]{New: func() *energyArea { return new(energyArea) }},
	}
	if h.SpinFree() && s.sector.Up > 0 && s.sector.Down > 0 {
		e.spins = 1
	}
	size := int64(s.supported() * s.sector.Orbitals)
	need := 8 * size * size * int64(e.spins)
	for spin := range e.spins {
		if s.sector.Electrons(spin) == 0 {
			continue
		}
		e.oneBody[spin] = s.rotateOneBody(h, spin)
		e.factors[spin] = newFactors(s, h, r, spin)
		if need <= memory {
			e.exchange[spin] = newSupermatrix(s, h, r, spin)
		} else {
			e.exchange[spin] = e.factors[spin]
		}
	}
	if e.spins == 1 {
		e.oneBody[1], e.factors[1], e.exchange[1] = e.oneBody[0], e.factors[0], e.exchange[0]
	}
	e.doubles = s.newDoubles()
	return e
}

type energies struct {
	s        *Source
	h        *hamiltonian.Hamiltonian
	spins    int          // 1 when both spins have the same tables
	oneBody  [2][]float64 // S†h
	factors  [2]*factors
	exchange [2]exchanger
	doubles  doubles
	scratch  trial.Scratch[energyArea]
}

// energyArea is the scratch of one call.
type energyArea struct {
	area
	sum      []complex128
	density  []float64
	products []float64
	columns  []float64    // Θ of the active holes of one block: rows (walker, hole, part) of M
	left     []float64    // λ
	dressed  [2][]float64 // B of one block: rows (walker, part, particle, hole) of ng
	signed   []float64
	square   []float64 // product of two B
	v        []complex128
	second   [2][]float64 // second derivatives of F of one block, in lanes
	mixed    []complex128 // D^ud of all walkers, times F
	doubles  doublesArea
}

func (s *Source) rotateOneBody(h *hamiltonian.Hamiltonian, spin int) []float64 {
	m, ns := s.sector.Orbitals, s.supported()
	one := make([]float64, m*m)
	for p := range m {
		for q := range m {
			one[p*m+q] = h.OneBody[spin].At(p, q)
		}
	}
	out := make([]float64, ns*m)
	c := s.support.Re[spin].RawMatrix()
	linalg.Gemm(true, false, ns, m, m, 1, c.Data, c.Stride, one, m, 0, out, m)
	return out
}

// LocalEnergies implements [trial.Energies].
func (e *energies) LocalEnergies(m *trial.Mixed, w trial.Walkers) {
	a := e.scratch.Get()
	defer e.scratch.Put(a)
	e.direct(m, w.Count)
	e.exchangeAll(m, a, w)
	for from := 0; from < w.Count; from += e.s.tile {
		to := min(w.Count, from+e.s.tile)
		e.correlate(m.Energy[from:to], a, w.Slice(from, to))
	}
	for i := range w.Count {
		if m.Overlap[i].Zero() {
			m.Energy[i] = complex(e.h.Constant, 0)
		}
	}
}

// direct sets the part of the energy that needs nothing but density and fields:
// E_c + h̃·D + ½ Σ_g s_g ⟨v_g⟩².
func (e *energies) direct(m *trial.Mixed, count int) {
	s := e.s
	size := s.supported() * s.sector.Orbitals
	length := (s.support.Columns(0) + s.support.Columns(1)) * s.sector.Orbitals
	ng := e.h.Factors.Count()
	for i := range count {
		var re, im float64
		block := 0
		for spin := range 2 {
			if s.sector.Electrons(spin) == 0 {
				continue
			}
			dRe, dIm := m.Density[2*i*length+block:][:size], m.Density[(2*i+1)*length+block:][:size]
			for k, v := range e.oneBody[spin] {
				re += v * dRe[k]
				im += v * dIm[k]
			}
			block += size
		}
		fRe, fIm := m.Fields[2*i*ng:(2*i+1)*ng], m.Fields[(2*i+1)*ng:(2*i+2)*ng]
		for g, sign := range e.h.Factors.Sign {
			re += 0.5 * sign * (fRe[g]*fRe[g] - fIm[g]*fIm[g])
			im += sign * fRe[g] * fIm[g]
		}
		m.Energy[i] = complex(e.h.Constant+re, im)
	}
}

// exchangeAll subtracts ½ Σ_σ X_σ.
func (e *energies) exchangeAll(m *trial.Mixed, a *energyArea, w trial.Walkers) {
	s := e.s
	size := s.supported() * s.sector.Orbitals
	length := (s.support.Columns(0) + s.support.Columns(1)) * s.sector.Orbitals
	a.sum = trial.Grow(a.sum, w.Count)
	block := 0
	for spin := range 2 {
		if s.sector.Electrons(spin) == 0 {
			continue
		}
		if block == 0 || e.spins == 2 || !w.Paired || !s.symmetric {
			e.exchange[spin].exchange(a.sum, a, m.Density, length, block, w.Count)
		}
		for i := range w.Count {
			m.Energy[i] -= 0.5 * a.sum[i]
		}
		block += size
	}
}

// correlate adds the cumulant's part to the energies of one tile.
func (e *energies) correlate(energy []complex128, a *energyArea, w trial.Walkers) {
	s := e.s
	up, down := s.evaluate(&a.area, w, true)
	s.weighAll(&a.area, up, down, w.Count)
	sides := [2]*side{up, down}
	x := [2]int{s.spaces[0].excitations(), s.spaces[1].excitations()}
	shared := up.form == down.form && e.spins == 1
	if x[0] > 0 && x[1] > 0 {
		a.mixed = trial.Grow(a.mixed, w.Count*x[0]*x[1])
		e.doubles.mixed(a.mixed, &a.doubles, up.form, down.form, w.Count)
	}
	for b := range blocks(w.Count) {
		from, to := b*lanes.Width, min(w.Count, (b+1)*lanes.Width)
		for spin, one := range sides {
			if spin == hamiltonian.Up || down != up {
				s.curve(a, one, b, w.Count, spin)
			}
			if x[spin] > 0 && !(spin == hamiltonian.Down && shared) {
				a.dressed[spin] = e.factors[spin].dress(a.dressed[spin], a, one.form, w, from, to, spin)
			}
		}
		for i := from; i < to; i++ {
			if up.frames[i] != nil && down.frames[i] != nil && a.total[0][i] != 0 {
				energy[i] += 0.5 * e.cumulant(a, up, down, i, x, shared)
			}
		}
	}
}

// curve sets the second derivatives of F of one spin for a block of walkers.
func (s *Source) curve(a *energyArea, one *side, block, count, spin int) {
	space := s.spaces[spin]
	n, np := space.electrons, space.active-space.electrons
	a.second[spin] = trial.Grow(a.second[spin], n*(n-1)/2*np*(np-1)/2*lanes.Size)
	s.adjoin(one, block, count, spin)
	space.secondDerivatives(a.second[spin], one.adjoint, one.blockMinors(space, block), one.levels[block])
}

// cumulant returns the sum over all pairs of spins for walker i.
func (e *energies) cumulant(a *energyArea, up, down *side, i int, x [2]int, shared bool) complex128 {
	var sum, first complex128
	if shared && x[0] > 0 {
		e.square(a, i, hamiltonian.Up, hamiltonian.Up, x)
	}
	for spin, one := range [2]*side{up, down} {
		if x[spin] == 0 {
			continue
		}
		if spin == hamiltonian.Down && down == up {
			sum += first
			continue
		}
		if !shared {
			e.square(a, i, spin, spin, x)
		}
		first = e.like(a, one, i, spin)
		sum += first
	}
	if x[0] > 0 && x[1] > 0 {
		if !shared {
			e.square(a, i, hamiltonian.Down, hamiltonian.Up, x)
		}
		sum += 2 * e.unlike(a, up, down, i, x)
	}
	return sum
}

// square sets a.v to V_ai,bj = Σ_g s_g B^σ_g,ai B^σ'_g,bj of walker i: 8·ng flops
// for each element.
func (e *energies) square(a *energyArea, i, spin, other int, x [2]int) {
	ng := e.h.Factors.Count()
	rows, columns := x[spin], x[other]
	lane := i % lanes.Width
	left, right := a.dressed[spin][2*lane*rows*ng:][:2*rows*ng], a.dressed[other][2*lane*columns*ng:][:2*columns*ng]
	a.square = trial.Grow(a.square, 4*rows*columns)
	a.v = trial.Grow(a.v, rows*columns)
	if ng == 0 {
		clear(a.v)
		return
	}
	linalg.Gemm(false, true, 2*rows, 2*columns, ng, 1, e.sign(a, left), ng, right, ng, 0, a.square, 2*columns)
	combineComplex(a.v, a.square, rows, columns)
}

// sign returns rows of ng numbers times the factors' signs.
func (e *energies) sign(a *energyArea, rows []float64) []float64 {
	negative := false
	for _, s := range e.h.Factors.Sign {
		negative = negative || s < 0
	}
	if !negative {
		return rows
	}
	a.signed = trial.Grow(a.signed, len(rows))
	ng := e.h.Factors.Count()
	for k, s := range e.h.Factors.Sign {
		for at := k; at < len(rows); at += ng {
			a.signed[at] = s * rows[at]
		}
	}
	return a.signed
}

// combineComplex turns the product [Re; Im]·[Re | Im], 2r×2c, into complex numbers.
func combineComplex(dst []complex128, product []float64, rows, columns int) {
	for r := range rows {
		upper, lower := product[2*columns*r:][:2*columns], product[2*columns*(rows+r):][:2*columns]
		for q := range columns {
			dst[r*columns+q] = complex(upper[q]-lower[columns+q], upper[columns+q]+lower[q])
		}
	}
}

// like returns Σ V_ai,bj (D_ai,bj − W_ai W_bj + W_aj W_bi) of one spin, with V in
// a.v.
func (e *energies) like(a *energyArea, one *side, i, spin int) complex128 {
	space := e.s.spaces[spin]
	n, x := space.electrons, space.excitations()
	np := space.active - n
	w, v := one.gradient[i*x:][:x], a.v[:x*x]
	var sum complex128
	for p := range np {
		wp := w[p*n:][:n]
		for k, wk := range wp {
			row := v[(p*n+k)*x:][:x]
			for b := range np {
				wb, vb := w[b*n:][:n], row[b*n:][:n]
				var direct, exchange complex128
				for j, vv := range vb {
					direct += vv * wb[j]
					exchange += vv * wp[j]
				}
				sum += wb[k]*exchange - wk*direct
			}
		}
	}
	second, pairs, lane := a.second[spin], n*(n-1)/2, i%lanes.Width
	var doubles complex128
	for b := range np {
		for p := range b {
			for j := range n {
				for k := range j {
					at := (pairNumber(p, b)*pairs+pairNumber(k, j))*lanes.Size + lane
					doubles += complex(second[at], second[at+lanes.Width]) * (v[(p*n+k)*x+b*n+j] - v[(p*n+j)*x+b*n+k])
				}
			}
		}
	}
	return sum + 2*doubles/a.total[spin][i]
}

// unlike returns Σ V_ai,bj (D_ai,bj − W_ai W_bj) for up and down, with V, down ×
// up, in a.v.
func (e *energies) unlike(a *energyArea, up, down *side, i int, x [2]int) complex128 {
	inverse := 1 / a.total[0][i]
	v := a.v[:x[0]*x[1]]
	mixed := a.mixed[i*x[0]*x[1]:][:x[0]*x[1]]
	wUp, wDown := up.gradient[i*x[0]:][:x[0]], down.gradient[i*x[1]:][:x[1]]
	var sum complex128
	for p, w := range wDown {
		d := mixed[p*x[0]:][:x[0]]
		for q, vv := range v[p*x[0]:][:x[0]] {
			sum += vv * (d[q]*inverse - w*wUp[q])
		}
	}
	return sum
}
