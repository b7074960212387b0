package afqmc

import (
	"fmt"
	"math"

	"leadline/hamiltonian"
	"leadline/hamiltonian/linalg"
	"leadline/trial"
)

// gram is scratch for the re-orthogonalisation of one walker.
type gram struct {
	products []float64 // 2N×2N real products of the columns' planes
	inverse  []float64 // [Re; Im] of R⁻ᵀ, 2N×N
	moved    []float64 // 2N×2M
	factor   []complex128
}

func newGram(m, n int) *gram {
	return &gram{
		products: make([]float64, 4*n*n),
		inverse:  make([]float64, 2*n*n),
		moved:    make([]float64, 4*n*m),
		factor:   make([]complex128, n*n),
	}
}

// orthonormalise makes the columns of walker i orthonormal, φ = QR with positive
// diagonal of R, through the Cholesky factor of the Gram matrix φ†φ = R†R. It
// returns ln det R, summed over both spins. Between two calls the columns stay
// well conditioned, so one pass leaves them orthonormal to about 1e-13; columns
// that are not independent are an error.
func orthonormalise(w trial.Walkers, i int, g *gram) (logDet float64, err error) {
	for spin := range 2 {
		n := w.Electrons(spin)
		if n == 0 {
			continue
		}
		if spin == hamiltonian.Down && w.Paired {
			return 2 * logDet, nil
		}
		one, err := orthonormaliseSpin(w.Spin(i, spin), w.Orbitals, n, g)
		if err != nil {
			return 0, err
		}
		logDet += one
	}
	return logDet, nil
}

func orthonormaliseSpin(columns []float64, m, n int, g *gram) (logDet float64, err error) {
	linalg.Gemm(false, true, 2*n, 2*n, m, 1, columns, m, columns, m, 0, g.products, 2*n)
	// φᵀ φ* = L L† with L = Rᵀ: lower triangle, row by row.
	l := g.factor[:n*n]
	for a := range n {
		for b := range a + 1 {
			re := g.products[2*a*2*n+2*b] + g.products[(2*a+1)*2*n+2*b+1]
			im := g.products[(2*a+1)*2*n+2*b] - g.products[2*a*2*n+2*b+1]
			v := complex(re, im)
			for k := range b {
				v -= l[a*n+k] * conj(l[b*n+k])
			}
			if a > b {
				l[a*n+b] = v / l[b*n+b]
				continue
			}
			if !(real(v) > 1e-14*re) {
				return 0, fmt.Errorf("column %d of a walker is not independent of the others", a+1)
			}
			l[a*n+a] = complex(math.Sqrt(real(v)), 0)
			logDet += 0.5 * math.Log(real(v))
		}
	}
	// Qᵀ = L⁻¹ φᵀ.
	inverse := g.inverse[:2*n*n]
	clear(inverse)
	for b := range n {
		for a := b; a < n; a++ {
			var v complex128
			if a == b {
				v = 1
			}
			for k := b; k < a; k++ {
				v -= l[a*n+k] * complex(inverse[k*n+b], inverse[n*n+k*n+b])
			}
			v /= l[a*n+a]
			inverse[a*n+b], inverse[n*n+a*n+b] = real(v), imag(v)
		}
	}
	linalg.Gemm(false, false, 2*n, 2*m, n, 1, inverse, n, columns, 2*m, 0, g.moved, 2*m)
	for j := range n {
		re, im := g.moved[j*2*m:(j+1)*2*m], g.moved[(n+j)*2*m:(n+j+1)*2*m]
		dst := columns[j*2*m : (j+1)*2*m]
		for p := range m {
			dst[p] = re[p] - im[m+p]
			dst[m+p] = re[m+p] + im[p]
		}
	}
	return logDet, nil
}

func conj(v complex128) complex128 { return complex(real(v), -imag(v)) }
