package linalg

import (
	"math"
	"math/cmplx"
	"math/rand/v2"
	"testing"
)

func gaussian(rng *rand.Rand, n int) []float64 {
	x := make([]float64, n)
	for i := range x {
		x[i] = rng.NormFloat64()
	}
	return x
}

func block(n, w int, a []float64) (re, im []float64) {
	a = a[w*2*n*n : (w+1)*2*n*n]
	return a[:n*n], a[n*n:]
}

// leibniz is the determinant as the sum over permutations, by expansion along
// the first row.
func leibniz(n int, at func(i, j int) complex128) complex128 {
	var expand func(row int, used uint) complex128
	expand = func(row int, used uint) complex128 {
		if row == n {
			return 1
		}
		var sum complex128
		sign := complex128(1)
		for j := range n {
			if used&(1<<j) != 0 {
				continue
			}
			sum += sign * at(row, j) * expand(row+1, used|1<<j)
			sign = -sign
		}
		return sum
	}
	return expand(0, 0)
}

// matchings is the Pfaffian as the sum over perfect matchings.
func matchings(indices []int, at func(i, j int) complex128) complex128 {
	if len(indices) == 0 {
		return 1
	}
	var sum complex128
	sign := complex128(1)
	for k := 1; k < len(indices); k++ {
		rest := append(append([]int(nil), indices[1:k]...), indices[k+1:]...)
		sum += sign * at(indices[0], indices[k]) * matchings(rest, at)
		sign = -sign
	}
	return sum
}

func TestInvertBatch(t *testing.T) { eachTier(t, testInvertBatch) }

func testInvertBatch(t *testing.T, _ tier) {
	rng := rand.New(rand.NewPCG(1, 1))
	for _, count := range []int{1, 3, 8, 19} {
		for n := range 34 {
			a := gaussian(rng, count*2*n*n)
			inverse := append([]float64(nil), a...)
			scratch := append([]float64(nil), a...)
			logAbs, phase := make([]float64, count), make([]complex128, count)
			InvertBatch(n, count, inverse, logAbs, phase)
			logOnly, phaseOnly := make([]float64, count), make([]complex128, count)
			LogDetBatch(n, count, scratch, logOnly, phaseOnly)
			for w := range count {
				are, aim := block(n, w, a)
				bre, bim := block(n, w, inverse)
				var norm float64
				for i := range bre {
					norm = max(norm, math.Abs(bre[i]), math.Abs(bim[i]))
				}
				for i := range n {
					for j := range n {
						var sum complex128
						for k := range n {
							sum += complex(are[i*n+k], aim[i*n+k]) * complex(bre[k*n+j], bim[k*n+j])
						}
						if i == j {
							sum--
						}
						if cmplx.Abs(sum) > 1e-13*float64(n)*max(norm, 1) {
							t.Fatalf("n=%d w=%d: A·A⁻¹ − 1 is %v at (%d,%d)", n, w, sum, i, j)
						}
					}
				}
				if math.Abs(logAbs[w]-logOnly[w]) > 1e-11 || cmplx.Abs(phase[w]-phaseOnly[w]) > 1e-11 {
					t.Fatalf("n=%d: determinant with the inverse %v %v, alone %v %v", n, logAbs[w], phase[w], logOnly[w], phaseOnly[w])
				}
				if n <= 6 {
					want := leibniz(n, func(i, j int) complex128 { return complex(are[i*n+j], aim[i*n+j]) })
					got := phase[w] * complex(math.Exp(logAbs[w]), 0)
					if cmplx.Abs(got-want) > 1e-12*(1+cmplx.Abs(want)) {
						t.Fatalf("n=%d: determinant %v, expected %v", n, got, want)
					}
				}
			}
		}
	}
}

// TestInvertBatchSameBits: a matrix fares the same alone and in any batch, and on
// every tier with kernels.
func TestInvertBatchSameBits(t *testing.T) {
	if len(tiers()) == 1 {
		t.Skip("no kernels on this processor")
	}
	defer func(was tier) { active = was }(active)
	rng := rand.New(rand.NewPCG(2, 2))
	for n := range laneLimit + 3 {
		const count = 21
		size := 2 * n * n
		a := gaussian(rng, count*size)
		run := func(from, to int) (inverse, logAbs []float64, phase []complex128) {
			inverse = append([]float64(nil), a[from*size:to*size]...)
			logAbs, phase = make([]float64, 2*(to-from)), make([]complex128, 2*(to-from))
			InvertBatch(n, to-from, inverse, logAbs, phase)
			LogDetBatch(n, to-from, append([]float64(nil), a[from*size:to*size]...), logAbs[to-from:], phase[to-from:])
			return inverse, logAbs, phase
		}
		active = tiers()[1]
		want, wantLog, wantPhase := run(0, count)
		for _, active = range tiers()[1:] {
			for _, cut := range [][2]int{{0, count}, {0, 1}, {3, 4}, {2, 12}, {5, 13}} {
				from, to := cut[0], cut[1]
				got, gotLog, gotPhase := run(from, to)
				for i, x := range got {
					if x != want[from*size+i] {
						t.Fatalf("%v n=%d: element %d of matrices %v is %v, in the batch of all %v", active, n, i, cut, x, want[from*size+i])
					}
				}
				for i := range to - from {
					for half := range 2 {
						x, y := half*(to-from)+i, half*count+from+i
						if gotLog[x] != wantLog[y] || gotPhase[x] != wantPhase[y] {
							t.Fatalf("%v n=%d: determinant of matrix %d in %v differs", active, n, i, cut)
						}
					}
				}
			}
		}
	}
}

func TestInvertBatchSingular(t *testing.T) { eachTier(t, testInvertBatchSingular) }

