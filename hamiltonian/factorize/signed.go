package factorize

import (
	"cmp"
	"context"
	"errors"
	"fmt"
	"math"
	"slices"

	"gonum.org/v1/gonum/mat"

	"leadline/hamiltonian"
)

// EigenLimit is the largest number of orbital pairs with a non-zero integral that
// [Eigen] diagonalises: all pairs of 56 orbitals, or the sites of a lattice of
// 1600, in about 10 seconds and 100 MB.
const EigenLimit = 1600

// Signed returns factors of either sign for the integrals of any V. It tries, in
// this order, the Cholesky factorisation of V (all s = +1), that of −V (all
// s = −1: attractive models) and the eigen decomposition of [Eigen], and takes
// the first whose error, measured on every element by [LargestError], is within
// tolerance or the rounding of the input. It returns that error as residual.
func Signed(ctx context.Context, v Matrix, tolerance float64) (f *hamiltonian.Factors, residual float64, err error) {
	var reason error
	for _, sign := range []float64{1, -1} {
		w := v
		if sign < 0 {
			w = negative{v}
		}
		f, bound, err := Cholesky(ctx, w, tolerance)
		if indefinite := (*IndefiniteError)(nil); errors.As(err, &indefinite) {
			if sign > 0 {
				reason = err
			}
			continue
		}
		if err != nil {
			return nil, 0, err
		}
		for g := range f.Sign {
			f.Sign[g] = sign
		}
		residual, err := LargestError(ctx, v, f)
		if err != nil {
			return nil, 0, err
		}
		// Where the rest is positive semidefinite its largest element is on the
		// diagonal; rounding of the input may double it.
		if residual <= 2*max(bound, tolerance) {
			return f, residual, nil
		}
		if sign > 0 {
			reason = fmt.Errorf("two-electron integrals are not positive semidefinite: the Cholesky factorisation leaves %.3g off the diagonal against %.3g on it", residual, bound)
		}
	}
	f, residual, err = Eigen(ctx, v, tolerance)
	if limit := (*sizeError)(nil); errors.As(err, &limit) {
		return nil, 0, fmt.Errorf("%w; %w", reason, err)
	}
	return f, residual, err
}

type sizeError struct{ pairs int }

func (e *sizeError) Error() string {
	return fmt.Sprintf("indefinite integrals are diagonalised for at most %d orbital pairs that have integrals, found %d", EigenLimit, e.pairs)
}

// Eigen returns factors L^g = √|λ_g| u_g, s_g = sign λ_g, from the eigenvectors of
// V as a matrix over all M² ordered pairs, whose antisymmetric half vanishes. The
// least |λ| are left out as long as the bound
//
//	|R_ij| ≤ √(B_i B_j),   B_i = Σ_{g left out} |λ_g| u_gi²
//
// on the rest stays within tolerance; residual is the largest B_i. Pairs without
// any integral are taken out first, and more than [EigenLimit] others refused.
// Costs about 10·n³ flops and 3·n² numbers.
func Eigen(ctx context.Context, v Matrix, tolerance float64) (f *hamiltonian.Factors, residual float64, err error) {
	n := v.Dim()
	m := orbitals(n)
	column := make([]float64, n)
	var pairs []int
	for i := range n {
		v.Column(i, column)
		largest := 0.0
		for _, x := range column {
			largest = math.Max(largest, math.Abs(x)) // keeps NaN
		}
		if !(largest <= overflow) {
			return nil, 0, errOverflow
		}
		if largest > 0 {
			pairs = append(pairs, i)
		}
		if err := ctx.Err(); err != nil {
			return nil, 0, err
		}
	}
	if len(pairs) > EigenLimit {
		return nil, 0, &sizeError{len(pairs)}
	}
	if len(pairs) == 0 {
		return hamiltonian.NewFactors(m, 0), 0, nil
	}
	// A pair p ≠ q stands for two ordered ones: its row gets the weight √2.
	weight := make([]float64, n)
	for p := range m {
		for q := range p {
			weight[hamiltonian.Pair(p, q)] = math.Sqrt2
		}
		weight[hamiltonian.Pair(p, p)] = 1
	}
	square := mat.NewSymDense(len(pairs), nil)
	for i, pi := range pairs {
		v.Column(pi, column)
		for j, pj := range pairs[:i+1] {
			square.SetSym(i, j, weight[pi]*weight[pj]*column[pj])
		}
	}
	var eigen mat.EigenSym
	if !eigen.Factorize(square, true) {
		return nil, 0, fmt.Errorf("diagonalisation of the two-electron integrals over %d orbital pairs did not converge", len(pairs))
	}
	var vectors mat.Dense
	eigen.VectorsTo(&vectors)
	values := eigen.Values(nil)
	order := make([]int, len(values))
	for g := range order {
		order[g] = g
	}
	slices.SortStableFunc(order, func(a, b int) int {
		return cmp.Compare(math.Abs(values[b]), math.Abs(values[a]))
	})

	bound := make([]float64, len(pairs))
	for ; len(order) > 0; order = order[:len(order)-1] {
		g, largest := order[len(order)-1], 0.0
		for i, p := range pairs {
			u := vectors.At(i, g) / weight[p]
			largest = max(largest, bound[i]+math.Abs(values[g])*u*u)
		}
		if largest > tolerance {
			break
		}
		for i, p := range pairs {
			u := vectors.At(i, g) / weight[p]
			bound[i] += math.Abs(values[g]) * u * u
		}
		residual = largest
	}
	packed, sign := make([]float64, len(order)*n), make([]float64, len(order))
	for a, g := range order {
		sign[a] = math.Copysign(1, values[g])
		root := math.Sqrt(math.Abs(values[g]))
		for i, p := range pairs {
			packed[a*n+p] = root * vectors.At(i, g) / weight[p]
		}
	}
	return newFactors(packed, sign), residual, nil
}
