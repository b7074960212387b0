package integral

import (
	"fmt"
	"math"
	"math/big"
	"testing"
)

// bigBoys returns F_n(x) from F_n = e^{−x} Σ_k (2x)^k/((2n+1)(2n+3)…(2n+2k+1)) in
// arithmetic of 500 bits.
func bigBoys(n int, x float64) float64 {
	const bits = 500
	number := func(v float64) *big.Float { return new(big.Float).SetPrec(bits).SetFloat64(v) }
	small := new(big.Float).SetMantExp(number(1), -bits)
	// e^x by its series.
	exp, term := number(1), number(1)
	for k := 1; term.Cmp(small) > 0; k++ {
		term.Mul(term, number(x))
		term.Quo(term, number(float64(k)))
		exp.Add(exp, term)
	}
	term = new(big.Float).SetPrec(bits).Quo(number(1), number(float64(2*n+1)))
	sum := new(big.Float).Copy(term)
	for k := 1; term.Cmp(small) > 0; k++ {
		term.Mul(term, number(2*x))
		term.Quo(term, number(float64(2*n+2*k+1)))
		sum.Add(sum, term)
	}
	v, _ := sum.Quo(sum, exp).Float64()
	return v
}

// The Boys function to a relative error of 1e-14, all orders at once, on both
// sides of every seam: grid points, midpoints, end of the grid.
func TestBoys(t *testing.T) {
	points := []float64{0, 1e-300, 1e-16, 1e-8, 1e-3, 0.0624, 0.0625, 0.0626, 47.93, 47.94, 47.99999, 48, 48.0001, 50, 60, 75, 100, 150}
	for x := 0.013; x < 49; x += 0.87 {
		points = append(points, x)
	}
	worst := 0.0
	table := boysTable()
	for _, x := range points {
		for _, top := range []int{0, 1, 4, boysOrder - 1} {
			got := make([]float64, 2*(top+1))
			table.fill(got, 2, top, x)
			for n := 0; n <= top; n++ {
				want := bigBoys(n, x)
				e := math.Abs(got[2*n]/want - 1)
				worst = max(worst, e)
				if !(e < 1e-14) {
					t.Errorf("F_%d(%v) of %d orders is %.17g, expected %.17g: relative error %.1e", n, x, top+1, got[2*n], want, e)
				}
			}
		}
	}
	t.Logf("largest relative error %.1e", worst)
}

// Far out F_n(x) = (2n−1)!!/2^{n+1} √(π/x^{2n+1}).
func TestBoysFarOut(t *testing.T) {
	table := boysTable()
	for _, x := range []float64{200, 1e3, 1e6, 1e9, 1e12} {
		got := make([]float64, 9)
		table.fill(got, 1, 8, x)
		for n, v := range got {
			want := factorial2(2*n-1) / math.Pow(2, float64(n+1)) * math.Sqrt(math.Pi/x) / math.Pow(x, float64(n))
			if !(math.Abs(v/want-1) < 1e-14) {
				t.Errorf("F_%d(%v) is %v, expected %v", n, x, v, want)
			}
		}
	}
}

func BenchmarkBoys(b *testing.B) {
	table := boysTable()
	dst := make([]float64, boysOrder)
	for _, n := range []int{0, 4, 8, 16} {
		b.Run(fmt.Sprintf("n=%d", n), func(b *testing.B) {
			for i := range b.N {
				table.fill(dst, 1, n, 0.001*float64(i%50000))
			}
		})
	}
}
