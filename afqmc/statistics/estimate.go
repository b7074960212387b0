// Package statistics turns correlated series into means with honest errors.
//
// Sources: blocking, Flyvbjerg & Petersen, J. Chem. Phys. 91, 461 (1989); the
// rule for the block length, Lee et al., Phys. Rev. E 83, 066706 (2011);
// self-consistent window, Madras & Sokal, J. Stat. Phys. 50, 109 (1988), with the
// correction of Wolff, Comput. Phys. Commun. 156, 143 (2004); truncation rule, White, Simulation 69, 323 (1997); tail index, Hill, Ann.
// Stat. 3, 1163 (1975) (all from memory).
package statistics

import (
	"math"

	"gonum.org/v1/gonum/floats"
	"gonum.org/v1/gonum/stat"
)

// Estimate is the mean of a correlated series with its standard error.
type Estimate struct {
	Mean float64
	// Error is one standard error: the larger of Blocked and Correlated.
	Error float64
	// Blocked is the error from blocks of the length that the rule chooses, and
	// Block that length in rows; Settled is false where no length satisfies it.
	Blocked float64
	Block   int
	Settled bool
	// Correlated is the error from the autocorrelation time.
	Correlated float64
	// Autocorrelation is τ = ½ + Σρ, in rows.
	Autocorrelation float64
	// Rows is the number of rows used.
	Rows int
}

// minimalIndependent is the number of autocorrelation times that a series must
// span for its error to mean anything (common practice).
const minimalIndependent = 20

// TooShort reports whether the series is too short for its error to be trusted:
// fewer than twenty independent samples, or no settled block length.
func (e Estimate) TooShort() bool {
	return !e.Settled || float64(e.Rows) < minimalIndependent*2*e.Autocorrelation
}

// Ratio estimates Σ num/Σ den for two correlated series of the same length,
// from the linearised residuals r_i = (num_i − E den_i)/mean(den).
func Ratio(num, den []float64) Estimate {
	if len(num) != len(den) {
		panic("statistics: numerator and denominator differ in length")
	}
	n := len(num)
	mean := floats.Sum(num) / floats.Sum(den)
	scale := floats.Sum(den) / float64(n)
	residuals := make([]float64, n)
	for i := range residuals {
		residuals[i] = (num[i] - mean*den[i]) / scale
	}
	e := Mean(residuals)
	e.Mean = mean
	return e
}

// Mean estimates the mean of a correlated series.
func Mean(x []float64) Estimate {
	e := Estimate{Mean: math.NaN(), Error: math.Inf(1), Rows: len(x), Block: 1, Autocorrelation: 0.5}
	if len(x) == 0 {
		return e
	}
	e.Mean = stat.Mean(x, nil)
	if len(x) < 2 {
		return e
	}
	e.block(x)
	e.correlate(x)
	e.Error = max(e.Blocked, e.Correlated)
	return e
}

// block chooses the first block length b, among powers of two, with
// b³ > 2n (err_b/err_1)⁴; without one, the largest error of any length stands.
func (e *Estimate) block(x []float64) {
	n := float64(len(x))
	var first, largest float64
	for b := 1; len(x)/b >= 2; b *= 2 {
		err := blockError(x, b)
		if b == 1 {
			first = err
		}
		if first == 0 {
			e.Settled = true // a constant series has no error
			return
		}
		if err > largest {
			largest, e.Block = err, b
		}
		if math.Pow(float64(b), 3) > 2*n*math.Pow(err/first, 4) {
			e.Blocked, e.Block, e.Settled = err, b, true
			return
		}
	}
	e.Blocked = largest
}

// blockError returns the standard error of the mean from blocks of b rows; rows
// that do not fill a block at the start are left out.
func blockError(x []float64, b int) float64 {
	blocks := len(x) / b
	x = x[len(x)-blocks*b:]
	means := make([]float64, blocks)
	for k := range means {
		means[k] = stat.Mean(x[k*b:(k+1)*b], nil)
	}
	return stat.StdDev(means, nil) / math.Sqrt(float64(blocks))
}

// correlate sums the autocorrelation function over the smallest window
// W ≥ 5τ(W), and corrects τ for the bias of the estimated mean.
func (e *Estimate) correlate(x []float64) {
	n := len(x)
	mean := stat.Mean(x, nil)
	variance := 0.0
	for _, v := range x {
		variance += (v - mean) * (v - mean)
	}
	if variance == 0 {
		return
	}
	tau := 0.5
	for lag := 1; lag < n/2 && float64(lag) < 5*tau+1; lag++ {
		sum := 0.0
		for i := range n - lag {
			sum += (x[i] - mean) * (x[i+lag] - mean)
		}
		tau += sum / variance * float64(n) / float64(n-lag)
		tau = max(tau, 0.5)
		e.Autocorrelation = tau * (1 + (2*float64(lag)+1)/float64(n))
	}
	e.Autocorrelation = max(e.Autocorrelation, 0.5)
	e.Correlated = math.Sqrt(variance / float64(n-1) * 2 * e.Autocorrelation / float64(n))
}

// Truncation returns how many rows at the start of a series to leave out so
// that the standard error of the rest is smallest, at most half of them.
func Truncation(x []float64) int {
	n := len(x)
	best, at := math.Inf(1), 0
	// Running sums from the end give every tail's variance.
	var sum, square float64
	for d := n - 1; d >= 0; d-- {
		sum += x[d] - x[n-1]
		square += (x[d] - x[n-1]) * (x[d] - x[n-1])
		count := float64(n - d)
		if d > n/2 {
			continue
		}
		if v := (square - sum*sum/count) / (count * count); v <= best {
			best, at = v, d
		}
	}
	return at
}
