package lanes

import (
	"math"
	"math/cmplx"
	"math/rand/v2"
	"slices"
	"testing"

	"leadline/hamiltonian/linalg"
)

// tiers returns the kernel tiers that this process can test.
func tiers() []string {
	all := []string{"gonum", "avx2", "avx512"}
	return all[:1+slices.Index(all, linalg.Kernel())]
}

func eachTier(t *testing.T, f func(t *testing.T)) {
	defer func(old string) { tier = old }(tier)
	for _, tier = range tiers() {
		t.Run(tier, f)
	}
}

func at(x []float64, i, lane int) complex128 {
	return complex(x[i*Size+lane], x[i*Size+Width+lane])
}

func gauss(n int, rng *rand.Rand) []float64 {
	x := make([]float64, n*Size)
	for k := range x {
		x[k] = rng.NormFloat64()
	}
	return x
}

// lengths of the outputs' lists, empty ones among them.
var lengths = []int{3, 0, 1, 7, 2, 0, 30, 1}

func TestMultiply(t *testing.T) {
	eachTier(t, func(t *testing.T) {
		rng := rand.New(rand.NewPCG(1, 2))
		const na, nb = 9, 13
		a, b := gauss(na, rng), gauss(nb, rng)
		type pair struct {
			i, j  int
			minus bool
		}
		var terms Terms
		terms.Reset()
		var pairs [][]pair
		for _, n := range lengths {
			var list []pair
			for range n {
				p := pair{rng.IntN(na), rng.IntN(nb), rng.IntN(2) == 1}
				list = append(list, p)
				terms.List = append(terms.List, NewTerm(p.i, p.j, p.minus))
			}
			pairs = append(pairs, list)
			terms.End()
		}
		for _, keep := range []bool{false, true} {
			out := gauss(len(lengths)+1, rng)
			before := slices.Clone(out)
			terms.Multiply(out, a, b, keep)
			for o, list := range pairs {
				for lane := range Width {
					var want complex128
					if keep {
						want = at(before, o, lane)
					}
					for _, p := range list {
						v := at(a, p.i, lane) * at(b, p.j, lane)
						if p.minus {
							v = -v
						}
						want += v
					}
					if d := cmplx.Abs(at(out, o, lane) - want); !(d < 1e-13) {
						t.Errorf("keep %v, output %d, lane %d: off by %g", keep, o, lane, d)
					}
				}
			}
			if !slices.Equal(out[len(lengths)*Size:], before[len(lengths)*Size:]) {
				t.Error("written beyond the outputs")
			}
		}
	})
}

func TestCombine(t *testing.T) {
	for _, isReal := range []bool{false, true} {
		eachTier(t, func(t *testing.T) { testCombine(t, isReal) })
	}
}

func testCombine(t *testing.T, isReal bool) {
	rng := rand.New(rand.NewPCG(3, 4))
	const nb = 13
	b := gauss(nb, rng)
	weights := Weights{Start: []int32{0}, Real: isReal}
	var numbers [][]int
	var values [][]complex128
	for _, n := range lengths {
		var is []int
		var vs []complex128
		for range n {
			i, v := rng.IntN(nb), complex(rng.NormFloat64(), rng.NormFloat64())
			if isReal {
				v = complex(real(v), 0)
			}
			is, vs = append(is, i), append(vs, v)
			weights.List = append(weights.List, NewWeight(i, v))
		}
		numbers, values = append(numbers, is), append(values, vs)
		weights.Start = append(weights.Start, int32(len(weights.List)))
	}
	out := gauss(len(lengths)+1, rng)
	before := slices.Clone(out)
	weights.Combine(out, b)
	for o, is := range numbers {
		for lane := range Width {
			var want complex128
			for k, i := range is {
				want += values[o][k] * at(b, i, lane)
			}
			if d := cmplx.Abs(at(out, o, lane) - want); !(d < 1e-13) {
				t.Errorf("output %d, lane %d: off by %g", o, lane, d)
			}
		}
	}
	if !slices.Equal(out[len(lengths)*Size:], before[len(lengths)*Size:]) {
		t.Error("written beyond the outputs")
	}
}

// Lists without any entry, and NaN in one lane, which stays there.
func TestEdges(t *testing.T) {
	eachTier(t, func(t *testing.T) {
		out := gauss(2, rand.New(rand.NewPCG(5, 6)))
		before := slices.Clone(out)
		(&Terms{Start: []int32{0, 0, 0}}).Multiply(out, nil, nil, true)
		if !slices.Equal(out, before) {
			t.Error("an empty sum changed what was kept")
		}
		(&Terms{Start: []int32{0, 0, 0}}).Multiply(out, nil, nil, false)
		if slices.ContainsFunc(out, func(v float64) bool { return v != 0 }) {
			t.Error("an empty sum is not zero")
		}
		(&Terms{}).Multiply(nil, nil, nil, false)
		(&Weights{}).Combine(nil, nil)

		x := gauss(1, rand.New(rand.NewPCG(7, 8)))
		x[3] = math.NaN()
		terms := Terms{Start: []int32{0, 1}, List: []Term{NewTerm(0, 0, true)}}
		terms.Multiply(out, x, x, false)
		for lane := range Width {
			if got := cmplx.IsNaN(at(out, 0, lane)); got != (lane == 3) {
				t.Errorf("lane %d: NaN is %v", lane, got)
			}
		}
	})
}

// Both kernel tiers give the same bits.
func TestTiersAgree(t *testing.T) {
	if len(tiers()) < 3 {
		t.Skip("needs AVX-512")
	}
	defer func(old string) { tier = old }(tier)
	rng := rand.New(rand.NewPCG(9, 10))
	a, b := gauss(20, rng), gauss(20, rng)
	terms, weights := Terms{Start: []int32{0, 40, 100}}, Weights{Start: []int32{0, 40, 100}}
	for range 100 {
		terms.List = append(terms.List, NewTerm(rng.IntN(20), rng.IntN(20), rng.IntN(2) == 1))
		weights.List = append(weights.List, NewWeight(rng.IntN(20), complex(rng.NormFloat64(), rng.NormFloat64())))
	}
	var results [2][]float64
	for k := range results {
		tier = []string{"avx2", "avx512"}[k]
		one, two := gauss(2, rand.New(rand.NewPCG(1, 1))), make([]float64, 2*Size)
		terms.Multiply(one, a, b, true)
		weights.Combine(two, b)
		results[k] = append(one, two...)
	}
	if !slices.Equal(results[0], results[1]) {
		t.Error("avx2 and avx512 differ")
	}
}

func BenchmarkMultiply(b *testing.B) {
	rng := rand.New(rand.NewPCG(1, 2))
	x, y := gauss(200, rng), gauss(200, rng)
	var terms Terms
	terms.Reset()
	for range 1000 {
		for range 4 {
			terms.List = append(terms.List, NewTerm(rng.IntN(200), rng.IntN(200), rng.IntN(2) == 1))
		}
		terms.End()
	}
	out := make([]float64, 1000*Size)
	for b.Loop() {
		terms.Multiply(out, x, y, false)
	}
	b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(b.N)/4000/Width, "ns/product")
}
