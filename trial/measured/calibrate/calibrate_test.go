package calibrate_test

import (
	"context"
	"math"
	"testing"

	"leadline/trial/measured/calibrate"
	"leadline/trial/measured/record"
	"leadline/trial/measured/simulate"
)

// vacuum simulates a calibration of 2·orbitals qubits.
func vacuum(t *testing.T, e record.Ensemble, orbitals, settings int, flip, depolarizing float64, seed uint64) record.Source {
	t.Helper()
	opt := simulate.Options{Ensemble: e, Calibration: true, Settings: settings, Depolarizing: depolarizing, Seed: seed}
	for range 2 * orbitals {
		opt.Readout = append(opt.Readout, simulate.Flip{Zero: flip, One: flip})
	}
	h, list, err := simulate.Settings(context.Background(), &simulate.State{Orbitals: orbitals}, opt)
	if err != nil {
		t.Fatal(err)
	}
	return record.NewMemory(h, list)
}

// TestChannel compares with theory: the ideal channel without noise; with flips
// of probability p, f_k = λ_k (1−2p)^k for matchgates, and for the Clifford group
// (d q − 1)/(d − 1) times the ideal one, q = (1−p)^n the probability that no bit
// flips.
func TestChannel(t *testing.T) {
	for _, e := range []record.Ensemble{record.Lagrangian, record.Tableau, record.Matching, record.Orthogonal} {
		for _, p := range []float64{0, 0.03} {
			settings := 20000
			if e == record.Orthogonal {
				settings = 3000
			}
			c, err := calibrate.Estimate(vacuum(t, e, 2, settings, p, 0, 1), 32)
			if err != nil {
				t.Fatal(err)
			}
			se := c.Errors()
			for k, want := range calibrate.Ideal(e, 4) {
				if e.Clifford() {
					want *= (16*math.Pow(1-p, 4) - 1) / 15
				} else {
					want *= math.Pow(1-2*p, float64(k))
				}
				if d := math.Abs(c.Kept[k] - want); d > 4*se[k]+1e-12 {
					t.Errorf("%s, p=%g: f_%d = %.5f(%.5f), want %.5f", e, p, k, c.Kept[k], se[k], want)
				}
			}
		}
	}
}

// TestFit recovers both parameters with smaller errors than the free numbers.
func TestFit(t *testing.T) {
	c, err := calibrate.Estimate(vacuum(t, record.Matching, 4, 20000, 0.02, 0.1, 2), 32)
	if err != nil {
		t.Fatal(err)
	}
	fit, err := c.Fit()
	if err != nil {
		t.Fatal(err)
	}
	if math.Abs(fit.Flip-0.02) > 4*fit.FlipError || math.Abs(fit.Depolarized-0.1) > 4*fit.DepolarizedError {
		t.Errorf("flip %.4f(%.4f), want 0.02; depolarized %.4f(%.4f), want 0.1", fit.Flip, fit.FlipError, fit.Depolarized, fit.DepolarizedError)
	}
	if fit.Worst > 4 {
		t.Errorf("worst deviation %.1f standard errors", fit.Worst)
	}
	free, fitted := c.Errors(), fit.Channel.Errors()
	if fitted[4] >= free[4] {
		t.Errorf("error of f_4 is %.2g fitted, %.2g free", fitted[4], free[4])
	}
	if cl, err := calibrate.Estimate(vacuum(t, record.Lagrangian, 1, 100, 0, 0, 1), 8); err != nil {
		t.Error(err)
	} else if _, err := cl.Fit(); err == nil {
		t.Error("a Clifford channel is fitted")
	}
}

func TestRefusals(t *testing.T) {
	h, list, err := simulate.Settings(context.Background(), &simulate.State{Orbitals: 1, Up: 1, Down: 1, Amplitudes: []complex128{1}},
		simulate.Options{Ensemble: record.Matching, Settings: 10})
	if err != nil {
		t.Fatal(err)
	}
	if _, err := calibrate.Estimate(record.NewMemory(h, list), 8); err == nil {
		t.Error("a record of a trial state is accepted")
	}
	if _, err := calibrate.Estimate(vacuum(t, record.Matching, 1, 1, 0, 0, 1), 8); err == nil {
		t.Error("one setting is accepted")
	}
}
