package afqmc_test

import (
	"context"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"testing"

	"leadline/afqmc"
	"leadline/hamiltonian/meanfield"
	"leadline/trial"
	"leadline/trial/expansion"
)

func readExpansion(t *testing.T, name string) *expansion.Expansion {
	t.Helper()
	file, err := os.Open(filepath.Join("..", "testdata", "expansions", name+".txt"))
	if err != nil {
		t.Fatal(err)
	}
	defer file.Close()
	e, err := expansion.Read(file, name)
	if err != nil {
		t.Fatal(err)
	}
	return e
}

// TestBiasAgainstTrialQuality: truncations of the canonical full-CI vector bias
// the energy upward, noise on it downward. Energies within three combined
// standard errors and 0.3 millihartree of an independent implementation with the
// same expansions; the exact trial gives zero variance and the exact energy.
func TestBiasAgainstTrialQuality(t *testing.T) {
	if testing.Short() {
		t.Skip("statistical")
	}
	type row struct {
		trial         string // a file's suffix, or trunc_k of the full-CI vector
		energy, error float64
		long          bool
	}
	for _, system := range []struct {
		name  string
		exact float64
		rows  []row
	}{
		{"H4_square2.4b_sto6g", -1.98664152, []row{
			{"fci", -1.98664152, 0, false},
			{"noise_0.05_1", -1.98700, 0.25, false},
			{"noise_0.05_2", -1.98696, 0.11, true},
			{"noise_0.1_1", -1.98854, 0.21, false},
			{"noise_0.1_2", -1.98733, 0.20, true},
			{"noise_0.2_1", -1.99084, 0.62, false},
			{"noise_0.2_2", -1.98872, 0.37, true},
			{"noise_0.4_1", -2.00156, 1.67, false},
			{"noise_0.4_2", -1.99084, 1.21, true},
			{"trunc_1", -1.97029, 3.13, true},
			{"trunc_2", -1.97029, 3.13, true},
			{"trunc_4", -1.98239, 1.08, false},
			{"trunc_8", -1.98483, 0.44, false},
			{"trunc_12", -1.98664, 0, false},
		}},
		{"H6_ring_R2.8_sto6g", -3.0474873688514066, []row{
			{"fci", -3.0474873688514066, 0, false},
			{"noise_0.05_1", -3.04744, 0.09, false},
			{"noise_0.1_1", -3.04770, 0.18, false},
			{"noise_0.1_2", -3.04761, 0.07, true},
			{"noise_0.2_1", -3.04785, 0.45, false},
			{"noise_0.2_2", -3.04749, 0.24, true},
			{"noise_0.4_1", -3.04898, 0.76, false},
			{"noise_0.4_2", -3.04872, 0.66, true},
			{"trunc_1", -3.01214, 7.33, true},
			{"trunc_2", -3.03987, 4.02, true},
			{"trunc_5", -3.04513, 2.07, true},
			{"trunc_20", -3.04590, 0.75, false},
			{"trunc_50", -3.04744, 0.21, false},
			{"trunc_100", -3.04741, 0.05, false},
		}},
	} {
		h := load(t, system.name)
		start := columns(solve(t, h, meanfield.RHF))
		for _, c := range system.rows {
			t.Run(system.name+" "+c.trial, func(t *testing.T) {
				long := os.Getenv("LEADLINE_LONG") != ""
				if c.long && !long {
					t.Skip("set LEADLINE_LONG=1 for the long rows")
				}
				var e *expansion.Expansion
				var k int
				if n, _ := fmt.Sscanf(c.trial, "trunc_%d", &k); n == 1 {
					e = readExpansion(t, system.name+"_fci").Truncate(k)
				} else {
					e = readExpansion(t, system.name+"_"+c.trial)
				}
				source, err := expansion.New(e)
				if err != nil {
					t.Fatal(err)
				}
				guide, err := trial.NewGuide(h, source, 1<<30)
				if err != nil {
					t.Fatal(err)
				}
				length := 20.0
				if long {
					length = 100
				}
				r, err := afqmc.Run(context.Background(), guide, start, afqmc.Options{
					TimeStep: 0.01, Walkers: 200, Equilibration: 8, Length: length, Seed: 1, Cores: 2,
				}, nil)
				if err != nil {
					t.Fatal(err)
				}
				deviation := 1e3 * (r.Energy.Mean - c.energy)
				allowed := 3*math.Hypot(1e3*r.Energy.Error, c.error) + 0.3
				t.Logf("%d determinants, trial %+.1f mEh, E = %.5f(%.2f mEh), bias %+.2f; independent %.5f(%.2f): deviation %+.2f of %.2f mEh allowed",
					len(e.Determinants), 1e3*(r.TrialEnergy-system.exact), r.Energy.Mean, 1e3*r.Energy.Error, 1e3*(r.Energy.Mean-system.exact), c.energy, c.error, deviation, allowed)
				if math.Abs(deviation) > allowed {
					t.Errorf("deviation %+.2f mEh, allowed %.2f", deviation, allowed)
				}
				if c.trial == "fci" && (r.Figures.Local.Deviation > 1e-6 || math.Abs(r.Energy.Mean-system.exact) > 1e-7) {
					t.Errorf("exact trial: spread of local energies %.1e, energy off by %.1e", r.Figures.Local.Deviation, r.Energy.Mean-system.exact)
				}
			})
		}
	}
}
