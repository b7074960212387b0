package linalg

import "math"

// determinant is a complex number mantissa·2^exponent, safe from overflow.
type determinant struct {
	mantissa complex128
	exponent int
}

var one = determinant{mantissa: 1}

// multiply multiplies by d. A factor that is not finite makes a NaN.
func (x *determinant) multiply(d complex128) {
	const large, small = 0x1p300, 0x1p-300
	if size := magnitude(d); size < large && size > small {
		x.mantissa *= d
		if size := magnitude(x.mantissa); size < large && size > small {
			return
		}
	} else {
		x.mantissa *= x.normalize(d)
	}
	x.mantissa = x.normalize(x.mantissa)
}

// normalize moves the binary exponent of d to that of x.
func (x *determinant) normalize(d complex128) complex128 {
	size := magnitude(d)
	if size == 0 {
		return 0
	}
	if !(size <= math.MaxFloat64) {
		return complex(math.NaN(), math.NaN())
	}
	_, exponent := math.Frexp(size)
	x.exponent += exponent
	return complex(math.Ldexp(real(d), -exponent), math.Ldexp(imag(d), -exponent))
}

// magnitude returns the larger of |re| and |im|, or NaN.
func magnitude(d complex128) float64 { return max(math.Abs(real(d)), math.Abs(imag(d))) }

// polar returns the logarithm of the magnitude and the phase; -Inf and 0 for zero.
func (x determinant) polar() (logAbs float64, phase complex128) {
	if x.mantissa == 0 {
		return math.Inf(-1), 0
	}
	size := math.Hypot(real(x.mantissa), imag(x.mantissa))
	return math.Log(size) + float64(x.exponent)*math.Ln2, complex(real(x.mantissa)/size, imag(x.mantissa)/size)
}

// reciprocal returns 1/d = conj(d/s)/(s·|d/s|²) with s = |re|+|im|, so that |d|²
// does not overflow.
func reciprocal(d complex128) complex128 {
	s := math.Abs(real(d)) + math.Abs(imag(d))
	a, b := real(d)/s, imag(d)/s
	t := (a*a + b*b) * s
	return complex(a/t, 0-b/t)
}
