package meanfield

import (
	"math"
	"testing"

	"gonum.org/v1/gonum/mat"

	"leadline/hamiltonian"
)

// From restricted orbitals, where the gradient for unrestricted ones is zero,
// only the instability leads to the UHF minimum.
func TestInstabilityIsFollowed(t *testing.T) {
	for _, file := range []string{"H2_ccpvdz_R4.0", "H6_chain_R1.8_sto6g", "LiH_3.0A_631g", "H4_square2.4b_sto6g", "Hubbard_ring10_U4_5u5d"} {
		h := readIntegrals(t, file+".fcidump")
		rhf, err := Solve(t.Context(), h, RHF, Options{})
		if err != nil {
			t.Fatal(err)
		}
		if len(rhf.Notes) != 1 {
			t.Errorf("%s: notes %q, expected one on the instability", file, rhf.Notes)
		}
		s := &search{ctx: t.Context(), problem: newProblem(h, UHF), o: Options{}.withDefaults(h.Orbitals)}
		if err := s.try(rhf.Orbitals); err != nil {
			t.Fatal(err)
		}
		for _, r := range references {
			if r.file == file && (s.best == nil || math.Abs(s.best.pt.energy-r.uhf) > 1e-9) {
				t.Errorf("%s: ended in %+v, expected energy %.10f", file, s.best, r.uhf)
			}
		}
	}
}

// Self-repulsion of plane waves is largest in the sites of a Hubbard ring, and
// the staggered start has one electron on each, up and down by turns.
func TestStaggeredStart(t *testing.T) {
	h := readIntegrals(t, "Hubbard_ring10_U4_5u5d.fcidump")
	waves := (&search{problem: newProblem(h, UHF)}).coreOrbitals()
	local := localise(h, waves[0], 0, 10, 0)
	sites := map[int]bool{}
	for j := range 10 {
		for p := range 10 {
			if math.Abs(local.At(p, j)) > 1-1e-6 {
				sites[p] = true
			}
		}
	}
	if len(sites) != 10 {
		t.Errorf("localised orbitals are sites %v, expected all ten\n%.3f", sites, mat.Formatted(local))
	}
	s := &search{problem: newProblem(h, UHF)}
	c, ok := s.stagger(local, 0, 10)
	if !ok {
		t.Fatal("no staggered start")
	}
	moment := func(p int) float64 {
		sum := 0.0
		for j := range 5 {
			sum += math.Pow(c[hamiltonian.Up].At(p, j), 2) - math.Pow(c[hamiltonian.Down].At(p, j), 2)
		}
		return sum
	}
	for p := range 10 {
		if m := moment(p); math.Abs(math.Abs(m)-1) > 1e-6 || math.Abs(m+moment((p+1)%10)) > 1e-6 {
			t.Errorf("moment of site %d is %.3f, of the next one %.3f", p, m, moment((p+1)%10))
		}
	}
}

// The localised orbitals of a molecule are a maximum of Σ (ii|ii) among all
// plane rotations, and span what they spanned.
func TestLocalise(t *testing.T) {
	h := readIntegrals(t, "N2_1.6A_sto6g.fcidump")
	identity := mat.NewDense(10, 10, nil)
	for i := range 10 {
		identity.Set(i, i, 1)
	}
	value := func(c *mat.Dense) float64 {
		turned, sum := h.Rotate(c), 0.0
		for g, s := range turned.Factors.Sign {
			for i := 2; i < 10; i++ {
				l := turned.Factors.Row(g, 0)[hamiltonian.Pair(i, i)]
				sum += s * l * l
			}
		}
		return sum
	}
	local := localise(h, identity, 2, 10, 0)
	best := value(local)
	if start := value(identity); best < start+0.1 {
		t.Errorf("self-repulsion %.6f, at the start %.6f", best, start)
	}
	for p := 2; p < 10; p++ {
		for q := 2; q < p; q++ {
			for _, angle := range []float64{-0.8, -0.4, -0.01, 0.01, 0.4, 0.8} {
				c := mat.DenseCopyOf(local)
				turnColumns(c, p, q, angle)
				if v := value(c); v > best+1e-9 {
					t.Errorf("turning %d and %d by %.2f gives %.9f, more than %.9f", p, q, angle, v, best)
				}
			}
		}
		if local.At(0, p) != 0 || local.At(1, p) != 0 {
			t.Errorf("orbital %d left the window", p)
		}
	}
}

func TestAlternate(t *testing.T) {
	// A ring whose order of sites is scrambled.
	order := []int{3, 0, 5, 1, 4, 2}
	w := make([]float64, 36)
	for i, a := range order {
		b := order[(i+1)%6]
		w[a*6+b], w[b*6+a] = 1, 1
	}
	spins := alternate(w, 3, 3)
	for i, a := range order {
		if spins[a] == spins[order[(i+1)%6]] || spins[a] == empty {
			t.Errorf("sites %d and %d of %v", i, i+1, spins)
		}
	}
	count := map[int]int{}
	for _, s := range alternate(w, 2, 1) {
		count[s]++
	}
	if count[hamiltonian.Up] != 2 || count[hamiltonian.Down] != 1 || count[empty] != 3 {
		t.Errorf("counts %v", count)
	}
}
