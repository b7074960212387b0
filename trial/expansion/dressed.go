package expansion

import (
	"leadline/hamiltonian"
	"leadline/hamiltonian/linalg"
	"leadline/trial"
)

// factors holds the half-rotated factors L̃_g = S†L_g of one spin in chunks of a
// few, each an operand M×(ns·chunk) with columns (support orbital, factor).
type factors struct {
	s      *Source
	sign   []float64
	chunk  int // factors in every chunk but the last
	chunks []*linalg.Packed
}

// chunkWidth is about the number of columns of one chunk, so that its product
// with a block of walkers stays in the cache.
const chunkWidth = 1024

func newFactors(s *Source, h *hamiltonian.Hamiltonian, r *trial.Rotated, spin int) *factors {
	m, ns := s.sector.Orbitals, s.supported()
	f := &factors{s: s, sign: h.Factors.Sign, chunk: max(1, chunkWidth/ns)}
	one := make([]float64, ns*m)
	for from := 0; from < r.Count; from += f.chunk {
		count := min(f.chunk, r.Count-from)
		width := ns * count
		all := make([]float64, m*width)
		for g := range count {
			r.Factor(one, from+g, spin, false)
			for u := range ns {
				for q := range m {
					all[q*width+u*count+g] = one[u*m+q]
				}
			}
		}
		f.chunks = append(f.chunks, linalg.Pack(false, m, width, all, width))
	}
	return f
}

// dress sets dst to B_g,ai = λ_a L̃_g Θ_i of the walkers from ≤ i < to, rows (walker,
// part, particle, hole) of ng numbers, for particles a and active holes i,
// λ_a = e_a − Σ_o Θ_ao e_o. Flops for each walker: 4·ng·ns·M·ne for L̃Θ and
// 16·ng·ns·ne·(no−ne) for λ.
func (f *factors) dress(dst []float64, a *energyArea, form *form, w trial.Walkers, from, to, spin int) []float64 {
	s := f.s
	m, ns, ng := s.sector.Orbitals, s.supported(), len(f.sign)
	ne := s.spaces[spin].electrons
	np := s.active - ne
	rows, walkers := 2*np*ne, to-from
	dst = trial.Grow(dst, walkers*rows*ng)
	a.columns = trial.Grow(a.columns, 2*walkers*ne*m)
	a.left = trial.Grow(a.left, walkers*4*np*ns)
	for k := range walkers {
		columns, left := a.columns[2*k*ne*m:][:2*ne*m], a.left[4*k*np*ns:][:4*np*ns]
		if form.frames[from+k] == nil {
			clear(columns)
			clear(left)
			continue
		}
		s.activeColumns(columns, a, form, w, from+k, spin)
		s.leftVectors(left, form, from+k, spin)
	}
	for c, operand := range f.chunks {
		_, width := operand.Dims()
		count := width / ns
		a.products = trial.Grow(a.products, 2*walkers*ne*width)
		operand.Mul(2*walkers*ne, 1, a.columns, m, 0, a.products, width)
		for k := range walkers {
			for hole := range ne {
				// [Re λ, −Im λ; Im λ, Re λ]·[Re; Im], 2(no−ne)×2ns by 2ns×chunk
				linalg.Gemm(false, false, 2*np, count, 2*ns, 1, a.left[4*k*np*ns:], 2*ns,
					a.products[2*(k*ne+hole)*width:], count, 0,
					dst[(k*rows+hole)*ng+c*f.chunk:], ne*ng)
			}
		}
	}
	return dst
}

// activeColumns writes Θ_i = φ (φ_occ)⁻¹_·i of the active holes, each M real,
// then M imaginary parts.
func (s *Source) activeColumns(dst []float64, a *energyArea, form *form, w trial.Walkers, i, spin int) {
	n, ne, m := s.sector.Electrons(spin), s.spaces[spin].electrons, s.sector.Orbitals
	a.density = trial.Grow(a.density, 2*ne*n+4*ne*m)
	left, product := a.density[:2*ne*n], a.density[2*ne*n:]
	inverse := form.inverse[i*n*n:][:n*n]
	for hole := range ne {
		for k := range n {
			v := inverse[k*n+s.core+hole]
			left[hole*n+k], left[(ne+hole)*n+k] = real(v), imag(v)
		}
	}
	linalg.Gemm(false, false, 2*ne, 2*m, n, 1, left, n, w.Spin(i, spin), 2*m, 0, product, 2*m)
	for hole := range ne {
		upper, lower := product[2*m*hole:][:2*m], product[2*m*(ne+hole):][:2*m]
		re, im := dst[2*hole*m:][:m], dst[(2*hole+1)*m:][:m]
		for q := range re {
			re[q] = upper[q] - lower[m+q]
			im[q] = upper[m+q] + lower[q]
		}
	}
}

// leftVectors writes [Re λ, −Im λ; Im λ, Re λ], particles × support in each block.
func (s *Source) leftVectors(dst []float64, form *form, i, spin int) {
	n, ns, ne := s.sector.Electrons(spin), s.supported(), s.spaces[spin].electrons
	np := s.active - ne
	f := form.frames[i]
	theta := form.theta[i*np*n:][:np*n]
	clear(dst)
	set := func(p, u int, v complex128) {
		dst[p*2*ns+u], dst[p*2*ns+ns+u] = real(v), -imag(v)
		dst[(np+p)*2*ns+u], dst[(np+p)*2*ns+ns+u] = imag(v), real(v)
	}
	for p := range np {
		set(p, s.core+f.orbital[ne+p], 1)
		for o := range n {
			u := o
			if o >= s.core {
				u = s.core + f.orbital[o-s.core]
			}
			set(p, u, -theta[p*n+o])
		}
	}
}
