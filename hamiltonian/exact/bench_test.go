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
// of large products of package linalg on all cores, taken in turn with H x so
// that both see the same load of the machine.
func BenchmarkApply(b *testing.B) {
	const n = 512
	matrix := randomVector(n*n, 1)
	cores := runtime.GOMAXPROCS(0)
	out := make([][]float64, cores)
	for i := range out {
		out[i] = make([]float64, n*n)
	}
	for _, orbitals := range []int{8, 10, 12} {
		b.Run(fmt.Sprintf("%din%d", orbitals, orbitals), func(b *testing.B) {
			h := randomHamiltonian(hamiltonian.Sector{Orbitals: orbitals, Up: orbitals / 2, Down: orbitals / 2}, orbitals, 0, true, 1)
			o, err := NewOperator(h)
			if err != nil {
				b.Fatal(err)
			}
			x, y := randomVector(o.Dim(), 1), make([]float64, o.Dim())
			o.Apply(y, x)
			var products time.Duration
			b.ReportAllocs()
			for b.Loop() {
				o.Apply(y, x)
				b.StopTimer()
				start := time.Now()
				each(cores, func(i int) {
					linalg.Gemm(false, false, n, n, n, 1, matrix, n, matrix, n, 0, out[i], n)
				})
				products += time.Since(start)
				b.StartTimer()
			}
			rate := o.Flops() * float64(b.N) / b.Elapsed().Seconds() / float64(cores)
			kernel := 2 * n * n * n * float64(b.N) / products.Seconds()
			b.ReportMetric(o.Flops()/1e9, "gflop/op")
			b.ReportMetric(rate/1e9, "gflops/core")
			b.ReportMetric(rate/kernel, "kernel")
		})
	}
}