func testInvertBatchSingular(t *testing.T, _ tier) {
	// Row 3 is half of row 1 and all pivots are powers of two: every step is exact.
	singular := []float64{4, 2, 8, 0, 2, 6, 2, 1, 4, 0, 4, 0, 0, 0, 1, 0, 2, 0}
	rng := rand.New(rand.NewPCG(2, 3))
	for _, count := range []int{1, 9} {
		a := gaussian(rng, 18*count)
		at := min(3, count-1)
		copy(a[18*at:], singular)
		b := append([]float64(nil), a...)
		logAbs, phase := make([]float64, count), make([]complex128, count)
		InvertBatch(3, count, a, logAbs, phase)
		for w := range count {
			if zero := math.IsInf(logAbs[w], -1) && phase[w] == 0; zero != (w == at) {
				t.Errorf("inverse %d of %d: log|det| %v, phase %v", w, count, logAbs[w], phase[w])
			}
			for _, v := range a[18*w : 18*w+18] {
				if (v == 0) != (w == at) || math.IsNaN(v) {
					t.Fatalf("%v in inverse %d of %d, matrix %d is singular", v, w, count, at)
				}
			}
		}
		LogDetBatch(3, count, b, logAbs, phase)
		for w := range count {
			if zero := math.IsInf(logAbs[w], -1) && phase[w] == 0; zero != (w == at) {
				t.Errorf("determinant %d of %d: log|det| %v, phase %v", w, count, logAbs[w], phase[w])
			}
		}
	}
}

// TestLogDetBatchRange: determinants far outside of the range of float64.
func TestLogDetBatchRange(t *testing.T) {
	eachTier(t, func(t *testing.T, _ tier) {
		for _, scale := range []float64{1e-150, 1e150, 1e-300, 1e300} {
			const n, count = 12, 9
			a := make([]float64, count*2*n*n)
			for w := range count {
				for i := range n {
					a[w*2*n*n+n*n+i*n+i] = scale // i·scale on the diagonal, i¹² = 1
				}
			}
			logAbs, phase := make([]float64, count), make([]complex128, count)
			InvertBatch(n, count, append([]float64(nil), a...), logAbs, phase)
			for range 2 {
				for w := range count {
					if want := n * math.Log(scale); math.Abs(logAbs[w]-want) > 1e-15*math.Abs(want) || phase[w] != 1 {
						t.Fatalf("scale %g, matrix %d: %v %v, expected %v", scale, w, logAbs[w], phase[w], want)
					}
				}
				LogDetBatch(n, count, a, logAbs, phase)
			}
		}
	})
}

func TestInvertBatchNaN(t *testing.T) { eachTier(t, testInvertBatchNaN) }

func testInvertBatchNaN(t *testing.T, _ tier) {
	rng := rand.New(rand.NewPCG(2, 1))
	const n, count = 4, 9
	for _, bad := range []float64{math.NaN(), math.Inf(1)} {
		clean := gaussian(rng, count*2*n*n)
		dirty := append([]float64(nil), clean...)
		dirty[5*2*n*n+7] = bad
		cl, cp := make([]float64, count), make([]complex128, count)
		dl, dp := make([]float64, count), make([]complex128, count)
		InvertBatch(n, count, clean, cl, cp)
		InvertBatch(n, count, dirty, dl, dp)
		for w := range count {
			if w == 5 {
				if !math.IsNaN(dl[w]) || !cmplx.IsNaN(dp[w]) {
					t.Errorf("matrix with %v: log|det| %v, phase %v", bad, dl[w], dp[w])
				}
			} else if dl[w] != cl[w] || dp[w] != cp[w] {
				t.Errorf("matrix %d changed with a %v in another one", w, bad)
			}
		}
	}
}

func TestPfaffian(t *testing.T) { eachTier(t, testPfaffian) }

func testPfaffian(t *testing.T, _ tier) {
	rng := rand.New(rand.NewPCG(4, 1))
	for n := range 25 {
		re, im := gaussian(rng, n*n), gaussian(rng, n*n)
		for i := range n {
			re[i*n+i], im[i*n+i] = 0, 0
			for j := range i {
				re[i*n+j], im[i*n+j] = -re[j*n+i], -im[j*n+i]
			}
		}
		a := append(append([]float64(nil), re...), im...)
		logAbs, phase := Pfaffian(n, append([]float64(nil), re...), append([]float64(nil), im...))
		if n%2 == 1 {
			if !math.IsInf(logAbs, -1) || phase != 0 {
				t.Errorf("n=%d: %v %v, expected zero", n, logAbs, phase)
			}
			continue
		}
		if n <= 10 {
			indices := make([]int, n)
			for i := range indices {
				indices[i] = i
			}
			want := matchings(indices, func(i, j int) complex128 { return complex(re[i*n+j], im[i*n+j]) })
			got := phase * complex(math.Exp(logAbs), 0)
			if cmplx.Abs(got-want) > 1e-12*cmplx.Abs(want) {
				t.Errorf("n=%d: %v, expected %v", n, got, want)
			}
		}
		l, p := make([]float64, 1), make([]complex128, 1)
		LogDetBatch(n, 1, a, l, p) // pf² = det
		if math.Abs(2*logAbs-l[0]) > 1e-11 || cmplx.Abs(phase*phase-p[0]) > 1e-11 {
			t.Errorf("n=%d: squared Pfaffian %v %v, determinant %v %v", n, 2*logAbs, phase*phase, l[0], p[0])
		}
	}
	if logAbs, phase := Pfaffian(4, make([]float64, 16), make([]float64, 16)); !math.IsInf(logAbs, -1) || phase != 0 {
		t.Errorf("zero matrix: %v %v", logAbs, phase)
	}
}
