package main

import (
	"context"
	"fmt"
	"testing"

	"leadline/afqmc"
	"leadline/benchmarks/synthetic"
	"leadline/hamiltonian"
	"leadline/hamiltonian/factorize"
	"leadline/hamiltonian/linalg"
)

// sizes are orbitals; N = M/5 per spin, 5M factors, 100 walkers.
var sizes = []int{20, 50, 100}

func newWalk(b *testing.B, m, walkers int, closed bool) *afqmc.Walk {
	b.Helper()
	h := synthetic.New(m, m/5, 5*m)
	guide, start, err := synthetic.Guide(h, closed, afqmc.ExchangeMemory)
	if err != nil {
		b.Fatal(err)
	}
	w, err := afqmc.NewWalk(guide, start, afqmc.Options{TimeStep: 0.005, Walkers: walkers, Cores: 1})
	if err != nil {
		b.Fatal(err)
	}
	b.Cleanup(w.Close)
	return w
}

// BenchmarkStep times a step without local energies.
func BenchmarkStep(b *testing.B) {
	for _, m := range sizes {
		for _, closed := range []bool{true, false} {
			b.Run(fmt.Sprintf("M=%d/closed=%v", m, closed), func(b *testing.B) {
				w := newWalk(b, m, 100, closed)
				flops := stepFlops(w, false)
				b.ReportAllocs()
				for b.Loop() {
					if err := w.Step(false, false); err != nil {
						b.Fatal(err)
					}
				}
				rate(b, flops)
			})
		}
	}
}

// BenchmarkLocalEnergy times the local energies of a tile.
func BenchmarkLocalEnergy(b *testing.B) {
	for _, m := range sizes {
		b.Run(fmt.Sprintf("M=%d", m), func(b *testing.B) {
			stages, _ := newWalk(b, m, 100, false).Stages()
			energy := stages[len(stages)-1]
			for b.Loop() {
				energy.Run()
			}
			rate(b, energy.Flops)
		})
	}
}

// BenchmarkFactorization times the pivoted Cholesky factorisation of integrals
// of known rank 5M: about ng²·M²/2 flops for the updates.
func BenchmarkFactorization(b *testing.B) {
	for _, m := range sizes {
		b.Run(fmt.Sprintf("M=%d", m), func(b *testing.B) {
			if m > 50 && testing.Short() {
				b.Skip("large")
			}
			v := newGramMatrix(synthetic.New(m, m/5, 5*m))
			var factors int
			for b.Loop() {
				f, _, err := factorize.Cholesky(context.Background(), v, 1e-8)
				if err != nil {
					b.Fatal(err)
				}
				factors = f.Count()
			}
			ng, pairs := float64(factors), float64(hamiltonian.Pairs(m))
			rate(b, ng*ng*pairs)
			b.ReportMetric(ng, "factors")
		})
	}
}

// gramMatrix is (pq|rs) = Σ_g L^g_pq L^g_rs held whole.
type gramMatrix struct {
	pairs int
	data  []float64
}

func newGramMatrix(h *hamiltonian.Hamiltonian) *gramMatrix {
	n, ng := hamiltonian.Pairs(h.Orbitals), h.Factors.Count()
	v := &gramMatrix{pairs: n, data: make([]float64, n*n)}
	l := h.Factors.Packed[hamiltonian.Up]
	linalg.Gemm(true, false, n, n, ng, 1, l, n, l, n, 0, v.data, n)
	return v
}

func (v *gramMatrix) Dim() int { return v.pairs }

func (v *gramMatrix) Diagonal(dst []float64) {
	for i := range dst {
		dst[i] = v.data[i*v.pairs+i]
	}
}

func (v *gramMatrix) Column(j int, dst []float64) { copy(dst, v.data[j*v.pairs:(j+1)*v.pairs]) }

func rate(b *testing.B, flops float64) {
	b.ReportMetric(flops*float64(b.N)/b.Elapsed().Seconds()/1e9, "GFLOP/s")
	b.ReportMetric(flops/1e6, "Mflop/op")
}
