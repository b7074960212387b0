// Command benchmarks measures, in one run of at most two minutes, how close the
// walk is to the speed of the matrix product, and prints a table.
//
// All times are medians of interleaved rounds, so that what else the machine
// does falls on everything alike: the ratios mean more than the figures.
package main

import (
	"encoding/json"
	"flag"
	"fmt"
	"io"
	"log"
	"math"
	"os"
	"runtime"

	"leadline/afqmc"
	"leadline/benchmarks/synthetic"
	"leadline/hamiltonian/linalg"
	"leadline/hamiltonian/prepared"
)

// report is what --json prints.
type report struct {
	Kernel string  `json:"kernel"`
	Cores  int     `json:"cores"`
	Gemm   []gemm  `json:"gemm"`
	Stages []stage `json:"stages"`
	Step   step    `json:"step"`
	Cores2 float64 `json:"two_cores_over_one,omitempty"`
	Growth growth  `json:"growth"`
}

type gemm struct {
	N            int     `json:"n"`
	GFlops       float64 `json:"gflops"`
	GonumGFlops  float64 `json:"gonum_gflops"`
	SingleGFlops float64 `json:"single_gflops"`
}

type stage struct {
	Name             string  `json:"name"`
	Mflop            float64 `json:"mflop_per_walker"`
	Microseconds     float64 `json:"microseconds_per_walker"`
	GFlops           float64 `json:"gflops"`
	FractionOfKernel float64 `json:"fraction_of_kernel"`
}

type step struct {
	Orbitals         int     `json:"orbitals"`
	PerSpin          int     `json:"electrons_per_spin"`
	Factors          int     `json:"factors"`
	Walkers          int     `json:"walkers"`
	Mflop            float64 `json:"mflop_per_walker"`
	GFlops           float64 `json:"gflops"`
	KernelGFlops     float64 `json:"kernel_gflops"`
	FractionOfKernel float64 `json:"fraction_of_kernel"`
	WalkersPerSecond float64 `json:"walkers_per_second"`
}

type growth struct {
	Orbitals  []int     `json:"orbitals"`
	Seconds   []float64 `json:"seconds_per_walker_step"`
	Measured  float64   `json:"measured_exponent"`
	Predicted float64   `json:"predicted_exponent"`
}

func main() {
	asJSON := flag.Bool("json", false, "print one JSON object")
	ci := flag.Bool("trials", false, "instead, compare CI trials with one determinant")
	file := flag.String("prepared", "", "instead, write a synthetic prepared Hamiltonian to this file, for runs that measure memory")
	orbitals := flag.Int("orbitals", 100, "its orbitals M, with N = M/5 electrons of each spin and 5M factors")
	flag.Parse()
	log.SetFlags(0)
	if *ci {
		trials(os.Stdout)
		return
	}
	if *file != "" {
		if err := writePrepared(*file, *orbitals); err != nil {
			log.Fatal(err)
		}
		return
	}
	r := &report{Kernel: linalg.Kernel(), Cores: runtime.GOMAXPROCS(0)}
	r.products()
	if err := r.walk(); err != nil {
		log.Fatal(err)
	}
	if err := r.sizes(); err != nil {
		log.Fatal(err)
	}
	if *asJSON {
		e := json.NewEncoder(os.Stdout)
		e.SetIndent("", "  ")
		if err := e.Encode(r); err != nil {
			log.Fatal(err)
		}
		return
	}
	r.print(os.Stdout)
}

// writePrepared writes a synthetic Hamiltonian with its closed-shell start.
func writePrepared(name string, m int) error {
	h := synthetic.New(m, m/5, 5*m)
	guide, start, err := synthetic.Guide(h, true, 0)
	if err != nil {
		return err
	}
	expectations, _ := guide.Expectations()
	out, err := os.Create(name)
	if err != nil {
		return err
	}
	err = prepared.Write(out, &prepared.File{
		Hamiltonian: h,
		Reference:   &prepared.Reference{Kind: "rhf", Energy: expectations.Energy(h), Occupied: start.Re},
		Provenance:  prepared.Provenance{Title: "synthetic"},
	})
	if closed := out.Close(); err == nil {
		err = closed
	}
	return err
}

