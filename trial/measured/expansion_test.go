package measured_test

import (
	"bytes"
	"context"
	"math/cmplx"
	"testing"

	"leadline/trial"
	"leadline/trial/expansion"
	"leadline/trial/measured"
	"leadline/trial/measured/collapse"
	"leadline/trial/measured/record"
	"leadline/trial/measured/simulate"
	"leadline/trial/trialtest"
)

// TestExpansionIsTheSameTrial compares the overlaps of the collapsed record, as
// an expansion written to its file and read back, with those of the direct
// source, around a core and with virtual orbitals.
func TestExpansionIsTheSameTrial(t *testing.T) {
	for _, e := range ensembles {
		source := simulated(t, randomState(3, 2, 1, 6), simulate.Options{Ensemble: e, Order: record.Interleaved, Settings: 60, Seed: 2, Trial: "a test\nstate"})
		est, err := collapse.Run(context.Background(), source, collapse.Options{})
		if err != nil {
			t.Fatal(err)
		}
		var file bytes.Buffer
		if err := measured.Expansion(est, 6, 2).Write(&file); err != nil {
			t.Fatal(err)
		}
		x, err := expansion.Read(&file, "collapsed")
		if err != nil {
			t.Fatal(err)
		}
		collapsed, err := expansion.New(x)
		if err != nil {
			t.Fatal(err)
		}
		direct, err := measured.NewDirect(source, 6, 2, nil)
		if err != nil {
			t.Fatal(err)
		}
		w := trialtest.RandomWalkers(direct.Sector(), false, 5, 1)
		a, b := make([]trial.Overlap, w.Count), make([]trial.Overlap, w.Count)
		collapsed.Overlaps(a, w)
		direct.Overlaps(b, w)
		for i := range a {
			if d := cmplx.Abs(a[i].Over(b[i]) - 1); d > 1e-10 {
				t.Errorf("%s: collapsed over direct is off by %.2g", e, d)
			}
		}
	}
}

// TestHalves checks that the halves are different states of the same size and
// larger errors.
func TestHalves(t *testing.T) {
	source := simulated(t, randomState(2, 1, 1, 6), simulate.Options{Ensemble: record.Matching, Settings: 640, Seed: 2})
	est, err := collapse.Run(context.Background(), source, collapse.Options{})
	if err != nil {
		t.Fatal(err)
	}
	est.Real()
	full := measured.Expansion(est, 2, 0)
	first, second := measured.HalfExpansions(est, 2, 0)
	for k, d := range full.Determinants {
		mean := (first.Determinants[k].Amplitude + second.Determinants[k].Amplitude) / 2
		if cmplx.Abs(mean-d.Amplitude) > 1e-12 || first.Determinants[k].Amplitude == second.Determinants[k].Amplitude {
			t.Errorf("determinant %d: halves %v and %v, whole %v", k, first.Determinants[k].Amplitude, second.Determinants[k].Amplitude, d.Amplitude)
		}
		if !(first.Determinants[k].Error > d.Error) || imag(d.Amplitude) != 0 {
			t.Errorf("determinant %d: %+v, half %+v", k, d, first.Determinants[k])
		}
	}
	if err := first.Validate(); err != nil {
		t.Error(err)
	}
}
