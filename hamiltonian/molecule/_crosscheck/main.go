// Command _crosscheck compares the integrals of package integral with those of the
// general-purpose library libint2, s to f. It is no part of the build; run.sh
// builds both halves and runs them:
//
//	apt-get install libint2-dev g++
//	hamiltonian/molecule/_crosscheck/run.sh
//
// It prints the largest difference of each kind and fails above 1e-10.
package main

import (
	"bytes"
	"encoding/binary"
	"fmt"
	"log"
	"math"
	"math/rand/v2"
	"os"
	"os/exec"

	"gonum.org/v1/gonum/mat"

	"leadline/hamiltonian"
	"leadline/hamiltonian/basis"
	"leadline/hamiltonian/molecule/integral"
)

func main() {
	log.SetFlags(0)
	if len(os.Args) != 2 {
		log.Fatal("usage: _crosscheck LIBRARY_PROGRAM")
	}
	worst := 0.0
	for seed := range uint64(4) {
		worst = max(worst, compare(fmt.Sprintf("invented shells s to f, seed %d", seed), os.Args[1], invented(seed, 3, 3)))
		compare(fmt.Sprintf("invented shells s to g, for the eye, seed %d", seed), os.Args[1], invented(seed, 4, 1))
	}
	for _, name := range []string{"6-31G", "cc-pVDZ", "def2-TZVP"} {
		worst = max(worst, compare("HCl "+name, os.Args[1], published(name)))
	}
	fmt.Printf("largest difference, s to f: %.1e\n", worst)
	if !(worst < 1e-10) {
		log.Fatal("expected less than 1e-10")
	}
}

// invented returns shells s to l of one to four primitives, some on a common
// centre, with exponents from exp(−width) to exp(width). Of quartets of g shells the
// library loses digits: 3e-10 with width 1, 1e-7 with width 3, where the values of
// package integral agree with arithmetic of 60 digits to 1e-15 (its test
// TestHighPrecision has such shells). So g shells do not count here.
func invented(seed uint64, highest int, width float64) []integral.Shell {
	random := rand.New(rand.NewPCG(seed, 3))
	var shells []integral.Shell
	center := [3]float64{}
	for l := range highest + 1 {
		for range 1 + (l+1)%2 {
			if random.IntN(3) > 0 {
				for axis := range center {
					center[axis] = 3 * (random.Float64() - 0.5)
				}
			}
			s := integral.Shell{Center: center, L: l}
			for range 1 + random.IntN(4) {
				s.Exponents = append(s.Exponents, math.Exp(width*(2*random.Float64()-1)))
				s.Coefficients = append(s.Coefficients, random.Float64()-0.3)
			}
			shells = append(shells, s)
		}
	}
	return shells
}

// published returns the shells of hydrogen chloride in an embedded basis.
func published(name string) []integral.Shell {
	set, err := basis.Named(name)
	if err != nil {
		log.Fatal(err)
	}
	var shells []integral.Shell
	for i, z := range []int{17, 1} {
		list, err := set.Shells(z)
		if err != nil {
			log.Fatal(err)
		}
		for _, s := range list {
			shells = append(shells, integral.Shell{Center: [3]float64{0, 0, 2.41 * float64(i)}, L: s.L, Exponents: s.Exponents, Coefficients: s.Coefficients})
		}
	}
	return shells
}

var nuclei = []integral.Nucleus{{Charge: 17}, {Charge: 1, Position: [3]float64{0, 0, 2.41}}, {Charge: 6, Position: [3]float64{-0.7, 0.4, 1.1}}}

func compare(what, program string, shells []integral.Shell) float64 {
	var input bytes.Buffer
	fmt.Fprintln(&input, len(shells))
	for _, s := range shells {
		fmt.Fprintln(&input, s.L, len(s.Exponents), s.Center[0], s.Center[1], s.Center[2])
		for _, list := range [][]float64{s.Exponents, s.Coefficients} {
			for _, v := range list {
				fmt.Fprint(&input, v, " ")
			}
		}
		fmt.Fprintln(&input)
	}
	fmt.Fprintln(&input, len(nuclei))
	for _, n := range nuclei {
		fmt.Fprintln(&input, n.Charge, n.Position[0], n.Position[1], n.Position[2])
	}
	command := exec.Command(program)
	command.Stdin, command.Stderr = &input, os.Stderr
	out, err := command.Output()
	if err != nil {
		log.Fatal(err)
	}
	f := integral.New(shells, false)
	n := f.Count()
	if len(out) != 8*(6*n*n+n*n*n*n) {
		log.Fatalf("library wrote %d bytes, expected %d", len(out), 8*(6*n*n+n*n*n*n))
	}
	theirs := make([]float64, len(out)/8)
	if _, err := binary.Decode(out, binary.NativeEndian, theirs); err != nil {
		log.Fatal(err)
	}
	fmt.Printf("%s, %d functions\n", what, n)
	worst := 0.0
	report := func(kind string, largest, size float64) {
		fmt.Printf("  %-12s largest difference %.1e, largest integral %.3g\n", kind, largest, size)
		worst = max(worst, largest)
	}
	d := f.Dipole()
	for k, m := range []*mat.SymDense{f.Overlap(), f.Kinetic(), f.Attraction(nuclei), d[0], d[1], d[2]} {
		largest, size := 0.0, 0.0
		for p := range n {
			for q := range n {
				v := m.At(p, q)
				largest = max(largest, math.Abs(v-theirs[(k*n+p)*n+q]))
				size = max(size, math.Abs(v))
			}
		}
		report([]string{"overlap", "kinetic", "attraction", "x", "y", "z"}[k], largest, size)
	}
	g := f.Repulsion()
	largest, size := 0.0, 0.0
	for p := range n {
		for q := range n {
			for r := range n {
				for s := range n {
					v := g.At(hamiltonian.Pair(p, q), hamiltonian.Pair(r, s))
					largest = max(largest, math.Abs(v-theirs[6*n*n+((p*n+q)*n+r)*n+s]))
					size = max(size, math.Abs(v))
				}
			}
		}
	}
	report("repulsion", largest, size)
	return worst
}
