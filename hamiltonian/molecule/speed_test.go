package molecule_test

import (
	"context"
	"fmt"
	"math"
	"testing"
	"time"

	"leadline/hamiltonian/molecule"
)

func benzene() molecule.Geometry {
	var g molecule.Geometry
	for k := range 6 {
		c, s := math.Cos(float64(k)*math.Pi/3), math.Sin(float64(k)*math.Pi/3)
		for _, a := range []struct {
			symbol string
			r      float64
		}{{"C", 1.3915}, {"H", 2.4715}} {
			atom, _ := molecule.NewAtom(a.symbol, [3]float64{a.r * c, a.r * s, 0}, molecule.Angstrom)
			g = append(g, atom)
		}
	}
	return g
}

func TestSpeed(t *testing.T) {
	for _, b := range []string{"6-31G", "cc-pVDZ", "cc-pVTZ"} {
		t0 := time.Now()
		r, err := molecule.Build(context.Background(), benzene(), set(t, b), molecule.Options{Tolerance: 1e-5})
		fmt.Println(b, r.Hamiltonian.Orbitals, r.Hamiltonian.Factors.Count(), r.Quartets, r.Residual, time.Since(t0), err)
	}
}
