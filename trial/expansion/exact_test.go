package expansion

import (
	"math"
	"math/cmplx"
	"os"
	"testing"

	"leadline/hamiltonian"
	"leadline/hamiltonian/exact"
	"leadline/hamiltonian/fcidump"
	"leadline/trial"
	"leadline/trial/trialtest"
)

func readIntegrals(t testing.TB, name string) *hamiltonian.Hamiltonian {
	t.Helper()
	path := "../../testdata/integrals/" + name
	file, err := os.Open(path)
	if err != nil {
		t.Fatal(err)
	}
	defer file.Close()
	in, err := fcidump.Read(t.Context(), file, path, nil)
	if err != nil {
		t.Fatal(err)
	}
	h, _, err := in.Hamiltonian(t.Context(), 1e-11)
	if err != nil {
		t.Fatal(err)
	}
	return h
}

func readExpansion(t testing.TB, name string) *Expansion {
	t.Helper()
	file, err := os.Open("testdata/" + name)
	if err != nil {
		t.Fatal(err)
	}
	defer file.Close()
	e, err := Read(file, name)
	if err != nil {
		t.Fatal(err)
	}
	return e
}

// The variational energies that stand in the files' own source lines, and ⟨S²⟩
// and energies of truncations of the full CI vector, from the same independent
// implementation: E_var − E_0 in mEh, ⟨S²⟩ and the number of determinants after
// ties are kept.
func TestVariationalEnergies(t *testing.T) {
	for _, c := range []struct {
		integrals, file string
		largest         int
		energy          float64
		tolerance       float64
		spin            float64
		determinants    int
	}{
		{"H4_square2.4b_sto6g.fcidump", "H4_square2.4b_sto6g_fci.txt", 0, -1.986641514, 1e-9, 0, 34},
		{"H4_square2.4b_sto6g.fcidump", "H4_square2.4b_sto6g_noise_0.4_1.txt", 0, -1.804500996, 1e-9, 0.087, 36},
		{"H4_square2.4b_sto6g.fcidump", "H4_square2.4b_sto6g_fci.txt", 1, -1.986641514 + 0.1094, 1e-4, 0, 2},
		{"H4_square2.4b_sto6g.fcidump", "H4_square2.4b_sto6g_fci.txt", 4, -1.986641514 + 0.0327, 1e-4, 0.109, 4},
		{"H4_square2.4b_sto6g.fcidump", "H4_square2.4b_sto6g_fci.txt", 8, -1.986641514 + 0.0203, 1e-4, 0, 8},
		{"H6_ring_R2.8_sto6g.fcidump", "H6_ring_R2.8_sto6g_fci.txt", 0, -3.047487369, 1e-9, 0, 160},
		{"H6_ring_R2.8_sto6g.fcidump", "H6_ring_R2.8_sto6g_noise_0.2_1.txt", 0, -2.993573807, 1e-9, 0.055, 400},
		{"H6_ring_R2.8_sto6g.fcidump", "H6_ring_R2.8_sto6g_fci.txt", 2, -3.047487369 + 0.1447, 1e-4, 0, 3},
		{"H6_ring_R2.8_sto6g.fcidump", "H6_ring_R2.8_sto6g_fci.txt", 5, -3.047487369 + 0.1229, 1e-4, 0.105, 5},
		{"H6_ring_R2.8_sto6g.fcidump", "H6_ring_R2.8_sto6g_fci.txt", 20, -3.047487369 + 0.0396, 1e-4, 0.007, 21},
		{"H6_ring_R2.8_sto6g.fcidump", "H6_ring_R2.8_sto6g_fci.txt", 100, -3.047487369 + 0.0016, 1e-4, 0, 102},
	} {
		e := readExpansion(t, c.file)
		if c.largest > 0 {
			e = e.Truncate(c.largest)
		}
		s, err := New(e)
		if err != nil {
			t.Fatal(err)
		}
		h := readIntegrals(t, c.integrals)
		if n := len(e.Determinants); n != c.determinants {
			t.Errorf("%s, largest %d: %d determinants, expected %d", c.file, c.largest, n, c.determinants)
		}
		if got := s.Energy(h); math.Abs(got-c.energy) > c.tolerance {
			t.Errorf("%s, largest %d: energy %.9f, expected %.9f", c.file, c.largest, got, c.energy)
		}
		if got := s.SpinSquared(); math.Abs(got-c.spin) > 6e-4 {
			t.Errorf("%s, largest %d: S² %.4f, expected %.3f", c.file, c.largest, got, c.spin)
		}
	}
}

