package measured_test

import (
	"context"
	"fmt"
	"math/rand/v2"
	"slices"
	"testing"
	"time"

	"leadline/hamiltonian"
	"leadline/trial"
	"leadline/trial/expansion"
	"leadline/trial/measured"
	"leadline/trial/measured/collapse"
	"leadline/trial/measured/record"
	"leadline/trial/measured/simulate"
	"leadline/trial/trialtest"
)

// BenchmarkStep is what a trial costs per step and walker, overlap and force
// bias, and per measurement, the local energy: 12 qubits in 30 orbitals. A
// measured trial costs what a complex expansion of its 400 determinants does,
// whatever the number of snapshots. The three take turns.
func BenchmarkStep(b *testing.B) {
	const orbitals, core, walkers = 30, 2, 64
	st := &simulate.State{Orbitals: 6, Up: 3, Down: 3}
	rng := rand.New(rand.NewPCG(1, 2))
	for range 400 {
		st.Amplitudes = append(st.Amplitudes, complex(rng.NormFloat64(), rng.NormFloat64()))
	}
	type row struct {
		name string
		e    *expansion.Expansion
	}
	var rows []row
	for _, snapshots := range []int{1000, 100000} {
		h, settings, err := simulate.Settings(context.Background(), st, simulate.Options{Ensemble: record.Matching, Settings: snapshots / 10, ShotsPerSetting: 10, Seed: 3})
		if err != nil {
			b.Fatal(err)
		}
		estimate, err := collapse.Run(context.Background(), record.NewMemory(h, settings), collapse.Options{})
		if err != nil {
			b.Fatal(err)
		}
		rows = append(rows, row{fmt.Sprintf("%d-snapshots", snapshots), measured.Expansion(estimate, orbitals, core)})
	}
	computed := *rows[0].e
	computed.Determinants = nil
	for _, d := range rows[0].e.Determinants {
		d.Amplitude, d.Error = complex(rng.NormFloat64(), rng.NormFloat64()), 0
		computed.Determinants = append(computed.Determinants, d)
	}
	rows = append(rows, row{"computed", &computed})
	h := trialtest.RandomHamiltonian(hamiltonian.Sector{Orbitals: orbitals, Up: 5, Down: 5}, 120, 0, false, 1)
	w := trialtest.RandomWalkers(h.Sector, false, walkers, 2)
	guides, mixed := make([]*trial.Guide, len(rows)), make([]*trial.Mixed, len(rows))
	for i, r := range rows {
		source, err := expansion.New(r.e)
		if err != nil {
			b.Fatal(err)
		}
		if guides[i], err = trial.NewGuide(h, source, 1<<30); err != nil {
			b.Fatal(err)
		}
		mixed[i] = guides[i].NewMixed(walkers)
	}
	for _, part := range []struct {
		name string
		do   func(g *trial.Guide, m *trial.Mixed)
	}{
		{"forces", func(g *trial.Guide, m *trial.Mixed) { g.Evaluate(m, w) }},
		{"energy", func(g *trial.Guide, m *trial.Mixed) { g.LocalEnergies(m, w) }},
	} {
		b.Run(part.name, func(b *testing.B) {
			times := make([][]float64, len(rows))
			for i := range rows {
				guides[i].Evaluate(mixed[i], w)
			}
			for b.Loop() {
				for i := range rows {
					begin := time.Now()
					part.do(guides[i], mixed[i])
					times[i] = append(times[i], float64(time.Since(begin).Nanoseconds())/walkers)
				}
			}
			// The lower quartile: other work on the machine only adds.
			for i, r := range rows {
				slices.Sort(times[i])
				b.ReportMetric(times[i][len(times[i])/4], r.name+"-ns/walker")
			}
			b.ReportMetric(0, "ns/op")
		})
	}
}
