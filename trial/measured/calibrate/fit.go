package calibrate

import (
	"fmt"
	"math"
)

// Fit is a channel of few parameters: every qubit flips with the same
// probability, and besides the state is depolarized,
//
//	f_0 = λ_0,  f_k = λ_k (1 − Depolarized)(1 − 2·Flip)^k  for k ≥ 1.
type Fit struct {
	Flip, FlipError               float64
	Depolarized, DepolarizedError float64
	// Worst is the largest deviation of a free estimate from the fit, in its
	// standard errors: above 4 the model does not describe the device.
	Worst float64
	// Channel is the fitted channel, to be used in place of the free one.
	Channel *Channel
}

// Fit fits the model to a matchgate channel by weighted least squares of the
// logarithms, every replica for itself. It has smaller errors than the free
// numbers, most of all for the middle degrees.
func (c *Channel) Fit() (*Fit, error) {
	if c.Header.Ensemble.Clifford() {
		return nil, fmt.Errorf("calibration of ensemble %s has one number: nothing to fit", c.Header.Ensemble)
	}
	n := c.Header.Qubits
	if n < 2 || len(c.Replicas) < 3 {
		return nil, fmt.Errorf("fit needs at least 2 qubits and 3 batches, found %d and %d", n, len(c.Replicas))
	}
	se := c.Errors()
	ideal := Ideal(c.Header.Ensemble, n)
	model := func(f []float64) (curve []float64, flip, depolarized float64) {
		// log(f_k/λ_k) = a + bk
		var w, wx, wxx, wy, wxy float64
		for k := 1; k <= n; k++ {
			weight := f[k] * f[k] / max(se[k]*se[k], 1e-30)
			x, y := float64(k), math.Log(f[k]/ideal[k])
			w, wx, wxx, wy, wxy = w+weight, wx+weight*x, wxx+weight*x*x, wy+weight*y, wxy+weight*x*y
		}
		b := (w*wxy - wx*wy) / (w*wxx - wx*wx)
		a := (wy - b*wx) / w
		curve = []float64{ideal[0]}
		for k := 1; k <= n; k++ {
			curve = append(curve, ideal[k]*math.Exp(a+b*float64(k)))
		}
		return curve, (1 - math.Exp(b)) / 2, 1 - math.Exp(a)
	}
	fit := &Fit{Channel: &Channel{Header: c.Header, Digest: c.Digest, Shots: c.Shots}}
	fit.Channel.Kept, fit.Flip, fit.Depolarized = model(c.Kept)
	var parameters, residuals [][]float64
	for _, r := range c.Replicas {
		curve, flip, depolarized := model(r)
		fit.Channel.Replicas = append(fit.Channel.Replicas, curve)
		parameters = append(parameters, []float64{flip, depolarized})
		rest := make([]float64, n+1)
		for k := range rest {
			rest[k] = r[k] - curve[k]
		}
		residuals = append(residuals, rest)
	}
	errors := spread([]float64{fit.Flip, fit.Depolarized}, parameters)
	fit.FlipError, fit.DepolarizedError = errors[0], errors[1]
	for k, sigma := range spread(c.Kept, residuals) {
		if d := math.Abs(c.Kept[k] - fit.Channel.Kept[k]); sigma > 1e-12*c.Kept[k] {
			fit.Worst = max(fit.Worst, d/sigma)
		}
	}
	return fit, nil
}
