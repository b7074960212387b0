package statistics

import (
	"math"
	"slices"

	"gonum.org/v1/gonum/stat"
)

// Spread describes a distribution and its tails.
type Spread struct {
	// Samples is their number, Deviation the standard deviation.
	Samples   int
	Deviation float64
	// Ratio is the standard deviation over 1.4826 times the median absolute
	// deviation: 1 for a normal distribution, larger for heavy tails.
	Ratio float64
	// Hill is the exponent α of a tail P(|x − median| > u) ~ u^−α, from the
	// farthest 0.2 % of the samples: the variance of the mean does not exist for
	// α ≤ 2. NaN for too few samples.
	Hill float64
	// Largest is the largest |x − median| over the standard deviation.
	Largest float64
}

const (
	// TailFraction is the share of samples that the tail exponent is taken from.
	TailFraction = 0.002
	tailMinimum  = 20 // samples in the tail
	normalMAD    = 1.4826
)

// Describe returns the spread of samples, which it reorders.
func Describe(x []float64) Spread {
	s := Spread{Samples: len(x), Deviation: math.NaN(), Ratio: math.NaN(), Hill: math.NaN(), Largest: math.NaN()}
	if len(x) < 3 {
		return s
	}
	s.Deviation = stat.StdDev(x, nil)
	slices.Sort(x)
	median := stat.Quantile(0.5, stat.Empirical, x, nil)
	for i, v := range x {
		x[i] = math.Abs(v - median)
	}
	slices.Sort(x)
	mad := stat.Quantile(0.5, stat.Empirical, x, nil)
	if mad > 0 {
		s.Ratio = s.Deviation / (normalMAD * mad)
	}
	if s.Deviation > 0 {
		s.Largest = x[len(x)-1] / s.Deviation
	}
	k := int(TailFraction * float64(len(x)))
	if k < tailMinimum || x[len(x)-k-1] == 0 {
		return s
	}
	sum := 0.0
	for _, v := range x[len(x)-k:] {
		sum += math.Log(v / x[len(x)-k-1])
	}
	s.Hill = float64(k) / sum
	return s
}
