package hubbard

import (
	"math"
	"testing"
)

// TestLiebWu compares with rings diagonalised by an independent Lanczos code (this
// project's reference table), half-filled and doped.
func TestLiebWu(t *testing.T) {
	for _, test := range []struct {
		sites, electrons int
		u, want          float64
	}{
		{4, 4, 2, -2.828427124746}, {4, 4, 4, -2.102748483462},
		{6, 6, 2, -5.409456845101}, {6, 6, 4, -3.668706178873}, {6, 6, 8, -2.048130886091},
		{8, 8, 2, -6.568192162875}, {8, 8, 8, -2.666147420132},
		{8, 6, 2, -7.826311280176}, {8, 6, 4, -6.672195997058},
		{10, 10, 2, -8.638415739962}, {10, 10, 4, -5.834322635773},
		{10, 6, 2, -9.078570008166}, {10, 6, 4, -8.262531385371},
		{12, 12, 2, -10.041762647429}, {12, 12, 4, -6.920353562419},
	} {
		e, err := LiebWu(test.sites, test.electrons/2, test.electrons/2, 1, test.u)
		if err != nil || math.Abs(e-test.want) > 1e-10 {
			t.Errorf("%d electrons on %d sites, U = %g: %.12f (%v), expected %.12f", test.electrons, test.sites, test.u, e, err, test.want)
		}
	}
	// Scale: t = 2, U = 8 is twice t = 1, U = 4.
	if e, err := LiebWu(10, 5, 5, 2, 8); err != nil || math.Abs(e-2*-5.834322635773) > 1e-10 {
		t.Errorf("t = 2, U = 8: %v (%v)", e, err)
	}
}

// TestLongRing compares a long half-filled ring with the closed form of the
// infinite one, E/L = −4 ∫ J₀(ω) J₁(ω) / (ω (1 + e^{ωU/2})) dω (Lieb & Wu 1968).
// The gapless spin excitations leave −π v/(6 L²) per site (Blöte, Cardy &
// Nightingale, Phys. Rev. Lett. 56, 742 (1986)) with the spin velocity
// v = 2 I₁(2π/U)/I₀(2π/U) (from memory), up to logarithms of L.
func TestLongRing(t *testing.T) {
	for _, u := range []float64{4, 8} {
		infinite := 0.0
		const steps, top = 20000, 50.0
		for i := range steps { // midpoints; nothing is left beyond e⁻¹⁰⁰
			w := (float64(i) + 0.5) * top / steps
			infinite -= 4 * math.J0(w) * math.J1(w) / (w * (1 + math.Exp(w*u/2))) * top / steps
		}
		const sites = 102
		e, err := LiebWu(sites, sites/2, sites/2, 1, u)
		if err != nil {
			t.Fatal(err)
		}
		v := (infinite - e/sites) * 6 * sites * sites / math.Pi
		bessel := func(n float64) (sum float64) { // I_n from its integral
			for i := range 1000 {
				x := (float64(i) + 0.5) * math.Pi / 1000
				sum += math.Exp(2*math.Pi/u*math.Cos(x)) * math.Cos(n*x) / 1000
			}
			return sum
		}
		if want := 2 * bessel(1) / bessel(0); math.Abs(v/want-1) > 0.02 {
			t.Errorf("U = %g: %.8f per site, infinite %.8f: spin velocity %.4f, expected %.4f", u, e/sites, infinite, v, want)
		}
	}
}

func TestLiebWuRefuses(t *testing.T) {
	for _, test := range []struct {
		sites, up, down int
		t, u            float64
	}{
		{2, 1, 1, 1, 4}, {6, 2, 2, 1, 4}, {6, 2, 1, 1, 4}, {6, 4, 4, 1, 4}, {6, 1, 3, 1, 4}, {6, 3, 0, 1, 4}, {6, 3, 3, 1, -4}, {6, 3, 3, 0, 4}, {6, 3, 3, 1, math.NaN()},
	} {
		if e, err := LiebWu(test.sites, test.up, test.down, test.t, test.u); err == nil {
			t.Errorf("%+v gives %v, expected a refusal", test, e)
		}
	}
}
