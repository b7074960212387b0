package measured

import (
	"math"
	"math/cmplx"

	"leadline/trial"
)

// embed writes the walkers' columns on the measured modes to a.planes and the
// factor that goes with them to a.scale. Below a doubly occupied core the
// overlap is that of a walker of fewer electrons: combining columns so that each
// core orbital is in one column only leaves the determinant as it is, and
//
//	<core, Ψ, 0|φ> = det(core block) <Ψ|φ_act>,
//
// φ_act the active rows of the columns that are left. Columns with the largest
// element are taken first. Every walker is scaled so that its columns have
// length one: the snapshots see numbers of order one.
func (d *Direct) embed(a *direct, w trial.Walkers) {
	h := d.header
	n := d.measured()
	columns := w.Count * n
	for part := range 2 {
		a.planes[part] = trial.Grow(a.planes[part], h.Qubits*columns)
		clear(a.planes[part])
	}
	a.scale = trial.Grow(a.scale, w.Count)
	for i := range w.Count {
		scale := trial.Overlap{Phase: 1}
		at := i * n
		for spin := range 2 {
			electrons := w.Electrons(spin)
			a.column = trial.Grow(a.column, len(w.Spin(i, spin)))
			copy(a.column, w.Spin(i, spin))
			scale = scale.Times(eliminate(a.column, w.Orbitals, electrons, d.core))
			for k := d.core; k < electrons; k++ {
				col := a.column[2*w.Orbitals*k:]
				norm := 0.0
				for p := range h.Modes() / 2 {
					norm = math.Hypot(norm, math.Hypot(col[d.core+p], col[w.Orbitals+d.core+p]))
				}
				if norm == 0 {
					norm = 1
				}
				scale.Log += math.Log(norm)
				for p := range h.Modes() / 2 {
					mode := h.Mode(p, spin)
					a.planes[0][mode*columns+at] = col[d.core+p] / norm
					a.planes[1][mode*columns+at] = col[w.Orbitals+d.core+p] / norm
				}
				at++
			}
		}
		if h.Ancilla {
			a.planes[0][(h.Qubits-1)*columns+at] = 1
		}
		a.scale[i] = scale
	}
}

// eliminate combines columns (m real, then m imaginary parts each) so that core
// row c is zero in all columns after column c, and returns the determinant of
// the core block.
func eliminate(columns []float64, m, electrons, core int) trial.Overlap {
	det := trial.Overlap{Phase: 1}
	at := func(k, p int) complex128 { return complex(columns[2*m*k+p], columns[2*m*k+m+p]) }
	for c := range core {
		best := c
		for k := c + 1; k < electrons; k++ {
			if cmplx.Abs(at(k, c)) > cmplx.Abs(at(best, c)) {
				best = k
			}
		}
		pivot := at(best, c)
		det = det.Times(trial.OverlapOf(pivot))
		if pivot == 0 {
			return trial.Overlap{Log: math.Inf(-1)}
		}
		if best != c {
			det.Phase = -det.Phase
			for p := range 2 * m {
				columns[2*m*best+p], columns[2*m*c+p] = columns[2*m*c+p], columns[2*m*best+p]
			}
		}
		for k := c + 1; k < electrons; k++ {
			f := at(k, c) / pivot
			if f == 0 {
				continue
			}
			for p := range m {
				v := at(k, p) - f*at(c, p)
				columns[2*m*k+p], columns[2*m*k+m+p] = real(v), imag(v)
			}
		}
	}
	return det
}

var _ trial.Source = (*Direct)(nil)
