package statistics

import (
	"math"
	"math/rand/v2"
	"testing"

	"gonum.org/v1/gonum/stat"
)

// autoregressive returns x_i = ρ x_{i−1} + √(1−ρ²) ξ_i, whose variance is 1 and
// whose autocorrelation time ½ + Σρ^k is (1+ρ)/(2(1−ρ)).
func autoregressive(n int, rho float64, rng *rand.Rand) []float64 {
	x := make([]float64, n)
	x[0] = rng.NormFloat64()
	for i := 1; i < n; i++ {
		x[i] = rho*x[i-1] + math.Sqrt(1-rho*rho)*rng.NormFloat64()
	}
	return x
}

// TestErrorOfCorrelatedMean compares both errors with the exact one,
// √(2τ/n), over 40 series: their mean must lie within 5 %, where their own
// scatter of about 10 % leaves 1.6 % of standard error.
func TestErrorOfCorrelatedMean(t *testing.T) {
	const n, series = 20000, 40
	for _, rho := range []float64{0, 0.5, 0.9, 0.97} {
		rng := rand.New(rand.NewPCG(1, 2))
		exact := math.Sqrt((1 + rho) / (1 - rho) / n)
		var blocked, correlated, tau []float64
		for range series {
			e := Mean(autoregressive(n, rho, rng))
			blocked = append(blocked, e.Blocked/exact)
			correlated = append(correlated, e.Correlated/exact)
			tau = append(tau, e.Autocorrelation)
			if e.TooShort() {
				t.Errorf("ρ = %g: %d rows called too short", rho, n)
			}
		}
		b, c := stat.Mean(blocked, nil), stat.Mean(correlated, nil)
		if math.Abs(b-1) > 0.05 || math.Abs(c-1) > 0.05 {
			t.Errorf("ρ = %g: error over exact error %.3f (blocking), %.3f (autocorrelation), expected 1 ± 0.05", rho, b, c)
		}
		if want := (1 + rho) / (1 - rho) / 2; math.Abs(stat.Mean(tau, nil)/want-1) > 0.06 {
			t.Errorf("ρ = %g: autocorrelation time %.3f, expected %.3f", rho, stat.Mean(tau, nil), want)
		}
	}
}

// TestTooShort: a series of five autocorrelation times must say so.
func TestTooShort(t *testing.T) {
	rng := rand.New(rand.NewPCG(3, 4))
	said := 0
	for range 20 {
		if Mean(autoregressive(200, 0.95, rng)).TooShort() {
			said++
		}
	}
	if said < 16 {
		t.Errorf("%d of 20 short series were called too short, expected at least 16", said)
	}
}

// TestRatio checks the linearised error against the spread of 400 ratios of
// sums with correlated numerator and denominator.
func TestRatio(t *testing.T) {
	rng := rand.New(rand.NewPCG(5, 6))
	var ratios, errors []float64
	for range 400 {
		num, den := make([]float64, 500), make([]float64, 500)
		for i := range num {
			den[i] = 1 + 0.3*rng.NormFloat64()
			num[i] = -2*den[i] + 0.1*rng.NormFloat64()
		}
		e := Ratio(num, den)
		ratios = append(ratios, e.Mean)
		errors = append(errors, e.Error)
	}
	if m := stat.Mean(ratios, nil); math.Abs(m+2) > 1e-3 {
		t.Errorf("mean ratio %.5f, expected −2", m)
	}
	// Quoting the larger of two errors is a little pessimistic.
	if r := stat.StdDev(ratios, nil) / stat.Mean(errors, nil); r < 0.85 || r > 1.1 {
		t.Errorf("spread over quoted error %.3f, expected 0.85 to 1.1", r)
	}
}

func TestTruncation(t *testing.T) {
	rng := rand.New(rand.NewPCG(7, 8))
	x := autoregressive(1000, 0.3, rng)
	if d := Truncation(x); d > 300 {
		t.Errorf("stationary series cut at %d of 1000", d)
	}
	for i := range 150 {
		x[i] += 8 * math.Exp(-float64(i)/30)
	}
	if d := Truncation(x); d < 40 || d > 500 {
		t.Errorf("series that drifts by more than its spread over 60 rows cut at %d", d)
	}
}

// TestTail: samples with P(|x| > u) = u^−α have Hill exponent α; 200 tail samples
// scatter by α/√200 = 7 %.
func TestTail(t *testing.T) {
	rng := rand.New(rand.NewPCG(9, 10))
	for _, alpha := range []float64{2, 3, 5} {
		x := make([]float64, 100000)
		for i := range x {
			// Half of the samples at the median, the others on either side of it.
			if side := rng.IntN(4); side < 2 {
				x[i] = float64(2*side-1) * math.Pow(rng.Float64(), -1/alpha)
			}
		}
		if s := Describe(x); math.Abs(s.Hill/alpha-1) > 0.25 {
			t.Errorf("tail exponent %.2f, expected %.2f", s.Hill, alpha)
		}
	}
	x := make([]float64, 100000)
	for i := range x {
		x[i] = rng.NormFloat64()
	}
	s := Describe(x)
	if math.Abs(s.Ratio-1) > 0.02 || math.Abs(s.Deviation-1) > 0.02 {
		t.Errorf("normal deviates: deviation %.3f, ratio %.3f, expected 1", s.Deviation, s.Ratio)
	}
}
