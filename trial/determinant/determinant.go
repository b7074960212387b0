// Package determinant is the trial source of one Slater determinant, real or
// complex: |Ψ_T⟩ = Π_j (Σ_p C_pj c†_p)|0⟩, up before down.
//
//	S = C†φ (N×N),  O = det S_up · det S_down,  D = (Sᵀ)⁻¹ φᵀ (N×M)
//
// For the local energy see [Determinant.Energies]. Source of the formulas: Motta
// & Zhang, WIREs Comput. Mol. Sci. 8, e1364 (2018).
package determinant

import (
	"fmt"
	"math"

	"gonum.org/v1/gonum/mat"

	"leadline/hamiltonian"
	"leadline/hamiltonian/linalg"
	"leadline/trial"
)

// Determinant is the source. It implements [trial.EnergySource] and
// [trial.Expectations].
type Determinant struct {
	sector     hamiltonian.Sector
	orbitals   trial.Orbitals
	restricted bool              // both spins have the same columns
	columns    [2]*linalg.Packed // C, M×N, or [Re C | Im C], M×2N
	scratch    trial.Scratch[area]
}

// area is the scratch of one call.
type area struct {
	products []float64 // φᵀC
	matrices []float64 // Sᵀ of every walker, then its inverse
	density  []float64 // products for D
	log      []float64
	phase    []complex128
}

// New returns the determinant of the given columns, M×N for each spin, which
// must be orthonormal to 1e-6 and are copied. A spin without electrons has nil
// columns.
func New(m int, orbitals trial.Orbitals) (*Determinant, error) {
	d := &Determinant{
		sector: hamiltonian.Sector{
			Orbitals: m,
			Up:       orbitals.Columns(hamiltonian.Up),
			Down:     orbitals.Columns(hamiltonian.Down),
		},
		scratch: trial.Scratch[area]{New: func() *area { return new(area) }},
	}
	if err := d.sector.Validate(); err != nil {
		return nil, err
	}
	complexOrbitals := !orbitals.Real()
	for spin := range 2 {
		n := d.sector.Electrons(spin)
		if n == 0 {
			continue
		}
		if rows, _ := orbitals.Re[spin].Dims(); rows != m {
			return nil, fmt.Errorf("trial orbitals have %d rows, expected %d", rows, m)
		}
		d.orbitals.Re[spin] = mat.DenseCopyOf(orbitals.Re[spin])
		if complexOrbitals {
			d.orbitals.Im[spin] = mat.NewDense(m, n, nil)
			if im := orbitals.Im[spin]; im != nil {
				d.orbitals.Im[spin].Copy(im)
			}
		}
		if err := d.checkOrthonormal(spin); err != nil {
			return nil, err
		}
		d.columns[spin] = packColumns(d.orbitals, spin)
	}
	d.restricted = d.orbitals.Equal()
	return d, nil
}

func (d *Determinant) checkOrthonormal(spin int) error {
	n := d.sector.Electrons(spin)
	for i := range n {
		for j := range n {
			var s complex128
			for p := range d.sector.Orbitals {
				a, b := d.orbitals.At(spin, p, i), d.orbitals.At(spin, p, j)
				s += complex(real(a), -imag(a)) * b
			}
			want := 0.0
			if i == j {
				want = 1
			}
			if dev := math.Hypot(real(s)-want, imag(s)); !(dev < 1e-6) {
				return fmt.Errorf("%s trial orbitals %d and %d have overlap %.6g, expected %g to 1e-6", [2]string{"up", "down"}[spin], i+1, j+1, s, want)
			}
		}
	}
	return nil
}

func packColumns(o trial.Orbitals, spin int) *linalg.Packed {
	re := o.Re[spin].RawMatrix()
	m, n := re.Rows, re.Cols
	if o.Im[spin] == nil {
		return linalg.Pack(false, m, n, re.Data, re.Stride)
	}
	im := o.Im[spin].RawMatrix()
	both := make([]float64, m*2*n)
	for p := range m {
		copy(both[2*n*p:], re.Data[p*re.Stride:p*re.Stride+n])
		copy(both[2*n*p+n:], im.Data[p*im.Stride:p*im.Stride+n])
	}
	return linalg.Pack(false, m, 2*n, both, 2*n)
}

// Sector implements [trial.Source].
func (d *Determinant) Sector() hamiltonian.Sector { return d.sector }

// Orbitals returns the columns; they must not be changed.
func (d *Determinant) Orbitals() trial.Orbitals { return d.orbitals }

// Support implements [trial.DensitySource]: the occupied orbitals.
func (d *Determinant) Support() trial.Support { return d.orbitals }

