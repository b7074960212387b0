package molecule_test

import (
	"fmt"
	"math"
	"testing"

	"leadline/hamiltonian/molecule"
)

func benzene() molecule.Geometry {
	var g molecule.Geometry
	for k := range 6 {
		s, c := math.Sincos(float64(k) * math.Pi / 3)
		for z, r := range map[int]float64{6: 1.3915, 1: 2.4715} { // ångström
			r *= float64(molecule.Angstrom)
			g = append(g, molecule.Atom{Z: z, Position: [3]float64{r * c, r * s, 0}})
		}
	}
	return g
}

// chain returns n hydrogen atoms, 1.8 bohr apart.
func chain(n int) molecule.Geometry {
	var g molecule.Geometry
	for i := range n {
		g = append(g, molecule.Atom{Z: 1, Position: [3]float64{0, 0, 1.8 * float64(i)}})
	}
	return g
}

// Integrals and factorisation of whole molecules: goals are water cc-pVTZ in 10 s
// (with the mean field) and benzene cc-pVDZ in 180 s and 2 GB, on two cores. The
// chains show the growth with size.
func BenchmarkBuild(b *testing.B) {
	for _, c := range []struct {
		name, basis string
		geometry    molecule.Geometry
	}{
		{"water", "cc-pVTZ", bent(8, 1.81, 104.5)}, {"benzene", "cc-pVDZ", benzene()},
		{"chain10", "cc-pVDZ", chain(10)}, {"chain20", "cc-pVDZ", chain(20)}, {"chain40", "cc-pVDZ", chain(40)},
	} {
		b.Run(fmt.Sprintf("%s/%s", c.name, c.basis), func(b *testing.B) {
			b.ReportAllocs()
			for b.Loop() {
				r := build(b, c.geometry, c.basis, molecule.Options{Tolerance: 1e-5})
				b.ReportMetric(float64(r.Hamiltonian.Orbitals), "functions")
				b.ReportMetric(float64(r.Hamiltonian.Factors.Count()), "factors")
				b.ReportMetric(float64(r.Quartets), "quartets")
			}
		})
	}
}
