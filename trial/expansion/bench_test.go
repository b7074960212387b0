package expansion

import (
	"fmt"
	"math/rand/v2"
	"testing"

	"gonum.org/v1/gonum/mat"

	"leadline/hamiltonian"
	"leadline/hamiltonian/strings"
	"leadline/trial"
	"leadline/trial/determinant"
	"leadline/trial/trialtest"
)

// The benchmarks' system: M = 50 orbitals, 10 electrons of each spin, 250
// factors, tiles of 32 walkers.
const (
	benchOrbitals = 50
	benchFactors  = 250
	benchWalkers  = 32
)

// benchHamiltonian has levels 0.1 apart in the benchmarks' orbitals and weak
// random factors, so that walkers stay near the first determinant.
func benchHamiltonian(electrons int) *hamiltonian.Hamiltonian {
	h := trialtest.RandomHamiltonian(hamiltonian.Sector{Orbitals: benchOrbitals, Up: electrons, Down: electrons}, benchFactors, 0, false, 1)
	for g := range h.Factors.Sign {
		h.Factors.Sign[g] = 1
	}
	for k := range h.Factors.Packed[0] {
		h.Factors.Packed[0][k] *= 0.02
	}
	columns := benchColumns()
	for p := range benchOrbitals {
		for q := range p + 1 {
			var v float64
			for k := range benchOrbitals {
				v += 0.1 * float64(k) * columns.At(p, k) * columns.At(q, k)
			}
			h.OneBody[0].SetSym(p, q, v)
		}
	}
	return h
}

func benchColumns() *mat.Dense { return randomRotation(benchOrbitals, rand.New(rand.NewPCG(7, 8))) }

// benchExpansion has e electrons in as many active orbitals, 10 electrons of each
// spin in all; with n > 0 only n determinants, those that an amplitude falling
// off with the excitation of either string makes the largest.
func benchExpansion(e, n int, symmetric bool) *Expansion {
	rng := rand.New(rand.NewPCG(5, 6))
	table := strings.New(e, e/2)
	masks := table.Masks()
	c := make([]float64, len(masks)*len(masks))
	excitation := func(mask uint64) int { return electrons(mask >> (e / 2)) }
	for i, a := range masks {
		for j, b := range masks {
			scale := 1.0
			for range excitation(a) + excitation(b) {
				scale *= 0.4
			}
			c[i*len(masks)+j] = scale * rng.NormFloat64()
			if symmetric && j < i {
				c[i*len(masks)+j] = c[j*len(masks)+i]
			}
		}
	}
	c[0] = 1
	out := FromMatrix(benchOrbitals, 10-e/2, table, table, c, nil)
	out.Columns = benchColumns()
	if n > 0 {
		out = out.Truncate(n)
	}
	return out
}

// benchWalkersOf returns walkers around the first determinant.
func benchWalkersOf(e *Expansion, paired bool) trial.Walkers {
	w := trialtest.RandomWalkers(e.Sector(), paired, benchWalkers, 3)
	for i := range w.Count {
		for spin := range 2 {
			if spin == 1 && paired {
				continue
			}
			for p := range w.Orbitals {
				for j := range w.Electrons(spin) {
					v := complex(e.Columns.At(p, j), 0)
					w.Set(i, spin, p, j, v+0.08*w.At(i, spin, p, j))
				}
			}
		}
	}
	return w
}

func benchSources(b *testing.B, paired bool) map[string]trial.Source {
	sources := map[string]trial.Source{}
	for name, e := range map[string]*Expansion{
		"10in10":   benchExpansion(10, 0, paired),
		"12in12":   benchExpansion(12, 0, paired),
		"selected": benchExpansion(12, 10000, paired),
	} {
		s, err := New(e)
		if err != nil {
			b.Fatal(err)
		}
		sources[name] = s
	}
	columns := benchExpansion(10, 1, false).Columns
	up := mat.DenseCopyOf(columns.Slice(0, benchOrbitals, 0, 10))
	down := mat.DenseCopyOf(columns.Slice(0, benchOrbitals, 0, 10))
	if !paired { // another determinant, as unrestricted orbitals are
		down.SetCol(9, mat.Col(nil, 10, columns))
	}
	d, err := determinant.New(benchOrbitals, trial.RealOrbitals(up, down))
	if err != nil {
		b.Fatal(err)
	}
	sources["determinant"] = d
	return sources
}

// BenchmarkStep gives the time that the trial takes of a step for each walker:
// overlap, density and field expectations each time, and the local energy every
// tenth time.
func BenchmarkStep(b *testing.B) {
	h := benchHamiltonian(10)
	for _, paired := range []bool{false, true} {
		sources := benchSources(b, paired)
		for _, name := range []string{"determinant", "10in10", "12in12", "selected"} {
			source := sources[name]
			g, err := trial.NewGuide(h, source, 1<<30)
			if err != nil {
				b.Fatal(err)
			}
			m := g.NewMixed(benchWalkers)
			w := benchWalkersOf(benchExpansion(10, 1, false), paired)
			report := func(b *testing.B) {
				b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(b.N)/benchWalkers/1000, "µs/walker")
				b.ReportMetric(0, "ns/op")
			}
			b.Run(fmt.Sprintf("paired=%v/%s/evaluate", paired, name), func(b *testing.B) {
				for b.Loop() {
					g.Evaluate(m, w)
				}
				report(b)
			})
			b.Run(fmt.Sprintf("paired=%v/%s/energy", paired, name), func(b *testing.B) {
				g.Evaluate(m, w)
				for b.Loop() {
					g.LocalEnergies(m, w)
				}
				report(b)
			})
		}
	}
}
