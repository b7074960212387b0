package exact

import (
	"fmt"
	"runtime"
	"testing"
	"time"

	"leadline/hamiltonian"
	"leadline/hamiltonian/linalg"
)

// BenchmarkApply measures H x for n electrons in n orbitals with a dense two-body
// part. gflops/core counts matrix products only; kernel is its ratio to the rate
// of large products of package linalg, one per core at a time, in the same run.
func BenchmarkApply(b *testing.B) {
	const n = 768
	x := randomVector(n*n, 1)
	products := 4 * runtime.GOMAXPROCS(0)
	start := time.Now()
	each(products, func(int) {
		linalg.Gemm(false, false, n, n, n, 1, x, n, x, n, 0, make([]float64, n*n), n)
	})
	kernel := 4 * 2 * n * n * n / time.Since(start).Seconds()

	for _, orbitals := range []int{8, 10, 12} {
		b.Run(fmt.Sprintf("%din%d", orbitals, orbitals), func(b *testing.B) {
			h := randomHamiltonian(hamiltonian.Sector{Orbitals: orbitals, Up: orbitals / 2, Down: orbitals / 2}, orbitals, 0, true, 1)
			o, err := NewOperator(h)
			if err != nil {
				b.Fatal(err)
			}
			x, y := randomVector(o.Dim(), 1), make([]float64, o.Dim())
			b.ReportAllocs()
			for b.Loop() {
				o.Apply(y, x)
			}
			rate := o.Flops() * float64(b.N) / b.Elapsed().Seconds() / float64(runtime.GOMAXPROCS(0))
			b.ReportMetric(o.Flops()/1e9, "gflop/op")
			b.ReportMetric(rate/1e9, "gflops/core")
			b.ReportMetric(rate/kernel, "kernel")
		})
	}
}
