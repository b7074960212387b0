package determinant

import (
	"leadline/hamiltonian"
	"leadline/hamiltonian/linalg"
	"leadline/trial"
)

// supermatrix holds K, or [Re K | Im K], of one spin.
type supermatrix struct {
	n       int // N·M
	complex bool
	k       *linalg.Packed
}

// newSupermatrix builds K_iq,js = Σ_g s_g L̃_g,is L̃_g,jq: 2·ng·N²M² flops.
func newSupermatrix(d *Determinant, h *hamiltonian.Hamiltonian, r *trial.Rotated, spin int) *supermatrix {
	n, m := d.sector.Electrons(spin), d.sector.Orbitals
	size, ng, planes := n*m, h.Factors.Count(), d.planes()
	rotated := rotatedFactors(d, r, spin)
	signed := make([][]float64, planes)
	for plane := range signed {
		signed[plane] = make([]float64, len(rotated[plane]))
		for g, s := range h.Factors.Sign {
			for k := g * size; k < (g+1)*size; k++ {
				signed[plane][k] = s * rotated[plane][k]
			}
		}
	}
	all := make([]float64, size*planes*size)
	width := planes * size
	for i := range n {
		for j := range n {
			// block (i,j): rows q, columns s: Σ_g L̃_g,jq s_g L̃_g,is
			re := all[i*m*width+j*m:]
			product := func(alpha, beta float64, a, b []float64, c []float64) {
				linalg.Gemm(true, false, m, m, ng, alpha, a[j*m:], size, b[i*m:], size, beta, c, width)
			}
			product(1, 0, rotated[0], signed[0], re)
			if planes == 2 {
				im := all[i*m*width+size+j*m:]
				product(-1, 1, rotated[1], signed[1], re)
				product(1, 0, rotated[0], signed[1], im)
				product(1, 1, rotated[1], signed[0], im)
			}
		}
	}
	return &supermatrix{n: size, complex: planes == 2, k: linalg.Pack(false, size, width, all, width)}
}

// rotatedFactors returns the planes of L̃_g, ng×(N·M) each.
func rotatedFactors(d *Determinant, r *trial.Rotated, spin int) [][]float64 {
	size := d.sector.Electrons(spin) * d.sector.Orbitals
	out := make([][]float64, d.planes())
	for plane := range out {
		out[plane] = make([]float64, r.Count*size)
		for g := range r.Count {
			r.Factor(out[plane][g*size:(g+1)*size], g, spin, plane == 1)
		}
	}
	return out
}

func (s *supermatrix) exchange(dst []complex128, a *energyArea, density []float64, length, block, count int) {
	n := s.n
	width := n
	if s.complex {
		width = 2 * n
	}
	a.products = trial.Grow(a.products, 2*count*width)
	s.k.Mul(2*count, 1, density[block:], length, 0, a.products, width)
	for i := range count {
		re, im := density[2*i*length+block:][:n], density[(2*i+1)*length+block:][:n]
		yRe, yIm := a.products[2*i*width:][:width], a.products[(2*i+1)*width:][:width]
		var sumRe, sumIm float64
		for k := range n {
			vRe, vIm := yRe[k], yIm[k]
			if s.complex {
				vRe, vIm = yRe[k]-yIm[n+k], yRe[n+k]+yIm[k]
			}
			sumRe += re[k]*vRe - im[k]*vIm
			sumIm += re[k]*vIm + im[k]*vRe
		}
		dst[i] = complex(sumRe, sumIm)
	}
}

// factorwise holds the half-rotated factors of one spin in chunks of a few
// factors, each an operand M×(factors·N), or with imaginary parts in its right
// half.
type factorwise struct {
	n, m    int
	sign    []float64
	complex bool
	chunk   int // factors in every chunk but the last
	chunks  []*linalg.Packed
}

// chunkWidth bounds the columns of one chunk, so that its product with a tile
// of walkers stays in the cache.
const chunkWidth = 256

func newFactorwise(d *Determinant, h *hamiltonian.Hamiltonian, r *trial.Rotated, spin int) *factorwise {
	n, m := d.sector.Electrons(spin), d.sector.Orbitals
	planes := d.planes()
	f := &factorwise{n: n, m: m, sign: h.Factors.Sign, complex: planes == 2, chunk: max(1, chunkWidth/(planes*n))}
	for from := 0; from < r.Count; from += f.chunk {
		count := min(f.chunk, r.Count-from)
		rows := make([]float64, planes*count*n*m)
		for plane := range planes {
			for g := range count {
				r.Factor(rows[(plane*count+g)*n*m:][:n*m], from+g, spin, plane == 1)
			}
		}
		f.chunks = append(f.chunks, linalg.Pack(true, m, planes*count*n, rows, m))
	}
	return f
}

func (f *factorwise) exchange(dst []complex128, a *energyArea, density []float64, length, block, count int) {
	n, m := f.n, f.m
	a.density = trial.Grow(a.density, 2*count*n*m)
	for row := range 2 * count {
		copy(a.density[row*n*m:(row+1)*n*m], density[row*length+block:])
	}
	clear(dst[:count])
	for c, operand := range f.chunks {
		_, width := operand.Dims()
		a.products = trial.Grow(a.products, 2*count*n*width)
		operand.Mul(2*count*n, 1, a.density, m, 0, a.products, width)
		sign := f.sign[c*f.chunk : min((c+1)*f.chunk, len(f.sign))]
		for i := range count {
			re := a.products[2*i*n*width : (2*i+1)*n*width]
			im := a.products[(2*i+1)*n*width : (2*i+2)*n*width]
			if f.complex {
				combine(re, im, n, width)
			}
			var sum complex128
			for g, s := range sign {
				sum += complex(s, 0) * traceSquare(re[g*n:], im[g*n:], n, width)
			}
			dst[i] += sum
		}
	}
}

// combine turns products with [Re L̃ | Im L̃] into the complex product, kept in
// the left halves.
func combine(re, im []float64, n, width int) {
	half := width / 2
	for j := range n {
		rowRe, rowIm := re[j*width:(j+1)*width], im[j*width:(j+1)*width]
		for k := range half {
			rowRe[k], rowIm[k] = rowRe[k]-rowIm[half+k], rowRe[half+k]+rowIm[k]
		}
	}
}

// traceSquare returns tr(F F) of an n×n complex block with rows of length stride.
func traceSquare(re, im []float64, n, stride int) complex128 {
	var sumRe, sumIm float64
	for i := range n {
		sumRe += re[i*stride+i]*re[i*stride+i] - im[i*stride+i]*im[i*stride+i]
		sumIm += 2 * re[i*stride+i] * im[i*stride+i]
		for j := range i {
			a, b := i*stride+j, j*stride+i
			sumRe += 2 * (re[a]*re[b] - im[a]*im[b])
			sumIm += 2 * (re[a]*im[b] + im[a]*re[b])
		}
	}
	return complex(sumRe, sumIm)
}