// products times the product of square matrices on one thread beside gonum's.
func (r *report) products() {
	defer runtime.GOMAXPROCS(runtime.GOMAXPROCS(1)) // gonum's product takes every core it gets
	for _, n := range []int{64, 256, 512, 1024} {
		a, b, c := matrix(n), matrix(n), make([]float64, n*n)
		a32, b32, c32 := make([]float32, n*n), make([]float32, n*n), make([]float32, n*n)
		for i := range a {
			a32[i], b32[i] = float32(a[i]), float32(b[i])
		}
		t := interleave(10,
			func() { linalg.Gemm(false, false, n, n, n, 1, a, n, b, n, 0, c, n) },
			func() { gonumProduct(n, a, b, c) },
			func() { linalg.Gemm32(false, false, n, n, n, 1, a32, n, b32, n, 0, c32, n) })
		flops := 2 * math.Pow(float64(n), 3)
		r.Gemm = append(r.Gemm, gemm{n, flops / t[0] / 1e9, flops / t[1] / 1e9, flops / t[2] / 1e9})
	}
}

// walk times the parts of a step and the whole of it at M = 100.
func (r *report) walk() error {
	const m, n, ng, walkers, large = 100, 20, 500, 200, 768
	h := synthetic.New(m, n, ng)
	guide, start, err := synthetic.Guide(h, false, afqmc.ExchangeMemory)
	if err != nil {
		return err
	}
	open := func(cores int) (*afqmc.Walk, error) {
		// The down start differs, so that both spins are propagated.
		return afqmc.NewWalk(guide, start, afqmc.Options{TimeStep: 0.005, Walkers: walkers, Cores: cores})
	}
	w, err := open(1)
	if err != nil {
		return err
	}
	defer w.Close()
	two, err := open(2)
	if err != nil {
		return err
	}
	defer two.Close()
	staged, err := open(1)
	if err != nil {
		return err
	}
	defer staged.Close()
	stages, tile := staged.Stages()

	a, b, c := matrix(large), matrix(large), make([]float64, large*large)
	work := []func(){
		func() { linalg.Gemm(false, false, large, large, large, 1, a, large, b, large, 0, c, large) },
		func() { tenSteps(w) },
		func() { tenSteps(two) },
	}
	stages = append(stages, smallInverses(n, tile))
	for _, s := range stages {
		work = append(work, s.Run)
	}
	t := interleave(10, work...)
	kernel := 2 * math.Pow(large, 3) / t[0]
	for i, s := range stages {
		speed := s.Flops / t[3+i]
		r.Stages = append(r.Stages, stage{s.Name, s.Flops / float64(tile) / 1e6, t[3+i] / float64(tile) * 1e6, speed / 1e9, speed / kernel})
	}
	flops := stepFlops(w, false) + stepFlops(w, true)/10
	speed := 10 * flops / t[1]
	r.Step = step{
		Orbitals: m, PerSpin: n, Factors: ng, Walkers: walkers, Mflop: flops / walkers / 1e6,
		GFlops: speed / 1e9, KernelGFlops: kernel / 1e9, FractionOfKernel: speed / kernel,
		WalkersPerSecond: 10 * walkers / t[1],
	}
	if runtime.GOMAXPROCS(0) >= 2 {
		r.Cores2 = t[1] / t[2]
	}
	return nil
}

// smallInverses inverts the overlap matrices of both spins of a tile.
func smallInverses(n, walkers int) afqmc.Stage {
	count := 2 * walkers
	matrices := make([]float64, count*2*n*n)
	for i, v := range matrix(n) {
		for k := range 2 * count {
			matrices[k*n*n+i] = v
		}
	}
	work := make([]float64, len(matrices))
	logs, phases := make([]float64, count), make([]complex128, count)
	return afqmc.Stage{
		Name:  "small inverses, part of the above",
		Flops: float64(count) * 8 * math.Pow(float64(n), 3),
		Run: func() {
			copy(work, matrices)
			linalg.InvertBatch(n, count, work, logs, phases)
		},
	}
}

