package afqmc_test

import (
	"context"
	"math"
	"os"
	"path/filepath"
	"testing"

	"gonum.org/v1/gonum/mat"

	"leadline/afqmc"
	"leadline/hamiltonian"
	"leadline/hamiltonian/fcidump"
	"leadline/hamiltonian/meanfield"
	"leadline/trial"
	"leadline/trial/determinant"
)

func load(t testing.TB, name string) *hamiltonian.Hamiltonian {
	t.Helper()
	file, err := os.Open(filepath.Join("..", "testdata", "integrals", name+".fcidump"))
	if err != nil {
		t.Fatal(err)
	}
	defer file.Close()
	integrals, err := fcidump.Read(context.Background(), file, name, nil)
	if err != nil {
		t.Fatal(err)
	}
	h, _, err := integrals.Hamiltonian(context.Background(), 1e-9)
	if err != nil {
		t.Fatal(err)
	}
	return h
}

func solve(t testing.TB, h *hamiltonian.Hamiltonian, kind meanfield.Kind) *meanfield.Solution {
	t.Helper()
	s, err := meanfield.Solve(context.Background(), h, kind, meanfield.Options{})
	if err != nil {
		t.Fatal(err)
	}
	return s
}

func columns(s *meanfield.Solution) trial.Orbitals {
	up := s.Occupied(hamiltonian.Up)
	down := up
	if s.Kind != meanfield.RHF {
		down = s.Occupied(hamiltonian.Down)
	}
	return trial.Orbitals{Re: [2]*mat.Dense{up, down}}
}

// guided returns a guide of the given mean field and the spin-pure start.
func guided(t testing.TB, h *hamiltonian.Hamiltonian, kind meanfield.Kind) (*trial.Guide, trial.Orbitals) {
	t.Helper()
	pure := meanfield.RHF
	if h.Up != h.Down {
		pure = meanfield.ROHF
	}
	start := columns(solve(t, h, pure))
	orbitals := start
	if kind == meanfield.UHF {
		orbitals = columns(solve(t, h, kind))
	}
	source, err := determinant.New(h.Orbitals, orbitals)
	if err != nil {
		t.Fatal(err)
	}
	guide, err := trial.NewGuide(h, source, 1<<30)
	if err != nil {
		t.Fatal(err)
	}
	return guide, start
}

// TestEnergies compares runs with those of an independent implementation of the
// same method (same constraint, bound, cap, start and time step): within three
// combined standard errors and 0.3 millihartree, twice that where the local
// energies of an RHF trial have a heavy tail.
func TestEnergies(t *testing.T) {
	for _, c := range []struct {
		name          string
		kind          meanfield.Kind
		energy, error float64 // independent run, error in millihartree
		allowance     float64
		long          bool
		length        float64
		walkers       int
	}{
		{"H2_sto6g_R1.4", meanfield.RHF, -1.14594, 0.31, 1, false, 25, 400},
		{"H4_chain_R1.8_sto6g", meanfield.RHF, -2.18781, 0.64, 1, true, 120, 400},
		{"H6_ring_R1.8_sto6g", meanfield.RHF, -3.25680, 0.57, 1, true, 40, 400},
		{"H6_ring_R2.8_sto6g", meanfield.RHF, -3.01432, 3.83, 2, true, 200, 800},
		{"H6_ring_R2.8_sto6g", meanfield.UHF, -3.04586, 0.58, 1, false, 30, 400},
		{"H8_chain_R1.8_sto6g", meanfield.RHF, -4.33728, 1.06, 2, true, 80, 400},
		{"H8_chain_R1.8_sto6g", meanfield.UHF, -4.34287, 1.02, 1, true, 80, 400},
		{"H10_chain_R1.8_sto6g", meanfield.UHF, -5.42070, 0.61, 1, true, 80, 400},
		{"H4_square2.4b_sto6g", meanfield.UHF, -1.98373, 0.40, 1, false, 40, 400},
	} {
		t.Run(c.name+" "+c.kind.String(), func(t *testing.T) {
			if c.long && os.Getenv("LEADLINE_LONG") == "" {
				t.Skip("set LEADLINE_LONG=1 for the long rows")
			}
			if testing.Short() {
				t.Skip("statistical")
			}
			h := load(t, c.name)
			guide, start := guided(t, h, c.kind)
			r, err := afqmc.Run(context.Background(), guide, start, afqmc.Options{
				TimeStep: 0.01, Walkers: c.walkers, Equilibration: 8, Length: c.length, Seed: 1, Cores: 2,
			}, nil)
			if err != nil {
				t.Fatal(err)
			}
			e, sigma := r.Energy.Mean, r.Energy.Error
			deviation := 1e3 * (e - c.energy)
			allowed := c.allowance * (3*math.Hypot(1e3*sigma, c.error) + 0.3)
			t.Logf("E = %.5f(%.2f mEh), independent %.5f(%.2f), deviation %+.2f of %.2f mEh allowed", e, 1e3*sigma, c.energy, c.error, deviation, allowed)
			for _, w := range r.Warnings {
				t.Logf("%s %s: %s", w.Level, w.Check, w.Text)
			}
			if sigma > 1e-3 {
				t.Errorf("error %.2f mEh, expected at most 1", 1e3*sigma)
			}
			if math.Abs(deviation) > allowed {
				t.Errorf("deviation %+.2f mEh, allowed %.2f", deviation, allowed)
			}
		})
	}
}

