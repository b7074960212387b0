package matchgate

import "math"

// Pfaffian returns the Pfaffian of the antisymmetric n×n matrix a (row-major),
// which it destroys. Only the part above the diagonal is read. Elimination by
// pairs of rows with pivoting, n³/3 complex multiplications; see Parlett and
// Reid, BIT 10, 386 (1970) for the tridiagonal form behind it (from memory).
func Pfaffian(a []complex128, n int) complex128 {
	if n%2 != 0 {
		return 0
	}
	pf := complex128(1)
	for k := 0; k < n; k += 2 {
		// The largest entry of row k becomes its first.
		row := a[k*n : (k+1)*n]
		p, largest := k+1, -1.0
		for j := k + 1; j < n; j++ {
			if v := math.Abs(real(row[j])) + math.Abs(imag(row[j])); v > largest {
				p, largest = j, v
			}
		}
		if largest <= 0 {
			return 0
		}
		if p != k+1 {
			swapAntisymmetric(a, n, k, k+1, p)
			pf = -pf
		}
		pivot := row[k+1]
		pf *= pivot
		// What is left is the Schur complement of the leading 2×2 block:
		// A_ij − (A_ki A_k+1,j − A_k+1,i A_kj)/A_k,k+1.
		next := a[(k+1)*n : (k+2)*n]
		for i := k + 2; i < n; i++ {
			f, g := row[i]/pivot, next[i]/pivot
			if f == 0 && g == 0 {
				continue
			}
			target := a[i*n : (i+1)*n]
			for j := i + 1; j < n; j++ {
				target[j] += g*row[j] - f*next[j]
			}
		}
	}
	return pf
}

// swapAntisymmetric exchanges rows and columns p < q of the part above the
// diagonal, for the rows from first on.
func swapAntisymmetric(a []complex128, n, first, p, q int) {
	for i := first; i < p; i++ {
		a[i*n+p], a[i*n+q] = a[i*n+q], a[i*n+p]
	}
	for i := p + 1; i < q; i++ {
		a[p*n+i], a[i*n+q] = -a[i*n+q], -a[p*n+i]
	}
	a[p*n+q] = -a[p*n+q]
	for j := q + 1; j < n; j++ {
		a[p*n+j], a[q*n+j] = a[q*n+j], a[p*n+j]
	}
}

// solve overwrites the n×m matrix b by a⁻¹b, destroying the n×n matrix a:
// Gaussian elimination with row pivoting. It reports whether a is regular.
func solve(a []complex128, n int, b []complex128, m int) bool {
	for k := range n {
		p, largest := k, 0.0
		for i := k; i < n; i++ {
			if v := math.Abs(real(a[i*n+k])) + math.Abs(imag(a[i*n+k])); v > largest {
				p, largest = i, v
			}
		}
		if largest == 0 {
			return false
		}
		if p != k {
			for j := k; j < n; j++ {
				a[p*n+j], a[k*n+j] = a[k*n+j], a[p*n+j]
			}
			for j := range m {
				b[p*m+j], b[k*m+j] = b[k*m+j], b[p*m+j]
			}
		}
		inverse := 1 / a[k*n+k]
		for i := k + 1; i < n; i++ {
			f := a[i*n+k] * inverse
			if f == 0 {
				continue
			}
			for j := k + 1; j < n; j++ {
				a[i*n+j] -= f * a[k*n+j]
			}
			for j := range m {
				b[i*m+j] -= f * b[k*m+j]
			}
		}
	}
	for k := n - 1; k >= 0; k-- {
		inverse := 1 / a[k*n+k]
		for j := range m {
			b[k*m+j] *= inverse
		}
		for i := range k {
			f := a[i*n+k]
			if f == 0 {
				continue
			}
			for j := range m {
				b[i*m+j] -= f * b[k*m+j]
			}
		}
	}
	return true
}
