package afqmc_test

import (
	"context"
	"errors"
	"math"
	"reflect"
	"runtime"
	"testing"

	"gonum.org/v1/gonum/stat"

	"leadline/afqmc"
	"leadline/hamiltonian/meanfield"
)

// rows keeps everything that a run records.
type rows []afqmc.Row

func (r *rows) Record(row afqmc.Row) error {
	*r = append(*r, row)
	return nil
}

// TestSameForAnyNumberOfCores: the same rows, bit by bit.
func TestSameForAnyNumberOfCores(t *testing.T) {
	guide, start := guided(t, load(t, "H4_square2.4b_sto6g"), meanfield.UHF)
	var first rows
	for i, cores := range []int{1, 2, 7} {
		before := runtime.GOMAXPROCS(cores)
		var got rows
		_, err := afqmc.Run(context.Background(), guide, start, afqmc.Options{
			TimeStep: 0.02, Walkers: 150, Equilibration: 1, Length: 2, Seed: 5, Cores: cores,
		}, &got)
		runtime.GOMAXPROCS(before)
		if err != nil {
			t.Fatal(err)
		}
		if i == 0 {
			first = got
		} else if !reflect.DeepEqual(first, got) {
			t.Errorf("%d cores give other rows than one", cores)
		}
	}
	if len(first) == 0 {
		t.Error("no rows")
	}
}

// TestHonestErrors runs 60 independent seeds of a small job: the spread of the
// energies over the mean quoted error must lie in [0.8, 1.25]; from 60 seeds the
// spread itself has 9 % of standard error.
func TestHonestErrors(t *testing.T) {
	if testing.Short() {
		t.Skip("statistical")
	}
	guide, start := guided(t, load(t, "H4_square2.4b_sto6g"), meanfield.UHF)
	var energies, quoted []float64
	for seed := range uint64(60) {
		r, err := afqmc.Run(context.Background(), guide, start, afqmc.Options{
			TimeStep: 0.02, Walkers: 40, Equilibration: 6, Length: 60, Seed: 100 + seed, Cores: 2,
		}, nil)
		if err != nil {
			t.Fatal(err)
		}
		energies = append(energies, r.Energy.Mean)
		quoted = append(quoted, r.Energy.Error)
	}
	spread := stat.StdDev(energies, nil) / stat.Mean(quoted, nil)
	t.Logf("mean %.5f, spread %.3f mEh, quoted %.3f mEh, ratio %.3f", stat.Mean(energies, nil), 1e3*stat.StdDev(energies, nil), 1e3*stat.Mean(quoted, nil), spread)
	if spread < 0.8 || spread > 1.25 {
		t.Errorf("spread over quoted error %.3f, expected 0.8 to 1.25", spread)
	}
}

// TestForceBias: the fluctuation of ln|I| per step must grow like τ, so that its
// ratio to τ does not depend on τ; without the force bias, or with one of wrong
// sign, it would grow like √τ.
func TestForceBias(t *testing.T) {
	guide, start := guided(t, load(t, "H4_chain_R1.8_sto6g"), meanfield.RHF)
	var ratios []float64
	for _, tau := range []float64{0.0025, 0.01, 0.04} {
		w, err := afqmc.NewWalk(guide, start, afqmc.Options{TimeStep: tau, Walkers: 2000, Seed: 3})
		if err != nil {
			t.Fatal(err)
		}
		for range int(1 / tau) {
			if err := w.Step(false, false); err != nil {
				t.Fatal(err)
			}
		}
		ratios = append(ratios, w.ImportanceSpread()/tau)
		w.Close()
	}
	t.Logf("std(ln|I|)/τ = %.3f, %.3f, %.3f", ratios[0], ratios[1], ratios[2])
	for _, r := range ratios {
		// An independent implementation finds 0.41 for this system at each τ.
		if math.Abs(r-0.41) > 0.08 {
			t.Errorf("std(ln|I|)/τ = %.3f, expected 0.41 ± 0.08", r)
		}
	}
}

// TestTwoElectrons: with one determinant of two electrons there is no constraint
// bias to speak of, so the run must give the exact energy.
func TestTwoElectrons(t *testing.T) {
	guide, start := guided(t, load(t, "H2_sto6g_R1.4"), meanfield.RHF)
	r, err := afqmc.Run(context.Background(), guide, start, afqmc.Options{
		TimeStep: 0.01, Walkers: 200, Equilibration: 5, Length: 20, Seed: 2, Cores: 2,
	}, nil)
	if err != nil {
		t.Fatal(err)
	}
	if d := r.Figures.OverlapDeviation; d > 1e-8 {
		t.Errorf("stored and recomputed overlaps differ by %.1e", d)
	}
	const exact = -1.145929 // full CI, STO-6G, 1.4 bohr: string CI of an independent code
	if d := math.Abs(r.Energy.Mean - exact); d > 3*r.Energy.Error+3e-4 {
		t.Errorf("energy %.5f(%.5f), exact %.5f: off by %.2g", r.Energy.Mean, r.Energy.Error, exact, d)
	}
}

// TestInterrupted: a cancelled run ends with what it has.
func TestInterrupted(t *testing.T) {
	guide, start := guided(t, load(t, "H2_sto6g_R1.4"), meanfield.RHF)
	options := afqmc.Options{TimeStep: 0.01, Walkers: 20, Equilibration: 1, Length: 1e6, Seed: 2}
	for _, after := range []int{5, 60} {
		ctx, cancel := context.WithCancel(context.Background())
		count := 0
		r, err := afqmc.Run(ctx, guide, start, options, recorderFunc(func(afqmc.Row) error {
			if count++; count == after {
				cancel()
			}
			return nil
		}))
		if err != nil {
			t.Fatal(err)
		}
		if r.Status != afqmc.StatusInterrupted || r.Sampled != (after > 20) {
			t.Errorf("interrupted after %d rows: status %q, sampled %v", after, r.Status, r.Sampled)
		}
	}
	failure := errors.New("disk full")
	if _, err := afqmc.Run(context.Background(), guide, start, options, recorderFunc(func(afqmc.Row) error { return failure })); !errors.Is(err, failure) {
		t.Errorf("error of the recorder came back as %v", err)
	}
}

type recorderFunc func(afqmc.Row) error

func (f recorderFunc) Record(r afqmc.Row) error { return f(r) }

// TestStepAllocatesNothing: no allocation in a step, with or without local
// energies and re-orthogonalisation.
func TestStepAllocatesNothing(t *testing.T) {
	guide, start := guided(t, load(t, "H4_square2.4b_sto6g"), meanfield.UHF)
	w, err := afqmc.NewWalk(guide, start, afqmc.Options{Walkers: 60, Cores: 1})
	if err != nil {
		t.Fatal(err)
	}
	defer w.Close()
	step := func() {
		if err := w.Step(true, true); err != nil {
			t.Fatal(err)
		}
		if err := w.Control(); err != nil {
			t.Fatal(err)
		}
	}
	step()
	if n := testing.AllocsPerRun(20, step); n > 0 {
		t.Errorf("%.1f allocations per step, expected none", n)
	}
}
