package integral

import "math"

// angular holds the angular functions of a shell: row f gives the coefficients
// of the monomials x^i y^j z^k, i+j+k = l, in the order of monomials(l). The
// functions are normalised on the unit sphere.
type angular struct {
	count int // functions: 2l+1, or (l+1)(l+2)/2 cartesian
	coef  [][]float64
}

// monomials returns the exponents (i,j,k) of degree l: i falls first, then j.
func monomials(l int) [][3]int {
	var list [][3]int
	for i := l; i >= 0; i-- {
		for j := l - i; j >= 0; j-- {
			list = append(list, [3]int{i, j, l - i - j})
		}
	}
	return list
}

// place returns the place of x^i y^j z^k in monomials(i+j+k).
func place(i, j, k int) int { return (j+k)*(j+k+1)/2 + k }

// newAngular returns the real solid harmonics of degree l, m = −l … l, or the
// cartesian monomials. The harmonics are Re or Im (x+iy)^m times the z and r
// part, which follows the recurrence of the associated Legendre functions,
//
//	(l−m+1) P_{l+1} = (2l+1) z P_l − (l+m) r² P_{l−1},   P_m = 1
//
// (Abramowitz and Stegun, Handbook of Mathematical Functions, 8.5.3).
func newAngular(l int, cartesian bool) angular {
	var a angular
	if cartesian {
		for c := range monomials(l) {
			row := make([]float64, len(monomials(l)))
			row[c] = 1
			a.coef = append(a.coef, row)
		}
	} else {
		for m := -l; m <= l; m++ {
			a.coef = append(a.coef, solid(l, m))
		}
	}
	for _, row := range a.coef {
		norm := 1 / math.Sqrt(sphere(l, row))
		for c := range row {
			row[c] *= norm
		}
	}
	a.count = len(a.coef)
	return a
}

// solid returns an unnormalised real solid harmonic over monomials(l).
func solid(l, m int) []float64 {
	previous, current := polynomial{}, polynomial{{0, 0, 0}: 1}
	// (x+iy)^|m|: the real part for m ≥ 0, the imaginary part for m < 0.
	re, im := current, polynomial{}
	for range max(m, -m) {
		x, y := [3]int{1, 0, 0}, [3]int{0, 1, 0}
		re, im = re.times(x, 1).plus(im.times(y, -1)), im.times(x, 1).plus(re.times(y, 1))
	}
	current = re
	if m < 0 {
		current, m = im, -m
	}
	for k := m; k < l; k++ {
		next := current.times([3]int{0, 0, 1}, float64(2*k+1)/float64(k-m+1))
		for axis := range 3 {
			square := [3]int{}
			square[axis] = 2
			next = next.plus(previous.times(square, -float64(k+m)/float64(k-m+1)))
		}
		previous, current = current, next
	}
	row := make([]float64, len(monomials(l)))
	for e, v := range current {
		row[place(e[0], e[1], e[2])] = v
	}
	return row
}

// polynomial maps exponents of x, y, z to coefficients.
type polynomial map[[3]int]float64

func (p polynomial) times(e [3]int, factor float64) polynomial {
	out := polynomial{}
	for k, v := range p {
		out[[3]int{k[0] + e[0], k[1] + e[1], k[2] + e[2]}] = factor * v
	}
	return out
}

func (p polynomial) plus(q polynomial) polynomial {
	out := polynomial{}
	for k, v := range p {
		out[k] += v
	}
	for k, v := range q {
		out[k] += v
	}
	return out
}

// sphere returns ∫ Y² dΩ over the unit sphere, Y = Σ row_c·monomial_c:
// ∫ x^{2i}y^{2j}z^{2k} dΩ = 4π (2i−1)!!(2j−1)!!(2k−1)!!/(2l+1)!!.
func sphere(l int, row []float64) float64 {
	sum := 0.0
	list := monomials(l)
	for a, ea := range list {
		for b, eb := range list {
			v := row[a] * row[b] * 4 * math.Pi / factorial2(2*l+1)
			for axis := range 3 {
				n := ea[axis] + eb[axis]
				if n%2 == 1 {
					v = 0
				}
				v *= factorial2(n - 1)
			}
			sum += v
		}
	}
	return sum
}

// factorial2 returns the double factorial n!!, one for n ≤ 0.
func factorial2(n int) float64 {
	v := 1.0
	for ; n > 1; n -= 2 {
		v *= float64(n)
	}
	return v
}

// radialNorm returns ∫₀^∞ r^{2l+2} e^{−a r²} dr = Γ(l+3/2)/(2 a^{l+3/2}).
func radialNorm(l int, a float64) float64 {
	return math.Gamma(float64(l)+1.5) / (2 * math.Pow(a, float64(l)+1.5))
}
