package linalg

import (
	"fmt"
	"math/rand/v2"
	"testing"
)

// Shapes m×n×k of the walk's products: exp(X)·φ for real and imaginary parts
// stacked, and fields, half-rotated factors and the supermatrix against a tile
// of walkers.
var (
	squares = [][3]int{{64, 64, 64}, {256, 256, 256}, {512, 512, 512}, {1024, 1024, 1024}}
	taylor  = [][3]int{{20, 4, 20}, {60, 20, 60}, {100, 20, 100}, {200, 40, 200}, {200, 80, 200}, {400, 160, 400}}
	tiles   = [][3]int{{64, 5050, 500}, {32, 5050, 500}, {64, 500, 2000}, {64, 2000, 2000}, {64, 20000, 1000}}
)

func BenchmarkGemm(b *testing.B)   { benchmarkGemm[float64](b) }
func BenchmarkGemm32(b *testing.B) { benchmarkGemm[float32](b) }

func benchmarkGemm[T float](b *testing.B) {
	rng := rand.New(rand.NewPCG(1, 2))
	for _, tier := range tiers() {
		for _, shape := range append(append([][3]int(nil), squares...), taylor...) {
			m, n, k := shape[0], shape[1], shape[2]
			x, y, z := random[T](rng, m*k), random[T](rng, k*n), make([]T, m*n)
			b.Run(fmt.Sprintf("%v/%dx%dx%d", tier, m, n, k), func(b *testing.B) {
				for b.Loop() {
					product(tier, false, false, m, n, k, 1, x, k, y, n, 0, z, n)
				}
				gflops(b, 2*float64(m)*float64(n)*float64(k))
			})
		}
	}
}

func BenchmarkPacked(b *testing.B)   { benchmarkPacked[float64](b) }
func BenchmarkPacked32(b *testing.B) { benchmarkPacked[float32](b) }

func benchmarkPacked[T float](b *testing.B) {
	rng := rand.New(rand.NewPCG(1, 3))
	for _, tier := range tiers()[1:] {
		for _, shape := range tiles {
			m, n, k := shape[0], shape[1], shape[2]
			x, y, z := random[T](rng, m*k), random[T](rng, k*n), make([]T, m*n)
			p := pack(tier, false, k, n, y, n)
			b.Run(fmt.Sprintf("%v/%dx%dx%d", tier, m, n, k), func(b *testing.B) {
				for b.Loop() {
					p.multiply(m, 1, x, k, 0, z, n)
				}
				gflops(b, 2*float64(m)*float64(n)*float64(k))
			})
		}
	}
}

// gflops reports the rate of an operation of so many flops.
func gflops(b *testing.B, flops float64) {
	b.ReportMetric(flops*float64(b.N)/b.Elapsed().Seconds()*1e-9, "GFLOP/s")
}

func BenchmarkInvertBatch(b *testing.B) {
	defer func(was tier) { active = was }(active)
	for _, t := range tiers() {
		active = t
		for _, n := range []int{1, 2, 5, 10, 20, 40, 60} {
			count := 1 + 4000/(n*n)
			a := random[float64](rand.New(rand.NewPCG(1, 4)), 2*n*n*count)
			logAbs, phase := make([]float64, count), make([]complex128, count)
			b.Run(fmt.Sprintf("%v/%d", t, n), func(b *testing.B) {
				for b.Loop() {
					InvertBatch(n, count, a, logAbs, phase)
				}
				gflops(b, 8*float64(n*n*n*count))
				b.ReportMetric(b.Elapsed().Seconds()/float64(b.N*count)*1e9, "ns/matrix")
			})
		}
	}
}

func BenchmarkLogDetBatch(b *testing.B) {
	for _, n := range []int{5, 20, 60} {
		count := 1 + 4000/(n*n)
		a := random[float64](rand.New(rand.NewPCG(1, 5)), 2*n*n*count)
		logAbs, phase := make([]float64, count), make([]complex128, count)
		b.Run(fmt.Sprint(n), func(b *testing.B) {
			for b.Loop() {
				LogDetBatch(n, count, a, logAbs, phase)
			}
			gflops(b, 8./3*float64(n*n*n*count))
		})
	}
}

func BenchmarkPfaffian(b *testing.B) {
	for _, n := range []int{10, 40} {
		re := random[float64](rand.New(rand.NewPCG(1, 7)), n*n)
		im := random[float64](rand.New(rand.NewPCG(1, 8)), n*n)
		b.Run(fmt.Sprint(n), func(b *testing.B) {
			for b.Loop() {
				Pfaffian(n, re, im)
			}
			gflops(b, 8./3*float64(n*n*n))
		})
	}
}
