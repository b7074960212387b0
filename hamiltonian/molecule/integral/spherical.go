package integral

// Spherical returns the spherical functions of a shell of angular momentum l over
// its cartesian ones, in the orders and normalisations of the package comment,
// 2l+1 rows of (l+1)(l+2)/2.
func Spherical(l int) [][]float64 {
	rows, cartesian := newAngular(l, false).coef, newAngular(l, true).coef
	for _, row := range rows {
		for c := range row {
			row[c] /= cartesian[c][c]
		}
	}
	return rows
}
