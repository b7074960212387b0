package exact

import (
	"context"
	"errors"
	"math"
	"runtime"
	"testing"

	"leadline/hamiltonian"
)

func TestErrors(t *testing.T) {
	ctx := context.Background()
	s := hamiltonian.Sector{Orbitals: 6, Up: 3, Down: 2}
	good := randomHamiltonian(s, 2, 0, true, 1)
	resolved := randomHamiltonian(s, 2, 0, false, 1)
	broken := randomHamiltonian(s, 2, 0, true, 1)
	broken.Factors.Row(1, 0)[3] = math.NaN()
	for name, c := range map[string]struct {
		h       *hamiltonian.Hamiltonian
		options Options
	}{
		"NaN in a factor":     {broken, Options{}},
		"negative states":     {good, Options{States: -1}},
		"too many states":     {good, Options{States: 301}},
		"spin of wrong kind":  {good, Options{Spin: spin(1)}},
		"spin too low":        {good, Options{Spin: spin(-0.5)}},
		"spin too high":       {good, Options{Spin: spin(3.5)}},
		"spin not a number":   {good, Options{Spin: spin(math.NaN())}},
		"no total spin":       {resolved, Options{Spin: spin(0.5)}},
		"negative tolerance":  {good, Options{Tolerance: -1}},
		"tolerance not given": {good, Options{Tolerance: math.NaN()}},
	} {
		if result, err := Solve(ctx, c.h, c.options); err == nil || result != nil {
			t.Errorf("%s: result %v, error %v", name, result, err)
		}
	}

	var large *TooLargeError
	_, err := Solve(ctx, good, Options{MemoryLimit: 1000})
	if !errors.As(err, &large) || large.Determinants != 300 || large.Bytes <= 1000 || large.Limit != 1000 {
		t.Errorf("memory limit: %v", err)
	}
	// Far beyond any memory: refused at once, without overflow.
	huge := randomHamiltonian(hamiltonian.Sector{Orbitals: 64, Up: 32, Down: 32}, 1, 0, true, 1)
	if _, err := Solve(ctx, huge, Options{Spin: spin(0)}); !errors.As(err, &large) || large.Determinants != math.MaxInt {
		t.Errorf("huge: %v", err)
	}
	wide := randomHamiltonian(hamiltonian.Sector{Orbitals: 65, Up: 1, Down: 1}, 1, 0, true, 1)
	if _, err := Solve(ctx, wide, Options{}); err == nil {
		t.Error("65 orbitals accepted")
	}

	cancelled, cancel := context.WithCancel(ctx)
	_, err = Solve(cancelled, good, Options{Progress: func(iteration int, _ float64) {
		if iteration == 3 {
			cancel()
		}
		if iteration > 4 {
			t.Error("goes on after cancellation")
		}
	}})
	if !errors.Is(err, context.Canceled) {
		t.Errorf("cancelled: %v", err)
	}

	var short *NotConvergedError
	result, err := Solve(ctx, good, Options{States: 2, MaxIterations: 3})
	if !errors.As(err, &short) || result == nil || len(result.States) != 2 || short.Residual < 1e-7 || short.Iterations != 3 {
		t.Errorf("not converged: %v", err)
	}
}

// What a run holds stays below the estimate, and not by much.
func TestEstimate(t *testing.T) {
	sector := hamiltonian.Sector{Orbitals: 10, Up: 5, Down: 4}
	h := randomHamiltonian(sector, 5, 0, true, 1)
	for _, options := range []Options{{Spin: spin(0.5)}, {States: 3}} {
		determinants, bytes := Estimate(sector, max(1, options.States))
		if determinants != 252*210 {
			t.Fatalf("%d determinants", determinants)
		}
		var stats runtime.MemStats
		live := func() float64 {
			for range 3 { // pools survive one
				runtime.GC()
			}
			runtime.ReadMemStats(&stats)
			return float64(stats.HeapAlloc)
		}
		before, peak := live(), 0.0
		options.MaxIterations = 18
		options.Progress = func(int, float64) { peak = max(peak, live()-before) }
		_, err := Solve(context.Background(), h, options)
		var short *NotConvergedError
		if err != nil && !errors.As(err, &short) {
			t.Fatal(err)
		}
		if peak > float64(bytes) || peak < 0.6*float64(bytes) {
			t.Errorf("%+v: %.3g bytes in use, estimate %.3g", options, peak, float64(bytes))
		}
	}
}