// tenSteps does ten steps with local energies in the last one.
func tenSteps(w *afqmc.Walk) {
	for k := range 10 {
		if err := w.Step(false, k == 9); err != nil {
			log.Fatal(err)
		}
	}
	if err := w.Control(); err != nil {
		log.Fatal(err)
	}
}

// stepFlops returns the flops of one step of all walkers in matrix products,
// or of their local energies alone: what the method needs, packed fields counted
// packed.
func stepFlops(w *afqmc.Walk, energies bool) float64 {
	stages, tile := w.Stages()
	sum := 0.0
	for _, s := range stages {
		if (s.Name == "local energy") == energies {
			sum += s.Flops
		}
	}
	return sum / float64(tile) * float64(w.Walkers().Count)
}

// sizes times a step at several sizes with N = M/5 and 5M factors.
func (r *report) sizes() error {
	var work []func()
	var flops []float64
	r.Growth.Orbitals = []int{50, 100, 200}
	const walkers = 32
	for _, m := range r.Growth.Orbitals {
		h := synthetic.New(m, m/5, 5*m)
		guide, start, err := synthetic.Guide(h, false, afqmc.ExchangeMemory)
		if err != nil {
			return err
		}
		w, err := afqmc.NewWalk(guide, start, afqmc.Options{TimeStep: 0.005, Walkers: walkers, Cores: 1})
		if err != nil {
			return err
		}
		defer w.Close()
		flops = append(flops, stepFlops(w, false)/walkers)
		work = append(work, func() {
			if err := w.Step(false, false); err != nil {
				log.Fatal(err)
			}
		})
	}
	for _, t := range interleave(10, work...) {
		r.Growth.Seconds = append(r.Growth.Seconds, t/walkers)
	}
	r.Growth.Measured = slope(r.Growth.Orbitals, r.Growth.Seconds)
	r.Growth.Predicted = slope(r.Growth.Orbitals, flops)
	return nil
}

func (r *report) print(w io.Writer) {
	fmt.Fprintf(w, "kernel %s, %d cores, medians of interleaved rounds\n\n", r.Kernel, r.Cores)
	fmt.Fprintf(w, "product of square matrices, one thread, GFLOP/s\n%8s %10s %10s %8s %10s\n", "n", "float64", "gonum", "ratio", "float32")
	for _, g := range r.Gemm {
		fmt.Fprintf(w, "%8d %10.1f %10.1f %8.1f %10.1f\n", g.N, g.GFlops, g.GonumGFlops, g.GFlops/g.GonumGFlops, g.SingleGFlops)
	}
	s := r.Step
	fmt.Fprintf(w, "\none step, M = %d, N = %d per spin, %d factors, %d walkers, one thread; kernel %.1f GFLOP/s\n", s.Orbitals, s.PerSpin, s.Factors, s.Walkers, s.KernelGFlops)
	fmt.Fprintf(w, "%-34s %12s %12s %10s %10s\n", "part", "Mflop/walker", "µs/walker", "GFLOP/s", "of kernel")
	for _, g := range r.Stages {
		fmt.Fprintf(w, "%-34s %12.2f %12.1f %10.1f %10.2f\n", g.Name, g.Mflop, g.Microseconds, g.GFlops, g.FractionOfKernel)
	}
	fmt.Fprintf(w, "%-34s %12.2f %12.1f %10.1f %10.2f\n", "whole step, energy every tenth", s.Mflop, 1e6/s.WalkersPerSecond, s.GFlops, s.FractionOfKernel)
	fmt.Fprintf(w, "%.0f walker-steps per second", s.WalkersPerSecond)
	if r.Cores2 > 0 {
		fmt.Fprintf(w, "; two cores over one: %.2f", r.Cores2)
	}
	fmt.Fprintf(w, "\n\ntime of a step against size at N = M/5, 5M factors: M")
	for i, m := range r.Growth.Orbitals {
		fmt.Fprintf(w, " %d: %.3g ms", m, 1e3*r.Growth.Seconds[i])
	}
	fmt.Fprintf(w, " per walker\nexponent in M: measured %.2f, from the flop count %.2f\n", r.Growth.Measured, r.Growth.Predicted)
}
