package factorize

import (
	"cmp"
	"context"
	"errors"
	"fmt"
	"math"
	"slices"

	"leadline/hamiltonian"
	"leadline/hamiltonian/linalg"
)

const (
	// block is the largest number of pivots per round and stripe the number of
	// columns that one goroutine updates; chosen by measurement.
	block, stripe = 48, 384
	// span: a round takes pivots down to this part of the largest diagonal at its
	// start, so that the order of pivots stays close to the strict one.
	span = 0.05
	// rounding is the negative diagonal, relative to the largest one, that is put
	// down to rounded input (integrals printed with eight digits).
	rounding = 1e-7
	// overflow is the magnitude above which products of numbers leave float64.
	overflow = 1e100
)

var errOverflow = errors.New("two-electron integrals are not finite or beyond 1e100")

// IndefiniteError says that a matrix has no Cholesky factorisation.
type IndefiniteError struct {
	Pair     int     // the pair whose residual is negative, in packed order
	Residual float64 // that residual, hartree
}

func (e *IndefiniteError) Error() string {
	p := int(math.Sqrt(2 * float64(e.Pair)))
	for hamiltonian.Pairs(p) > e.Pair {
		p--
	}
	for hamiltonian.Pairs(p+1) <= e.Pair {
		p++
	}
	return fmt.Sprintf("two-electron integrals are not positive semidefinite: the Cholesky factorisation leaves %.3g for orbital pair (%d,%d), expected 0 or more", e.Residual, p+1, e.Pair-hamiltonian.Pairs(p)+1)
}

// Cholesky returns factors of sign +1 with V ≈ Σ_g L^g L^gᵀ such that no diagonal
// element of the rest exceeds tolerance (in the units of V, hartree). The rest R
// of a positive-semidefinite V is one too, so |R_ij| ≤ residual for every element,
// where residual is its largest diagonal in magnitude. It exceeds tolerance only
// where rounding of the input allows no better.
//
// Pivoted Cholesky factorisation of two-electron integrals: Beebe & Linderberg,
// Int. J. Quantum Chem. 12, 683 (1977). Pivots are taken in rounds: their columns
// are fetched and cleared of all earlier factors by one matrix product, and the
// small matrix over the candidates then orders them by full pivoting. Costs n·ng²
// flops and n·ng numbers for ng factors; results do not depend on GOMAXPROCS.
//
// An indefinite V gives an [*IndefiniteError].
func Cholesky(ctx context.Context, v Matrix, tolerance float64) (f *hamiltonian.Factors, residual float64, err error) {
	if !(tolerance > 0) {
		panic("factorize: tolerance is not positive")
	}
	n := v.Dim()
	orbitals(n)
	diagonal := make([]float64, n)
	v.Diagonal(diagonal)
	scale := 0.0
	for _, d := range diagonal {
		scale = max(scale, math.Abs(d))
	}
	// Below this nothing but rounding errors of the subtraction is left.
	tolerance = max(tolerance, 64*0x1p-52*scale)

	var (
		factors   []float64 // count×n
		columns   = make([]float64, block*n)
		earlier   []float64 // candidates×count: factors at the candidates
		small     = make([]float64, block*block)
		triangle  = make([]float64, block*block)
		diagonals = slices.Clone(diagonal)
	)
	for {
		if err := ctx.Err(); err != nil {
			return nil, 0, err
		}
		count := len(factors) / n
		largest, lowest := slices.Max(diagonal), slices.Min(diagonal)
		if !(largest-lowest <= overflow) {
			return nil, 0, errOverflow
		}
		if largest <= tolerance || largest <= -lowest || count >= n {
			residual = max(largest, -lowest, 0)
			if -lowest > max(tolerance, rounding*scale) {
				return nil, 0, &IndefiniteError{slices.Index(diagonal, lowest), lowest}
			}
			return newFactors(slices.Clip(factors), slices.Repeat([]float64{1}, count)), residual, nil
		}
		stop := max(tolerance, span*largest, -lowest)
		pivots := candidates(diagonal, stop)

		k := len(pivots)
		parallel(k, func(i int) { v.Column(pivots[i], columns[i*n:(i+1)*n]) })
		earlier = slices.Grow(earlier[:0], k*count)[:k*count]
		for i, p := range pivots {
			for g := range count {
				earlier[i*count+g] = factors[g*n+p]
			}
		}
		stripes := (n + stripe - 1) / stripe
		parallel(stripes, func(s int) {
			from, to := s*stripe, min(n, (s+1)*stripe)
			if count > 0 {
				linalg.Gemm(false, false, k, to-from, count, -1, earlier, count, factors[from:], n, 1, columns[from:], n)
			}
		})
		for i := range k {
			for j, p := range pivots {
				small[i*k+j] = columns[i*n+p]
			}
		}
		order := pivot(small, triangle, k, stop)
		if len(order) == 0 { // the candidates' diagonals were rounding errors
			for i, p := range pivots {
				diagonal[p] = small[i*k+i]
			}
			continue
		}

		first := len(factors)
		factors = append(factors, make([]float64, len(order)*n)...)
		parallel(stripes, func(s int) {
			from, to := s*stripe, min(n, (s+1)*stripe)
			for a, i := range order {
				row := factors[first+a*n+from : first+a*n+to]
				copy(row, columns[i*n+from:i*n+to])
				for b := range a {
					axpy(row, -triangle[i*k+b], factors[first+b*n+from:first+b*n+to])
				}
				scaleBy(row, 1/triangle[i*k+a])
				for j, x := range row {
					diagonal[from+j] -= x * x
				}
			}
		})
		for _, i := range order { // a pivot is exhausted but for rounding
			p := pivots[i]
			diagonal[p] = min(diagonal[p], 0x1p-52*diagonals[p])
		}
	}
}

// candidates returns the places of up to block largest elements above stop,
// largest first, lower index first among equals.
func candidates(diagonal []float64, stop float64) []int {
	var places []int
	for i, d := range diagonal {
		if d > stop {
			places = append(places, i)
		}
	}
	slices.SortFunc(places, func(i, j int) int {
		return cmp.Or(cmp.Compare(diagonal[j], diagonal[i]), cmp.Compare(i, j))
	})
	return places[:min(len(places), block)]
}

// pivot factorises the k×k matrix s in place with full pivoting, down to pivots
// of size stop. It returns the order of the pivots; row i of the triangle holds
// the factors at candidate i, in that order.
func pivot(s, triangle []float64, k int, stop float64) (order []int) {
	used := make([]bool, k)
	for {
		best := -1
		for i := range k {
			if d := s[i*k+i]; !used[i] && d > stop && (best < 0 || d > s[best*k+best]) {
				best = i
			}
		}
		if best < 0 {
			return order
		}
		root, a := math.Sqrt(s[best*k+best]), len(order)
		for i := range k {
			if used[i] {
				continue
			}
			triangle[i*k+a] = s[i*k+best] / root
		}
		triangle[best*k+a] = root
		used[best] = true
		for i := range k {
			if used[i] {
				continue
			}
			for j := range k {
				if !used[j] {
					s[i*k+j] -= triangle[i*k+a] * triangle[j*k+a]
				}
			}
		}
		order = append(order, best)
	}
}

func axpy(y []float64, a float64, x []float64) {
	x = x[:len(y)]
	for i := range y {
		y[i] += a * x[i]
	}
}

func scaleBy(y []float64, a float64) {
	for i := range y {
		y[i] *= a
	}
}
