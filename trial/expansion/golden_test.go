package expansion

import (
	"math"
	"math/cmplx"
	"testing"

	"gonum.org/v1/gonum/mat"

	"leadline/hamiltonian"
	"leadline/hamiltonian/strings"
	"leadline/trial"
)

// One closed-form case, M = 6, signs ++−+, three up and two down electrons,
// complex walker and complex coefficients: over four active orbitals above one
// core orbital, and over all orbitals. The expected numbers come from an
// independent implementation, verified there by brute-force expansion to 1e-14.

func goldenHamiltonian() *hamiltonian.Hamiltonian {
	const m, ng = 6, 4
	h := &hamiltonian.Hamiltonian{
		Sector:   hamiltonian.Sector{Orbitals: m, Up: 3, Down: 2},
		Constant: 0.7,
		Factors:  hamiltonian.NewFactors(m, ng),
	}
	h.Factors.Sign[2] = -1
	one := mat.NewSymDense(m, nil)
	for p := range m {
		for q := range p + 1 {
			one.SetSym(p, q, -math.Cos(0.5*float64(p+q))/(1+float64(p-q)))
			for g := range ng {
				v := 0.3 * math.Cos(0.37*float64(g+1)*float64(p+q+1))
				if p == q {
					v += 0.2 * math.Sin(float64(g+p))
				}
				h.Factors.Row(g, hamiltonian.Up)[hamiltonian.Pair(p, q)] = v
			}
		}
	}
	h.OneBody = [2]*mat.SymDense{one, one}
	return h
}

// goldenExpansion has C_IJ = cos(1.3 I + 0.7 J) exp(0.2 i I)/norm.
func goldenExpansion(core, active int) *Expansion {
	up, down := strings.New(active, 3-core), strings.New(active, 2-core)
	re, im := make([]float64, up.Len()*down.Len()), make([]float64, up.Len()*down.Len())
	for i := range up.Len() {
		for j := range down.Len() {
			v := cmplx.Rect(math.Cos(1.3*float64(i)+0.7*float64(j)), 0.2*float64(i))
			re[i*down.Len()+j], im[i*down.Len()+j] = real(v), imag(v)
		}
	}
	return FromMatrix(6, core, up, down, re, im).Normalize()
}

func TestGolden(t *testing.T) {
	h := goldenHamiltonian()
	w := trial.NewWalkers(h.Sector, false, 1)
	for p := range 6 {
		x := float64(p)
		for j := range 3 {
			i := float64(j)
			w.Set(0, hamiltonian.Up, p, j, complex(math.Cos(0.7*x*(i+1)), math.Sin(0.4*x+i)))
			if j < 2 {
				w.Set(0, hamiltonian.Down, p, j, complex(math.Sin(0.9*(x+1)*(i+1)), math.Cos(0.3*x*i+0.2)))
			}
		}
	}
	for _, c := range []struct {
		name            string
		core, active    int
		overlap, energy complex128
		fields          []complex128
	}{
		{"active", 1, 4, 5.822294208223766 + 1.21930509408473i, -2.762919673858256 - 0.9258557979230131i, []complex128{
			0.46381018086358644 + 0.3122225056590706i, 0.3709184081794028 - 0.3968240816827645i,
			-0.8921785188026738 - 0.19765087605852055i, 1.2005078301977474 - 0.3274739062040574i}},
		{"full", 0, 6, 5.195533900289207 + 4.3930223530314425i, 1.9366467534434537 - 1.913196682578883i, []complex128{
			-1.3634416622341923 + 0.670433603249484i, 0.2327752177219253 + 0.07889061172862957i,
			-0.01259710613568053 - 0.4679227848254921i, 0.36944701717646244 + 0.30440461712468625i}},
	} {
		t.Run(c.name, func(t *testing.T) {
			near := func(what string, got, want complex128) {
				t.Helper()
				if d := cmplx.Abs(got - want); !(d < 1e-12*(1+cmplx.Abs(want))) {
					t.Errorf("%s: got %.15g, want %.15g, difference %.2g", what, got, want, d)
				}
			}
			s, err := New(goldenExpansion(c.core, c.active))
			if err != nil {
				t.Fatal(err)
			}
			guide, err := trial.NewGuide(h, s, 1<<30)
			if err != nil {
				t.Fatal(err)
			}
			m := guide.NewMixed(1)
			guide.Evaluate(m, w)
			guide.LocalEnergies(m, w)
			near("overlap", m.Overlap[0].Value(), c.overlap)
			for g, want := range c.fields {
				near("field expectation", complex(m.Fields[g], m.Fields[4+g]), want)
			}
			near("local energy", m.Energy[0], c.energy)
			s.newCumulant(h, trial.NewRotated(h, s.Support()), 0).LocalEnergies(m, w)
			near("local energy, general form", m.Energy[0], c.energy)
		})
	}
}
