package afqmc_test

import (
	"context"
	"math"
	"testing"

	"gonum.org/v1/gonum/mat"

	"leadline/afqmc"
	"leadline/hamiltonian"
	"leadline/hamiltonian/hubbard"
	"leadline/hamiltonian/meanfield"
	"leadline/trial"
	"leadline/trial/determinant"
)

// ring returns a Hubbard ring in the given squares, and in charge squares for
// restricted mean fields.
func ring(t *testing.T, sites, up, down int, u float64, squares hubbard.Decomposition) (h, spinFree *hamiltonian.Hamiltonian) {
	t.Helper()
	m := hubbard.Model{Sites: []int{sites}, Periodic: []bool{true}, Hopping: 1, Repulsion: u, Up: up, Down: down, Decomposition: squares}
	h, err := m.Hamiltonian()
	if err != nil {
		t.Fatal(err)
	}
	m.Decomposition = hubbard.Charge
	if spinFree, err = m.Hamiltonian(); err != nil {
		t.Fatal(err)
	}
	return h, spinFree
}

// freeElectrons returns the lowest orbitals of the one-body part: closed shells
// on rings of 4n+2 sites at half filling.
func freeElectrons(t *testing.T, h *hamiltonian.Hamiltonian) trial.Orbitals {
	t.Helper()
	var eigen mat.EigenSym
	if !eigen.Factorize(h.OneBody[hamiltonian.Up], true) {
		t.Fatal("no eigenvectors")
	}
	var v mat.Dense
	eigen.VectorsTo(&v)
	occupied := mat.DenseCopyOf(v.Slice(0, h.Orbitals, 0, h.Up))
	return trial.RealOrbitals(occupied, occupied)
}

// TestSignFree: where no walker ever meets the constraint the run must give the
// exact energy within three standard errors and the splitting's own error, with
// no walker killed. Exact energies: Lieb & Wu, Phys. Rev. Lett. 20, 1445 (1968),
// and, for attraction, by E(−U) = E(U) − U·N/2 at half filling.
func TestSignFree(t *testing.T) {
	if testing.Short() {
		t.Skip("statistical")
	}
	const exact6 = -3.6687061790 // ring of 6, U = 4, half filling
	for _, c := range []struct {
		name    string
		u       float64
		squares hubbard.Decomposition
		uhf     bool
		exact   float64
	}{
		{"repulsive, charge squares, UHF", 4, hubbard.Charge, true, exact6},
		{"repulsive, spin squares, free electrons", 4, hubbard.Spin, false, exact6},
		{"attractive, free electrons", -4, hubbard.Charge, false, exact6 - 12},
	} {
		t.Run(c.name, func(t *testing.T) {
			h, spinFree := ring(t, 6, 3, 3, c.u, c.squares)
			start := freeElectrons(t, h)
			reference := start
			if c.uhf {
				reference = columns(solve(t, spinFree, meanfield.UHF))
			}
			source, err := determinant.New(h.Orbitals, reference)
			if err != nil {
				t.Fatal(err)
			}
			guide, err := trial.NewGuide(h, source, 1<<30)
			if err != nil {
				t.Fatal(err)
			}
			r, err := afqmc.Run(context.Background(), guide, start, afqmc.Options{
				TimeStep: 0.01, Walkers: 400, Equilibration: 6, Length: 40, Seed: 3, Cores: 2, Cap: afqmc.CapOff,
			}, nil)
			if err != nil {
				t.Fatal(err)
			}
			d := r.Energy.Mean - c.exact
			t.Logf("energy %.4f(%.4f), deviation %+.4f, killed %.1e, tail %.2f", r.Energy.Mean, r.Energy.Error, d, r.Figures.Killed, r.Figures.Local.Hill)
			if math.Abs(d) > 3*r.Energy.Error+1e-3 {
				t.Errorf("energy %.4f(%.4f), exact %.4f", r.Energy.Mean, r.Energy.Error, c.exact)
			}
			if r.Figures.Killed > 0 {
				t.Errorf("%.1e of the walker-steps killed, expected none", r.Figures.Killed)
			}
		})
	}
}

// TestPhantomNodes: the free-electron trial on the half-filled ring has nodes
// where the state has none; no walker is killed, the energy is wrong by 0.4 t,
// and the result must carry a warning of the highest level.
func TestPhantomNodes(t *testing.T) {
	if testing.Short() {
		t.Skip("statistical")
	}
	h, _ := ring(t, 6, 3, 3, 4, hubbard.Charge)
	for _, limit := range []afqmc.Cap{afqmc.CapOn, afqmc.CapOff} {
		start := freeElectrons(t, h)
		source, err := determinant.New(h.Orbitals, start)
		if err != nil {
			t.Fatal(err)
		}
		guide, err := trial.NewGuide(h, source, 1<<30)
		if err != nil {
			t.Fatal(err)
		}
		r, err := afqmc.Run(context.Background(), guide, start, afqmc.Options{
			TimeStep: 0.01, Walkers: 200, Equilibration: 6, Length: 30, Seed: 3, Cores: 2, Cap: limit,
		}, nil)
		if err != nil {
			t.Fatal(err)
		}
		stop := false
		for _, w := range r.Warnings {
			t.Logf("%s %s: %s", w.Level, w.Check, w.Text)
			stop = stop || w.Level == afqmc.Stop
		}
		if !stop {
			t.Errorf("cap %v: energy %.3f(%.3f), exact −3.669, without a warning of the highest level", limit, r.Energy.Mean, r.Energy.Error)
		}
	}
}