// Overlaps implements [trial.Source]. Flops for each walker and spin: 4·M·N²
// and the factorisation's 8/3·N³.
func (d *Determinant) Overlaps(dst []trial.Overlap, w trial.Walkers) {
	a := d.scratch.Get()
	defer d.scratch.Put(a)
	for i := range dst[:w.Count] {
		dst[i] = trial.Overlap{Phase: 1}
	}
	for spin := range 2 {
		n := d.sector.Electrons(spin)
		if n == 0 {
			continue
		}
		if spin == hamiltonian.Up || !(w.Paired && d.restricted) {
			d.overlapMatrices(a, w, spin)
			linalg.LogDetBatch(n, w.Count, a.matrices, a.log, a.phase)
		}
		a.multiply(dst[:w.Count])
	}
}

// Densities implements [trial.DensitySource]. Flops for each walker and spin:
// 4·M·N² for S, 8·N³ for its inverse, 8·M·N² for D.
func (d *Determinant) Densities(dst []trial.Overlap, density []float64, w trial.Walkers) {
	a := d.scratch.Get()
	defer d.scratch.Put(a)
	m := d.sector.Orbitals
	length := (d.sector.Up + d.sector.Down) * m
	for i := range dst[:w.Count] {
		dst[i] = trial.Overlap{Phase: 1}
	}
	for spin := range 2 {
		n := d.sector.Electrons(spin)
		if n == 0 {
			continue
		}
		block := spin * d.sector.Up * m
		if spin == hamiltonian.Down && w.Paired && d.restricted {
			for row := range 2 * w.Count {
				all := density[row*length : (row+1)*length]
				copy(all[block:], all[:block])
			}
			a.multiply(dst[:w.Count])
			continue
		}
		d.overlapMatrices(a, w, spin)
		linalg.InvertBatch(n, w.Count, a.matrices, a.log, a.phase)
		a.multiply(dst[:w.Count])
		a.density = trial.Grow(a.density, 4*n*m)
		for i := range w.Count {
			// [Re G; Im G]·[Re φᵀ | Im φᵀ], 2N×2M
			linalg.Gemm(false, false, 2*n, 2*m, n, 1, a.matrices[2*n*n*i:], n, w.Spin(i, spin), 2*m, 0, a.density, 2*m)
			re := density[2*i*length+block:][:n*m]
			im := density[(2*i+1)*length+block:][:n*m]
			for j := range n {
				upper, lower := a.density[2*m*j:2*m*(j+1)], a.density[2*m*(n+j):2*m*(n+j+1)]
				dRe, dIm := re[j*m:(j+1)*m], im[j*m:(j+1)*m]
				for q := range dRe {
					dRe[q] = upper[q] - lower[m+q]
					dIm[q] = upper[m+q] + lower[q]
				}
			}
		}
	}
}

// multiply multiplies dst by the determinants in the area.
func (a *area) multiply(dst []trial.Overlap) {
	for i := range dst {
		dst[i] = dst[i].Times(trial.Overlap{Log: a.log[i], Phase: a.phase[i]})
	}
}

// overlapMatrices fills a.matrices with Sᵀ = φᵀC* of every walker: N·N real
// parts, then N·N imaginary parts.
func (d *Determinant) overlapMatrices(a *area, w trial.Walkers, spin int) {
	m, n := d.sector.Orbitals, d.sector.Electrons(spin)
	width := n
	if d.orbitals.Im[spin] != nil {
		width = 2 * n
	}
	a.products = trial.Grow(a.products, w.Count*2*n*width)
	a.matrices = trial.Grow(a.matrices, w.Count*2*n*n)
	a.log, a.phase = trial.Grow(a.log, w.Count), trial.Grow(a.phase, w.Count)
	if w.Columns() == n {
		d.columns[spin].Mul(w.Count*2*n, 1, w.Data, m, 0, a.products, width)
	} else {
		for i := range w.Count {
			d.columns[spin].Mul(2*n, 1, w.Spin(i, spin), m, 0, a.products[i*2*n*width:], width)
		}
	}
	for i := range w.Count {
		re := a.matrices[2*n*n*i : 2*n*n*i+n*n]
		im := a.matrices[2*n*n*i+n*n : 2*n*n*(i+1)]
		for j := range n {
			rowRe := a.products[(2*n*i+2*j)*width:][:width]
			rowIm := a.products[(2*n*i+2*j+1)*width:][:width]
			if width == n {
				copy(re[j*n:], rowRe)
				copy(im[j*n:], rowIm)
				continue
			}
			for k := range n {
				re[j*n+k] = rowRe[k] + rowIm[n+k]
				im[j*n+k] = rowIm[k] - rowRe[n+k]
			}
		}
	}
}