// An exact trial has the exact energy as local energy of every walker.
func TestExactTrial(t *testing.T) {
	molecule := readIntegrals(t, "H6_ring_R2.8_sto6g.fcidump")
	general := trialtest.RandomHamiltonian(hamiltonian.Sector{Orbitals: 5, Up: 3, Down: 2}, 6, 2, true, 3)
	for name, h := range map[string]*hamiltonian.Hamiltonian{
		"molecule": molecule, "spin-resolved with antisymmetric factors": general,
		"core folded": nil,
	} {
		t.Run(name, func(t *testing.T) {
			core := 0
			solved := h
			if h == nil {
				// Without virtual orbitals a core is exact only where nothing couples
				// to it: a far level, filled.
				h = decoupledCore(general)
				core = 1
				var err error
				if solved, err = h.FreezeCore(1); err != nil {
					t.Fatal(err)
				}
			}
			result, err := exact.Solve(t.Context(), solved, exact.Options{Tolerance: 1e-12})
			if err != nil {
				t.Fatal(err)
			}
			state := result.States[0]
			e := FromMatrix(h.Orbitals, core, result.Space.Up, result.Space.Down, state.Coefficients, nil)
			s, err := New(e)
			if err != nil {
				t.Fatal(err)
			}
			if got := s.Energy(h); math.Abs(got-state.Energy) > 1e-11*math.Abs(state.Energy) {
				t.Errorf("trial energy %.14g, exact %.14g", got, state.Energy)
			}
			w := trialtest.RandomWalkers(h.Sector, false, 8, 31)
			guide, err := trial.NewGuide(h, s, 1<<30)
			if err != nil {
				t.Fatal(err)
			}
			m := guide.NewMixed(w.Count)
			guide.Evaluate(m, w)
			for form, energies := range forms(s, h) {
				energies.LocalEnergies(m, w)
				for i, got := range m.Energy {
					if d := cmplx.Abs(got - complex(state.Energy, 0)); d > 1e-9 {
						t.Errorf("%s: local energy of walker %d is %.12g, exact %.12g", form, i, got, state.Energy)
					}
				}
			}
		})
	}
}

// decoupledCore returns h with one more orbital in front that nothing couples to
// but for its own energy.
func decoupledCore(h *hamiltonian.Hamiltonian) *hamiltonian.Hamiltonian {
	sector := hamiltonian.Sector{Orbitals: h.Orbitals + 1, Up: h.Up + 1, Down: h.Down + 1}
	ng := h.Factors.Count()
	out := trialtest.RandomHamiltonian(sector, ng, h.Factors.Antisymmetric, true, 4)
	copy(out.Factors.Sign, h.Factors.Sign)
	for spin := range 2 {
		for p := range sector.Orbitals {
			for q := range p + 1 {
				v := -20.0
				if q > 0 {
					v = h.OneBody[spin].At(p-1, q-1)
				} else if p > 0 {
					v = 0
				}
				out.OneBody[spin].SetSym(p, q, v)
				for g := range ng {
					v := 0.3
					if q > 0 {
						v = h.Factors.Row(g, spin)[hamiltonian.Pair(p-1, q-1)]
					} else if p > 0 || g >= h.Factors.Symmetric() {
						v = 0
					}
					out.Factors.Row(g, spin)[hamiltonian.Pair(p, q)] = v
				}
			}
		}
	}
	return out
}

// Expectation values by determinants as walkers agree with those over all
// strings.
func TestExpectationsByDeterminants(t *testing.T) {
	for _, k := range []int{0, 4, 6, 9, 11, 20, 24, 25} {
		c := windows[k]
		e := c.expansion(t, uint64(k))
		s, err := New(e)
		if err != nil {
			t.Fatal(err)
		}
		h := c.hamiltonian()
		want := s.OneBodyDensity()
		for spin, got := range s.densityByDeterminants() {
			for p := range c.orbitals {
				for q := range c.orbitals {
					if d := math.Abs(got.At(p, q) - want[spin].At(p, q)); !(d < 1e-11) {
						t.Errorf("%s: density of spin %d at %d,%d off by %g", c.name, spin, p, q, d)
					}
				}
			}
		}
		if got, want := s.energyByDeterminants(h), s.Energy(h); !(math.Abs(got-want) < 1e-10*(1+math.Abs(want))) {
			t.Errorf("%s: energy %v, over all strings %v", c.name, got, want)
		}
		if got, want := s.spinByDeterminants(), s.SpinSquared(); !(math.Abs(got-want) < 1e-11) {
			t.Errorf("%s: S² %v, over all strings %v", c.name, got, want)
		}
	}
}
