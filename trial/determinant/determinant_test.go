package determinant

import (
	"math"
	"math/rand/v2"
	"testing"

	"gonum.org/v1/gonum/mat"

	"leadline/hamiltonian"
	"leadline/trial"
	"leadline/trial/trialtest"
)

// randomColumns returns m×n orthonormal columns; im is nil for real ones.
func randomColumns(m, n int, imaginary bool, rng *rand.Rand) (re, im *mat.Dense) {
	if n == 0 {
		return nil, nil
	}
	columns := make([][]complex128, n)
	for j := range columns {
		columns[j] = make([]complex128, m)
		for p := range m {
			columns[j][p] = complex(rng.NormFloat64(), 0)
			if imaginary {
				columns[j][p] += complex(0, rng.NormFloat64())
			}
		}
		for _, earlier := range columns[:j] {
			var s complex128
			for p := range m {
				s += complex(real(earlier[p]), -imag(earlier[p])) * columns[j][p]
			}
			for p := range m {
				columns[j][p] -= s * earlier[p]
			}
		}
		norm := 0.0
		for _, v := range columns[j] {
			norm += real(v)*real(v) + imag(v)*imag(v)
		}
		for p := range m {
			columns[j][p] /= complex(math.Sqrt(norm), 0)
		}
	}
	re = mat.NewDense(m, n, nil)
	if imaginary {
		im = mat.NewDense(m, n, nil)
	}
	for j := range n {
		for p := range m {
			re.Set(p, j, real(columns[j][p]))
			if imaginary {
				im.Set(p, j, imag(columns[j][p]))
			}
		}
	}
	return re, im
}

func TestConformance(t *testing.T) {
	for _, c := range []struct {
		name                    string
		sector                  hamiltonian.Sector
		imaginary, restricted   bool
		antisymmetric, resolved bool
	}{
		{name: "real", sector: hamiltonian.Sector{Orbitals: 5, Up: 3, Down: 2}},
		{name: "complex", sector: hamiltonian.Sector{Orbitals: 5, Up: 2, Down: 2}, imaginary: true},
		{name: "restricted", sector: hamiltonian.Sector{Orbitals: 5, Up: 2, Down: 2}, restricted: true},
		{name: "restricted complex", sector: hamiltonian.Sector{Orbitals: 5, Up: 2, Down: 2}, restricted: true, imaginary: true},
		{name: "no down", sector: hamiltonian.Sector{Orbitals: 5, Up: 3}},
		{name: "no up", sector: hamiltonian.Sector{Orbitals: 4, Down: 2}, imaginary: true},
		{name: "full up", sector: hamiltonian.Sector{Orbitals: 4, Up: 4, Down: 1}},
		{name: "antisymmetric factors", sector: hamiltonian.Sector{Orbitals: 4, Up: 2, Down: 1}, antisymmetric: true},
		{name: "antisymmetric complex", sector: hamiltonian.Sector{Orbitals: 4, Up: 2, Down: 2}, antisymmetric: true, imaginary: true},
		{name: "spin-resolved", sector: hamiltonian.Sector{Orbitals: 4, Up: 2, Down: 2}, resolved: true, restricted: true},
	} {
		t.Run(c.name, func(t *testing.T) {
			rng := rand.New(rand.NewPCG(3, 4))
			var o trial.Orbitals
			o.Re[0], o.Im[0] = randomColumns(c.sector.Orbitals, c.sector.Up, c.imaginary, rng)
			o.Re[1], o.Im[1] = randomColumns(c.sector.Orbitals, c.sector.Down, c.imaginary, rng)
			if c.restricted {
				o.Re[1], o.Im[1] = o.Re[0], o.Im[0]
			}
			d, err := New(c.sector.Orbitals, o)
			if err != nil {
				t.Fatal(err)
			}
			anti := 0
			if c.antisymmetric {
				anti = 2
			}
			h := trialtest.RandomHamiltonian(c.sector, 7, anti, c.resolved, 5)
			trialtest.Run(t, h, d)
			t.Run("overlaps only", func(t *testing.T) { trialtest.Run(t, h, overlapsOnly{d}) })
			t.Run("factor by factor", func(t *testing.T) { compareExchange(t, h, d) })
		})
	}
}

// overlapsOnly hides every ability but overlaps, so that the suite checks the
// completer.
type overlapsOnly struct{ trial.Source }

// compareExchange checks the two ways to the exchange energy against each other.
func compareExchange(t *testing.T, h *hamiltonian.Hamiltonian, d *Determinant) {
	w := trialtest.RandomWalkers(d.Sector(), false, 5, 8)
	var energy [2][]complex128
	for i, memory := range []int64{0, 1 << 30} {
		g, err := trial.NewGuide(h, d, memory)
		if err != nil {
			t.Fatal(err)
		}
		m := g.NewMixed(w.Count)
		g.Evaluate(m, w)
		g.LocalEnergies(m, w)
		energy[i] = m.Energy
	}
	for i := range energy[0] {
		a, b := energy[0][i], energy[1][i]
		if math.Hypot(real(a-b), imag(a-b)) > 1e-11*(1+math.Hypot(real(a), imag(a))) {
			t.Errorf("walker %d: factor by factor %v, supermatrix %v", i, a, b)
		}
	}
}

func TestRefusals(t *testing.T) {
	skew := mat.NewDense(3, 2, []float64{1, 0.1, 0, 1, 0, 0})
	if _, err := New(3, trial.RealOrbitals(skew, nil)); err == nil {
		t.Error("orbitals that are not orthonormal were accepted")
	}
	if _, err := New(4, trial.RealOrbitals(mat.NewDense(3, 1, []float64{1, 0, 0}), nil)); err == nil {
		t.Error("orbitals with the wrong number of rows were accepted")
	}
	if _, err := New(3, trial.Orbitals{}); err == nil {
		t.Error("a determinant without electrons was accepted")
	}
}
