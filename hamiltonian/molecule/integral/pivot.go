package integral

import "math"

// pivoted factorises the k×k matrix with full pivoting down to pivots of the size
// stop. It returns the pivots in order and the matrix, pivots × k, that turns the
// k columns into factors: the inverse of the triangle, zero at columns not taken.
func pivoted(a []float64, k int, stop float64) (order []int, inverse []float64) {
	left := make([]float64, k) // residual diagonal
	for i := range k {
		left[i] = a[i*k+i]
	}
	taken := make([]bool, k)
	triangle := make([]float64, 0, k*k) // one row of k per pivot
	for {
		best := -1
		for i, d := range left {
			if !taken[i] && d >= stop && (best < 0 || d > left[best]) {
				best = i
			}
		}
		if best < 0 {
			break
		}
		// Row of the factor: L_i = (a_i,best − Σ_h L^h_i L^h_best)/√d, and the same
		// combination of columns in inverse.
		g := len(order)
		row, combination := make([]float64, k), make([]float64, k)
		copy(row, a[best*k:(best+1)*k])
		combination[best] = 1
		for h := range g {
			v := triangle[h*k+best]
			for i := range k {
				row[i] -= v * triangle[h*k+i]
				combination[i] -= v * inverse[h*k+i]
			}
		}
		scale := 1 / math.Sqrt(left[best])
		for i := range k {
			row[i] *= scale
			combination[i] *= scale
			left[i] -= row[i] * row[i]
		}
		taken[best] = true
		order = append(order, best)
		triangle, inverse = append(triangle, row...), append(inverse, combination...)
	}
	return order, inverse
}
