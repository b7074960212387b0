package linalg

import (
	"fmt"
	"math"
)

// Orthonormalize replaces the columns of a complex rows×cols matrix A by those
// of Q in the thin factorisation A = QR, R upper triangular with a real positive
// diagonal, and returns log det R = log|R_11·…·R_NN|. Row p of the matrix holds
// its cols real parts at a[p·stride:] and its cols imaginary parts right after.
//
// It is an error if the columns are not linearly independent to working
// precision or not finite; the matrix is then left in an undefined state.
func Orthonormalize(rows, cols int, a []float64, stride int) (logDet float64, err error) {
	if rows < 0 || cols < 0 || stride < 2*cols {
		panic("linalg: bad shape")
	}
	if cols == 0 {
		return 0, nil
	}
	if rows < cols {
		return 0, fmt.Errorf("linalg: %d columns of %d rows cannot be linearly independent", cols, rows)
	}
	if len(a) < (rows-1)*stride+2*cols {
		panic("linalg: slice too short for the matrix")
	}
	return gramSchmidt(rows, cols, a, stride)
}

// gramSchmidt orthogonalises column by column, each twice against the ones
// before it ("twice is enough": Giraud, Langou and Rozložník, Comput. Math.
// Appl. 50, 1069 (2005), from memory).
func gramSchmidt(rows, cols int, a []float64, stride int) (logDet float64, err error) {
	for j := range cols {
		before := columnNorm(rows, cols, j, a, stride)
		for range 2 {
			for i := range j {
				var re, im float64
				for p := range rows {
					row := a[p*stride : p*stride+2*cols]
					re += row[i]*row[j] + row[cols+i]*row[cols+j]
					im += row[i]*row[cols+j] - row[cols+i]*row[j]
				}
				for p := range rows {
					row := a[p*stride : p*stride+2*cols]
					row[j] -= re*row[i] - im*row[cols+i]
					row[cols+j] -= re*row[cols+i] + im*row[i]
				}
			}
		}
		after := columnNorm(rows, cols, j, a, stride)
		if math.IsNaN(after) || math.IsInf(after, 0) {
			return 0, fmt.Errorf("linalg: column %d of %d holds numbers that are not finite", j+1, cols)
		}
		if !(after > before*float64(rows)*0x1p-52) {
			return 0, fmt.Errorf("linalg: column %d of %d depends linearly on the ones before it", j+1, cols)
		}
		logDet += math.Log(after)
		for p := range rows {
			a[p*stride+j] /= after
			a[p*stride+cols+j] /= after
		}
	}
	return logDet, nil
}

func columnNorm(rows, cols, j int, a []float64, stride int) float64 {
	var norm float64
	for p := range rows {
		norm = math.Hypot(norm, math.Hypot(a[p*stride+j], a[p*stride+cols+j]))
	}
	return norm
}
