package afqmc

import (
	"fmt"
	"math"
	"math/cmplx"

	"leadline/trial"
)

// CheckTrial puts a single-determinant trial itself in the place of a walker:
// the overlap must be 1 and the local energy real and equal to ⟨Ψ_T|H|Ψ_T⟩,
// which is computed another way. A source that is no determinant passes.
func CheckTrial(g *trial.Guide) error {
	source, ok := g.Source.(interface{ Orbitals() trial.Orbitals })
	if !ok {
		return nil
	}
	expectations, ok := g.Expectations()
	if !ok {
		return nil
	}
	w := trial.NewWalkers(g.Hamiltonian.Sector, false, 1)
	w.Fill(source.Orbitals())
	m := g.NewMixed(1)
	g.Evaluate(m, w)
	g.LocalEnergies(m, w)
	want := expectations.Energy(g.Hamiltonian)
	if d := cmplx.Abs(m.Overlap[0].Value() - 1); !(d < 1e-5) {
		return fmt.Errorf("the trial's overlap with itself is %.8g, expected 1", m.Overlap[0].Value())
	}
	if d := cmplx.Abs(m.Energy[0] - complex(want, 0)); !(d < 2e-6*math.Max(1, math.Abs(want))) {
		return fmt.Errorf("the trial's local energy in itself is %.10g, expected its own energy %.10g", m.Energy[0], want)
	}
	return nil
}
