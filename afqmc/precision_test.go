package afqmc_test

import (
	"context"
	"math"
	"testing"

	"leadline/afqmc"
	"leadline/hamiltonian/meanfield"
	"leadline/trial"
	"leadline/trial/determinant"
)

// TestSinglePrecision: over the first steps a run in single precision follows the
// one in double precision, with the same random numbers, to about 1e-6 hartree.
func TestSinglePrecision(t *testing.T) {
	for _, name := range []string{"H4_square2.4b_sto6g", "H10_chain_R1.8_sto6g", "Be_ccpvdz"} {
		h := load(t, name)
		reference := columns(solve(t, h, meanfield.UHF))
		start := columns(solve(t, h, meanfield.RHF))
		source, err := determinant.New(h.Orbitals, reference)
		if err != nil {
			t.Fatal(err)
		}
		var energies [2]rows
		for single := range 2 {
			bind := trial.NewGuide
			if single == 1 {
				bind = trial.NewSingleGuide
			}
			guide, err := bind(h, source, 1<<30)
			if err != nil {
				t.Fatal(err)
			}
			_, err = afqmc.Run(context.Background(), guide, start, afqmc.Options{
				TimeStep: 0.01, Walkers: 30, Equilibration: 0.5, Length: 0.5, Seed: 1, Single: single == 1,
			}, &energies[single])
			if err != nil {
				t.Fatal(err)
			}
		}
		largest := 0.0
		for i := range energies[0] {
			largest = math.Max(largest, math.Abs(energies[0][i].Energy-energies[1][i].Energy))
		}
		t.Logf("%s: largest difference %.1e E_h", name, largest)
		if largest > 2e-5 {
			t.Errorf("%s: single precision differs by %.1e E_h, expected less than 2e-5", name, largest)
		}
		if largest == 0 {
			t.Errorf("%s: single precision gives the same bits: it is not used", name)
		}
	}
}
