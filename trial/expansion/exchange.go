package expansion

import (
	"leadline/hamiltonian"
	"leadline/hamiltonian/linalg"
	"leadline/trial"
)

// exchanger computes X_σ of a batch from its densities: rows 2i and 2i+1 of
// density, of the given length, hold the block of this spin at offset block.
type exchanger interface {
	exchange(dst []complex128, a *energyArea, density []float64, length, block, count int)
}

// exchange implements exchanger factor by factor: X = Σ_g s_g tr(F_g F_g),
// F_g = L̃_g Dᵀ, 4·ng·ns²·M flops.
func (f *factors) exchange(dst []complex128, a *energyArea, density []float64, length, block, count int) {
	m, ns := f.s.sector.Orbitals, f.s.supported()
	clear(dst[:count])
	for i := range count {
		a.density = trial.Grow(a.density, 2*ns*m)
		for part := range 2 {
			copy(a.density[part*ns*m:][:ns*m], density[(2*i+part)*length+block:])
		}
		for c, operand := range f.chunks {
			_, width := operand.Dims()
			a.products = trial.Grow(a.products, 2*ns*width)
			operand.Mul(2*ns, 1, a.density, m, 0, a.products, width)
			re, im := a.products[:ns*width], a.products[ns*width:2*ns*width]
			number := width / ns
			signs := f.sign[c*f.chunk:][:number]
			for u := range ns {
				for v := range ns {
					// rows of density orbital u, columns of factor orbital v
					xRe, xIm := re[u*width+v*number:][:number], im[u*width+v*number:][:number]
					yRe, yIm := re[v*width+u*number:][:number], im[v*width+u*number:][:number]
					var sumRe, sumIm float64
					for g, sign := range signs {
						sumRe += sign * (xRe[g]*yRe[g] - xIm[g]*yIm[g])
						sumIm += sign * (xRe[g]*yIm[g] + xIm[g]*yRe[g])
					}
					dst[i] += complex(sumRe, sumIm)
				}
			}
		}
	}
}

// supermatrix holds K of one spin; X = D·K·D in 4·(ns·M)² flops.
type supermatrix struct {
	n int // ns·M
	k *linalg.Packed
}

// newSupermatrix builds K_iq,js = Σ_g s_g L̃_g,is L̃_g,jq: 2·ng·(ns·M)² flops.
func newSupermatrix(s *Source, h *hamiltonian.Hamiltonian, r *trial.Rotated, spin int) *supermatrix {
	m, ns, ng := s.sector.Orbitals, s.supported(), h.Factors.Count()
	size := ns * m
	rotated, signed := make([]float64, ng*size), make([]float64, ng*size)
	for g, sign := range h.Factors.Sign {
		r.Factor(rotated[g*size:(g+1)*size], g, spin, false)
		for k := g * size; k < (g+1)*size; k++ {
			signed[k] = sign * rotated[k]
		}
	}
	all := make([]float64, size*size)
	if ng > 0 {
		for i := range ns {
			for j := range ns {
				// block (i,j): rows q, columns s
				linalg.Gemm(true, false, m, m, ng, 1, rotated[j*m:], size, signed[i*m:], size, 0, all[i*m*size+j*m:], size)
			}
		}
	}
	return &supermatrix{n: size, k: linalg.Pack(false, size, size, all, size)}
}

func (s *supermatrix) exchange(dst []complex128, a *energyArea, density []float64, length, block, count int) {
	n := s.n
	a.products = trial.Grow(a.products, 2*count*n)
	s.k.Mul(2*count, 1, density[block:], length, 0, a.products, n)
	for i := range count {
		dRe, dIm := density[2*i*length+block:][:n], density[(2*i+1)*length+block:][:n]
		yRe, yIm := a.products[2*i*n:][:n], a.products[(2*i+1)*n:][:n]
		var re, im float64
		for k, v := range dRe {
			re += v*yRe[k] - dIm[k]*yIm[k]
			im += v*yIm[k] + dIm[k]*yRe[k]
		}
		dst[i] = complex(re, im)
	}
}