// TestAgainstFullCI: molecules and atoms of closed and open shell, energies
// within 5 millihartree of full CI (string CI of an independent code over the
// same integral files); N2 at 1.6 Å, beyond one determinant, is only reported.
func TestAgainstFullCI(t *testing.T) {
	for _, c := range []struct {
		name    string
		kind    meanfield.Kind
		exact   float64
		bound   float64 // millihartree; 0: report
		walkers int
		length  float64
		long    bool
	}{
		{"LiH_1.6A_sto6g", meanfield.UHF, -7.972249851361, 5, 200, 20, false},
		{"Be_ccpvdz", meanfield.UHF, -14.617409506554, 5, 400, 60, true},
		{"H2O_sto3g_testgeom", meanfield.UHF, -75.012980198443, 5, 400, 60, true},
		{"N_631g_quartet", meanfield.UHF, -54.419939662414, 5, 400, 40, true},
		{"H5_chain_R1.8_sto6g_doublet", meanfield.UHF, -2.677036500885, 5, 400, 40, true},
		{"N2_1.6A_sto6g", meanfield.UHF, -108.597095443637, 0, 400, 40, true},
	} {
		t.Run(c.name, func(t *testing.T) {
			if testing.Short() {
				t.Skip("statistical")
			}
			if c.long && os.Getenv("LEADLINE_LONG") == "" {
				t.Skip("set LEADLINE_LONG=1 for the long rows")
			}
			guide, start := guided(t, load(t, c.name), c.kind)
			r, err := afqmc.Run(context.Background(), guide, start, afqmc.Options{
				TimeStep: 0.01, Walkers: c.walkers, Equilibration: 6, Length: c.length, Seed: 2, Cores: 2,
			}, nil)
			if err != nil {
				t.Fatal(err)
			}
			deviation := 1e3 * (r.Energy.Mean - c.exact)
			t.Logf("E = %.5f(%.2f mEh), full CI %.5f, deviation %+.2f mEh", r.Energy.Mean, 1e3*r.Energy.Error, c.exact, deviation)
			for _, w := range r.Warnings {
				t.Logf("%s %s: %s", w.Level, w.Check, w.Text)
			}
			if c.bound > 0 && math.Abs(deviation) > c.bound {
				t.Errorf("deviation %+.2f mEh, expected at most %g", deviation, c.bound)
			}
		})
	}
}
