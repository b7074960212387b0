package fcidump

import "strconv"

// powers of ten that a float64 holds exactly.
var powers = [...]float64{1e0, 1e1, 1e2, 1e3, 1e4, 1e5, 1e6, 1e7, 1e8, 1e9, 1e10, 1e11, 1e12, 1e13, 1e14, 1e15, 1e16, 1e17, 1e18, 1e19, 1e20, 1e21, 1e22}

// number reads a decimal number that starts at b[i] and returns the place after
// it. The exponent letter is E or D of either case, or left out before a sign
// ("1.5-100", as Fortran writes exponents of three digits). b must end with a
// byte that is no part of a number. The result is correctly rounded; ok is false
// where there is no finite number.
//
// Up to 2⁵³ in the digits and 10^±22 in the exponent one operation on exact
// numbers rounds correctly (Clinger, Proc. PLDI 1990, 92); others go to strconv.
func number(b []byte, i int) (x float64, after int, ok bool) {
	start, negative := i, false
	if b[i] == '-' || b[i] == '+' {
		negative = b[i] == '-'
		i++
	}
	var digits uint64
	const most = (1<<64 - 10) / 10
	count, dropped, scale := 0, false, 0
	for ; b[i]-'0' <= 9; i++ {
		count++
		if digits > most {
			dropped, scale = true, scale+1
		} else {
			digits = digits*10 + uint64(b[i]-'0')
		}
	}
	if b[i] == '.' {
		for i++; b[i]-'0' <= 9; i++ {
			count++
			if digits > most {
				dropped = true
			} else {
				digits = digits*10 + uint64(b[i]-'0')
				scale--
			}
		}
	}
	if count == 0 {
		return 0, i, false
	}
	mantissa := i
	exponent := 0
	letter := b[i] == 'E' || b[i] == 'e' || b[i] == 'D' || b[i] == 'd'
	if letter {
		i++
	}
	if letter || b[i] == '-' || b[i] == '+' {
		minus := b[i] == '-'
		if minus || b[i] == '+' {
			i++
		}
		first := i
		for ; b[i]-'0' <= 9; i++ {
			if exponent < 100000 {
				exponent = exponent*10 + int(b[i]-'0')
			}
		}
		if i == first {
			return 0, i, false
		}
		if minus {
			exponent = -exponent
		}
	}
	scale += exponent
	if !dropped && digits <= 1<<53 && -len(powers) < scale && scale < len(powers) {
		x = float64(digits)
		if scale < 0 {
			x /= powers[-scale]
		} else {
			x *= powers[scale]
		}
		if negative {
			x = -x
		}
		return x, i, true
	}
	var buffer [64]byte
	text := append(buffer[:0], b[start:mantissa]...)
	text = append(text, 'e')
	text = strconv.AppendInt(text, int64(exponent), 10)
	x, err := strconv.ParseFloat(string(text), 64)
	return x, i, err == nil
}
