package integral

import (
	"math"
	"sync"
)

// The Boys function F_n(T) = ∫₀¹ u^{2n} exp(−T u²) du (S. F. Boys, Proc. R. Soc.
// London A 200, 542 (1950)) is tabulated on a grid of T and continued from the
// nearest grid point by its Taylor series, whose derivatives are −F_{n+1}
// (Shavitt, Methods Comput. Phys. 2, 1 (1963)); lower orders follow by downward
// recurrence, in which every term is positive:
//
//	F_{n−1} = (2T·F_n + e^{−T})/(2n−1).
//
// Beyond the grid erf(√T) is one to double precision and upward recurrence from
// F_0 = ½√(π/T) is stable.
const (
	boysOrder = 4*maxL + 1 // largest n served, plus one spare
	boysTerms = 8          // highest power of the Taylor series
	boysGrid  = 8          // grid points per unit of T
	boysEnd   = 48         // end of the grid
	boysRow   = boysOrder + boysTerms + 1
)

// boys is the table: F_0 … F_{boysRow−1} at each grid point, and e^{−T}.
type boys struct {
	f   [][boysRow]float64
	exp []float64
}

// boysTable computes the table once; it is constant afterwards.
var boysTable = sync.OnceValue(func() *boys {
	n := boysEnd*boysGrid + 1
	b := &boys{f: make([][boysRow]float64, n), exp: make([]float64, n)}
	for i := range n {
		x := float64(i) / boysGrid
		b.exp[i] = math.Exp(-x)
		// F_m = e^{−T} Σ_k (2T)^k / ((2m+1)(2m+3)…(2m+2k+1)), m the highest order.
		m := boysRow - 1
		term := 1 / float64(2*m+1)
		sum := term
		for k := 1; term > 1e-18*sum; k++ {
			term *= 2 * x / float64(2*m+2*k+1)
			sum += term
		}
		b.f[i][m] = b.exp[i] * sum
		for ; m > 0; m-- {
			b.f[i][m-1] = (2*x*b.f[i][m] + b.exp[i]) / float64(2*m-1)
		}
	}
	return b
})

// inverse holds 1/k.
var inverse = func() (v [2*boysRow + 1]float64) {
	for k := 1; k < len(v); k++ {
		v[k] = 1 / float64(k)
	}
	return v
}()

// fill writes F_0(x) … F_n(x) into dst[0], dst[stride] …, for x ≥ 0 and
// n < boysOrder. Relative accuracy is a few units in the last place.
func (b *boys) fill(dst []float64, stride, n int, x float64) {
	if x >= boysEnd {
		f := 0.5 * math.Sqrt(math.Pi/x)
		dst[0] = f
		if n == 0 {
			return
		}
		e := math.Exp(-x)
		half := 0.5 / x
		for m := range n {
			f = (float64(2*m+1)*f - e) * half
			dst[(m+1)*stride] = f
		}
		return
	}
	i := int(x*boysGrid + 0.5)
	d := float64(i)*(1.0/boysGrid) - x
	row := b.f[i][n : n+boysTerms+1]
	f := row[boysTerms]
	e := 1.0
	for k := boysTerms - 1; k >= 0; k-- {
		g := d * inverse[k+1]
		f = row[k] + g*f
		e = 1 + g*e
	}
	dst[n*stride] = f
	if n == 0 {
		return
	}
	e *= b.exp[i]
	for m := n; m > 0; m-- {
		f = (2*x*f + e) * inverse[2*m-1]
		dst[(m-1)*stride] = f
	}
}
