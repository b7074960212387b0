package meanfield

import (
	"math"
	"os"
	"path/filepath"
	"testing"

	"leadline/hamiltonian"
	"leadline/hamiltonian/fcidump"
)

func readIntegrals(t testing.TB, name string) *hamiltonian.Hamiltonian {
	t.Helper()
	file, err := os.Open(filepath.Join("..", "..", "testdata", "integrals", name))
	if err != nil {
		t.Fatal(err)
	}
	defer file.Close()
	integrals, err := fcidump.Read(t.Context(), file, name, nil)
	if err != nil {
		t.Fatal(err)
	}
	h, _, err := integrals.Hamiltonian(t.Context(), 1e-12)
	if err != nil {
		t.Fatal(err)
	}
	return h
}

// Lowest RHF or ROHF and UHF energies, and ⟨S²⟩ of the latter, of the files in
// testdata, by an independent program from the same integrals, lowest of 20 to
// 30 starts.
var references = []struct {
	file         string
	rhf, uhf, s2 float64
}{
	{"BeH2_C_purvis", -15.62844064085115, -15.628558231401339, 0.07942691748161579},
	{"Be_ccpvdz", -14.572337630953372, -14.572611041834172, 0.11958865688860576},
	{"H10_chain_R1.8_sto6g", -5.27014284162968, -5.277448702017832, 0.5393497918783572},
	{"H2O_sto3g_testgeom", -74.94207992819227, -74.94207992819233, 0},
	{"H2_ccpvdz_R4.0", -0.906781032570896, -1.0014146031798117, 0.9318474679014608},
	{"H2_sto3g_R1.4", -1.1167143250625702, -1.1167143250625697, 0},
	{"H2_sto6g_R1.4", -1.1253243671759408, -1.1253243671759405, 0},
	{"H4_chain_R1.8_sto6g", -2.127887082608147, -2.127887082608147, 0},
	{"H4_rect2.0x2.2b_sto6g", -1.8760098418514572, -1.9463732765784318, 1.0216851484648062},
	{"H4_square1.23A_sto3g", -1.7792432699013592, -1.9335630731004787, 1.1727674331990152},
	{"H4_square2.4b_sto6g", -1.788207371273466, -1.9497696982959734, 1.2009366485975104},
	{"H5_chain_R1.8_sto6g_doublet", -2.602156845880292, -2.62435267191331, 0.8490786960139354},
	{"H6_chain_R1.8_sto6g", -3.1737241179865467, -3.173726458457317, 0.009373154949281481},
	{"H6_chain_R2.4_sto6g", -2.969587543842402, -3.028968186501518, 1.1737468240244615},
	{"H6_ring_R1.8_sto6g", -3.1821039872507377, -3.1821039872507377, 0},
	{"H6_ring_R2.8_sto6g", -2.8564902245105994, -2.9480539336554057, 1.604967554580116},
	{"H8_chain_R1.8_sto6g", -4.221479371623357, -4.2239312878318165, 0.3079230168825853},
	{"HeH+_sto3g_R1.4632", -2.8418364992873695, -2.841836499287369, 0},
	{"Hubbard_ring10_U4_5u5d", -2.944271909999161, -4.6919653018012095, 3.0415138202768484},
	{"Hubbard_sq2x4_U8_4u4d", 4.000000000000002, -2.834180567825509, 3.3917519820943003},
	{"Hubbard_sq4x4_U4_5u5d", -17.75, -17.75, 0},
	{"LiH_1.6A_sto6g", -7.951804963436904, -7.951804963436907, 0},
	{"LiH_3.0A_631g", -7.908498179088116, -7.935019528848583, 0.8438685525827527},
	{"N2_1.6A_sto6g", -108.27983692762763, -108.50147604369579, 2.0522062168007382},
	{"N_631g_quartet", -54.38205113748975, -54.385007712010975, 3.754594251793234},
}

func TestReferenceEnergies(t *testing.T) {
	for _, r := range references {
		t.Run(r.file, func(t *testing.T) {
			h := readIntegrals(t, r.file+".fcidump")
			restricted := RHF
			if h.Up != h.Down {
				restricted = ROHF
			}
			check := func(kind Kind, energy, tolerance, spin float64) {
				s, err := Solve(t.Context(), h, kind, Options{})
				if err != nil {
					t.Fatal(err)
				}
				if s.Energy > energy+tolerance || math.IsNaN(s.Energy) {
					t.Errorf("%s energy %.10f, expected %.10f or lower (%+.1e)", kind, s.Energy, energy, s.Energy-energy)
				}
				if s.Energy > energy-tolerance && math.Abs(s.SpinSquared-spin) > 1e-6 {
					t.Errorf("%s <S^2> %.8f, expected %.8f", kind, s.SpinSquared, spin)
				}
				if !s.Stable || s.GradientNorm > 1e-8 {
					t.Errorf("%s: stable %v, gradient %.1e", kind, s.Stable, s.GradientNorm)
				}
			}
			exact := 0.5 * float64(h.Up-h.Down)
			check(restricted, r.rhf, 1e-8, exact*(exact+1))
			check(UHF, r.uhf, 1e-7, r.s2)
		})
	}
}

func TestPublishedEnergies(t *testing.T) {
	for _, c := range []struct {
		file      string
		kind      Kind
		energy    float64
		tolerance float64
		source    string
	}{
		{"H10_chain_R1.8_sto6g", UHF, -5.27744870209, 1e-9, "Motta et al., Phys. Rev. X 7, 031059 (2017), open data set, ten atoms, R = 1.8, minimal basis"},
		{"H2_sto3g_R1.4", RHF, -1.1167, 5e-5, "Szabo & Ostlund, Modern Quantum Chemistry, ch. 3"},
		// Filled shells of plane waves: Σ n ε + U N_up N_down/M.
		{"Hubbard_sq4x4_U4_5u5d", RHF, -24 + 4*25./16, 1e-10, "closed form"},
		{"Hubbard_sq2x4_U8_4u4d", RHF, -12 + 8*16./8, 1e-10, "closed form"},
		{"Hubbard_ring10_U4_5u5d", RHF, -4*(1+2*math.Cos(math.Pi/5)+2*math.Cos(2*math.Pi/5)) + 4*25./10, 1e-10, "closed form"},
	} {
		s, err := Solve(t.Context(), readIntegrals(t, c.file+".fcidump"), c.kind, Options{})
		if err != nil {
			t.Fatal(err)
		}
		if math.Abs(s.Energy-c.energy) > c.tolerance {
			t.Errorf("%s %s: %.12f, expected %.12f (%s)", c.file, c.kind, s.Energy, c.energy, c.source)
		}
	}
}
