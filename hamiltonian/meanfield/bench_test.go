package meanfield

import (
	"fmt"
	"math"
	"math/rand/v2"
	"testing"

	"gonum.org/v1/gonum/mat"

	"leadline/hamiltonian"
)

// large returns a Hamiltonian of the size of benzene in a double-zeta basis,
// invented but of physical scale.
func large(m, electrons, factors int) *hamiltonian.Hamiltonian {
	random := rand.New(rand.NewPCG(1, 2))
	h := &hamiltonian.Hamiltonian{Sector: hamiltonian.Sector{Orbitals: m, Up: electrons, Down: electrons}}
	one := mat.NewSymDense(m, nil)
	for p := range m {
		one.SetSym(p, p, -4+6*math.Sqrt(float64(p)/float64(m)))
		for q := range p {
			one.SetSym(p, q, 0.1*random.NormFloat64()/(1+math.Abs(float64(p-q))))
		}
	}
	h.OneBody = [2]*mat.SymDense{one, one}
	h.Factors = hamiltonian.NewFactors(m, factors)
	for g := range factors {
		scale := math.Exp(-6 * float64(g) / float64(factors))
		row := h.Factors.Row(g, 0)
		for p := range m {
			for q := range p + 1 {
				row[hamiltonian.Pair(p, q)] = 0.1 * scale * random.NormFloat64() / (1 + math.Abs(float64(p-q)))
			}
			if g == 0 {
				row[hamiltonian.Pair(p, p)] += 0.4
			}
		}
	}
	return h
}

// BenchmarkTwoBody times one Fock build of a closed shell and reports its rate;
// the flops are those of the exchange, 4·ng·N·M².
func BenchmarkTwoBody(b *testing.B) {
	for _, size := range []struct{ m, n, factors int }{{20, 4, 100}, {50, 10, 250}, {114, 21, 600}} {
		b.Run(fmt.Sprint(size.m), func(b *testing.B) {
			h := large(size.m, size.n, size.factors)
			c := orthonormal(size.m, size.n, rand.New(rand.NewPCG(1, 1)))
			d := densities([2]*mat.Dense{c, c})
			build := newBuilder(h)
			for b.Loop() {
				build.twoBody(d)
			}
			flops := 4 * float64(size.factors*size.n*size.m*size.m)
			b.ReportMetric(flops*float64(b.N)/b.Elapsed().Seconds()/1e9, "GFLOP/s")
		})
	}
}
