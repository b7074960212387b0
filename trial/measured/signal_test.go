package measured_test

import (
	"context"
	"math"
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

// TestSignalPredictsTheSpread compares the predicted error of the overlaps of
// fixed walkers with their spread over 100 simulated records, within 20 % on
// average over the walkers.
func TestSignalPredictsTheSpread(t *testing.T) {
	const records, orbitals, core = 100, 5, 1
	for _, real := range []bool{false, true} {
		st := randomState(3, 2, 1, 6)
		for i := range st.Amplitudes {
			st.Amplitudes[i] = complex(realPart(st.Amplitudes[i]), 0)
		}
		var w trial.Walkers
		var mean []complex128
		var square, predicted []float64
		for seed := range uint64(records) {
			source := simulated(t, st, simulate.Options{Ensemble: record.Lagrangian, Settings: 2000, Seed: 20 + seed})
			est, err := collapse.Run(context.Background(), source, collapse.Options{})
			if err != nil {
				t.Fatal(err)
			}
			if real {
				est.Real()
				if b := est.Mean(); realPart(b[0])*realPart(st.Amplitudes[0]) < 0 {
					for _, batch := range est.Batches {
						for i := range batch {
							batch[i] = -batch[i]
						}
					}
				}
			}
			source2, err := expansion.New(measured.Expansion(est, orbitals, core))
			if err != nil {
				t.Fatal(err)
			}
			if mean == nil {
				w = trialtest.RandomWalkers(source2.Sector(), false, 6, 1)
				mean, square, predicted = make([]complex128, w.Count), make([]float64, w.Count), make([]float64, w.Count)
			}
			overlaps := make([]trial.Overlap, w.Count)
			source2.Overlaps(overlaps, w)
			ratios := make([]float64, w.Count)
			measured.NewSignal(est, core).Ratios(ratios, overlaps, w)
			for i, o := range overlaps {
				v := o.Value()
				mean[i] += v / records
				square[i] += math.Pow(cmplx.Abs(v), 2) / records
				predicted[i] += math.Pow(cmplx.Abs(v)/ratios[i], 2) / records
			}
		}
		average := 0.0
		for i := range mean {
			spread := (square[i] - math.Pow(cmplx.Abs(mean[i]), 2)) * records / (records - 1)
			average += math.Sqrt(predicted[i]/spread) / float64(w.Count)
		}
		if math.Abs(average-1) > 0.2 {
			t.Errorf("real %v: predicted error is %.2f of the spread", real, average)
		}
	}
}

func realPart(v complex128) float64 { return real(v) }
