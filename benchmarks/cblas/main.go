// Command cblas times the product of package linalg beside OpenBLAS and gonum,
// on one thread, interleaved in one run, and prints medians (of processor time on
// Linux, so that it can be used on a busy machine). It is a module of
// its own, because it needs cgo and an installed C library; the project does not.
//
//	go -C benchmarks/cblas run . [-rounds 15] [-core SkylakeX]
//
// OpenBLAS can mistake the processor it runs on. The command therefore starts
// itself again with the core type set, one thread, and no cache size left over
// in the environment.
package main

import (
	"errors"
	"flag"
	"fmt"
	"os"
	"os/exec"
	"runtime"
	"slices"
	"strings"
	"time"

	"golang.org/x/sys/cpu"
	"gonum.org/v1/gonum/blas"
	"gonum.org/v1/gonum/blas/gonum"

	"leadline/hamiltonian/linalg"
)

const again = "LEADLINE_CBLAS_CHILD"

func main() {
	rounds := flag.Int("rounds", 15, "timings of each product, interleaved; the median is printed")
	core := flag.String("core", coreType(), "core type for OpenBLAS")
	flag.Parse()
	if os.Getenv(again) == "" {
		os.Exit(restart(*core))
	}
	runtime.GOMAXPROCS(1)
	fmt.Printf("kernel %s, OpenBLAS for %s, one thread, median of %d interleaved rounds, GFLOP/s\n", linalg.Kernel(), coreName(), *rounds)
	fmt.Printf("%-18s %9s %9s %9s %12s %9s\n", "m × n × k", "leadline", "OpenBLAS", "gonum", "of OpenBLAS", "of gonum")
	for _, s := range [][3]int{
		{64, 64, 64}, {128, 128, 128}, {256, 256, 256}, {512, 512, 512}, {1024, 1024, 1024},
		{100, 20, 100}, {200, 40, 200}, {400, 80, 400}, {64, 5050, 500},
	} {
		rate := measure(*rounds, s[0], s[1], s[2])
		fmt.Printf("%-18s %9.1f %9.1f %9.1f %12.2f %9.2f\n", fmt.Sprintf("%d × %d × %d", s[0], s[1], s[2]),
			rate[0], rate[1], rate[2], rate[0]/rate[1], rate[0]/rate[2])
	}
	single := measureSingle(*rounds, 1024)
	fmt.Printf("single precision, n = 1024: leadline %.1f, OpenBLAS %.1f, ratio %.2f\n", single[0], single[1], single[0]/single[1])
}

// coreType names the OpenBLAS kernels that fit the processor.
func coreType() string {
	if cpu.X86.HasAVX512F {
		return "SkylakeX"
	}
	return "Haswell"
}

func restart(core string) int {
	self, err := os.Executable()
	if err != nil {
		fmt.Fprintln(os.Stderr, "cblas:", err)
		return 1
	}
	cmd := exec.Command(self, os.Args[1:]...)
	for _, v := range os.Environ() {
		if !strings.HasPrefix(v, "OPENBLAS_") {
			cmd.Env = append(cmd.Env, v)
		}
	}
	cmd.Env = append(cmd.Env, again+"=1", "OPENBLAS_NUM_THREADS=1", "OMP_NUM_THREADS=1", "OPENBLAS_CORETYPE="+core)
	cmd.Stdout, cmd.Stderr = os.Stdout, os.Stderr
	err = cmd.Run()
	var exit *exec.ExitError
	if errors.As(err, &exit) {
		return exit.ExitCode()
	}
	if err != nil {
		fmt.Fprintln(os.Stderr, "cblas:", err)
		return 1
	}
	return 0
}

// measure returns the rates of linalg, OpenBLAS and gonum for one shape.
func measure(rounds, m, n, k int) []float64 {
	a, b, c := make([]float64, m*k), make([]float64, k*n), make([]float64, m*n)
	for i := range a {
		a[i] = 1 / float64(i+1)
	}
	for i := range b {
		b[i] = 1 / float64(i+2)
	}
	return rates(rounds, 2*float64(m)*float64(n)*float64(k),
		func() { linalg.Gemm(false, false, m, n, k, 1, a, k, b, n, 0, c, n) },
		func() { dgemm(m, n, k, a, b, c) },
		func() {
			gonum.Implementation{}.Dgemm(blas.NoTrans, blas.NoTrans, m, n, k, 1, a, k, b, n, 0, c, n)
		})
}

func measureSingle(rounds, n int) []float64 {
	a, b, c := make([]float32, n*n), make([]float32, n*n), make([]float32, n*n)
	for i := range a {
		a[i], b[i] = 1/float32(i+1), 1/float32(i+2)
	}
	return rates(rounds, 2*float64(n)*float64(n)*float64(n),
		func() { linalg.Gemm32(false, false, n, n, n, 1, a, n, b, n, 0, c, n) },
		func() { sgemm(n, n, n, a, b, c) })
}

// rates times the functions in turn, each often enough to last some 5 ms, and
// returns the medians in GFLOP/s.
func rates(rounds int, flops float64, functions ...func()) []float64 {
	repeat := make([]int, len(functions))
	for i, f := range functions {
		f()
		start := clock()
		for repeat[i] = 0; repeat[i] == 0 || clock()-start < 5*time.Millisecond; repeat[i]++ {
			f()
		}
	}
	times := make([][]float64, len(functions))
	for range rounds {
		for i, f := range functions {
			start := clock()
			for range repeat[i] {
				f()
			}
			times[i] = append(times[i], (clock()-start).Seconds()/float64(repeat[i]))
		}
	}
	out := make([]float64, len(functions))
	for i := range out {
		slices.Sort(times[i])
		out[i] = flops / times[i][rounds/2] * 1e-9
	}
	return out
}
