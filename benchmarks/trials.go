package main

import (
	"fmt"
	"io"
	"log"
	"math/rand/v2"

	"gonum.org/v1/gonum/mat"

	"leadline/afqmc"
	"leadline/benchmarks/synthetic"
	"leadline/hamiltonian/strings"
	"leadline/trial"
	"leadline/trial/determinant"
	"leadline/trial/expansion"
)

// trialCost is the time of a step with a CI trial over that with one determinant.
type trialCost struct {
	Name         string  `json:"name"`
	Determinants int     `json:"determinants"`
	Paired       float64 `json:"paired_over_determinant"`
	Unpaired     float64 `json:"unpaired_over_determinant"`
}

// trials times ten steps, local energies in the last one, with CI trials embedded
// in M = 50, N = 10 per spin, 250 factors, beside one unrestricted determinant:
// with paired walkers (closed-shell start, coefficients symmetric under exchange
// of up and down) and unpaired ones, in one run.
func trials(w io.Writer) {
	const m, n, ng, walkers = 50, 10, 250, 128
	windows := []struct {
		name          string
		active, width int
		largest       int
	}{
		{"(10,10) complete", 10, 10, 0},
		{"(12,12) complete", 12, 12, 0},
		{"12 orbitals, 10⁴ selected", 12, 12, 10000},
	}
	h := synthetic.New(m, n, ng)
	columns := [2]*mat.Dense{mat.NewDense(m, n, nil), mat.NewDense(m, n, nil)}
	for spin, c := range columns {
		for i := range n {
			c.Set(i, i, 1)
			if i == n-1 { // up and down differ, as in UHF
				c.Set(i, i, 0.98)
				c.Set(n, i, float64(1-2*spin)*0.19899748742132398)
			}
		}
	}
	closed := mat.NewDense(m, n, nil)
	for i := range n {
		closed.Set(i, i, 1)
	}
	starts := [2]trial.Orbitals{trial.RealOrbitals(closed, closed), trial.RealOrbitals(closed, columns[1])}
	var work []func()
	add := func(source trial.Source) {
		for paired := range 2 {
			guide, err := trial.NewGuide(h, source, afqmc.ExchangeMemory)
			if err != nil {
				log.Fatal(err)
			}
			walk, err := afqmc.NewWalk(guide, starts[paired], afqmc.Options{TimeStep: 0.005, Walkers: walkers, Cores: 1})
			if err != nil {
				log.Fatal(err)
			}
			work = append(work, func() { tenSteps(walk) })
		}
	}
	one, err := determinant.New(m, trial.RealOrbitals(columns[0], columns[1]))
	if err != nil {
		log.Fatal(err)
	}
	add(one)
	costs := make([]trialCost, len(windows))
	for k, c := range windows {
		e := window(m, n, c.active, c.width, c.largest)
		source, err := expansion.New(e)
		if err != nil {
			log.Fatal(err)
		}
		add(source)
		costs[k] = trialCost{Name: c.name, Determinants: len(e.Determinants)}
	}
	t := interleave(10, work...)
	fmt.Fprintf(w, "a step, energy every tenth, over that with one determinant: M = %d, N = %d per spin, %d factors, %d walkers\n", m, n, ng, walkers)
	fmt.Fprintf(w, "%-28s %14s %10s %10s\n", "trial", "determinants", "paired", "unpaired")
	for k := range costs {
		c := &costs[k]
		c.Paired, c.Unpaired = t[2+2*k]/t[0], t[3+2*k]/t[1]
		fmt.Fprintf(w, "%-28s %14d %10.2f %10.2f\n", c.Name, c.Determinants, c.Paired, c.Unpaired)
	}
}

// window returns an expansion of electrons in as many active orbitals whose
// amplitudes fall off with excitation, equal under exchange of up and down.
func window(orbitals, perSpin, electrons, active, largest int) *expansion.Expansion {
	rng := rand.New(rand.NewPCG(5, 6))
	table := strings.New(active, electrons/2)
	size := table.Len()
	c := make([]float64, size*size)
	excited := func(mask uint64) (count int) {
		for p := electrons / 2; p < active; p++ {
			count += int(mask >> p & 1)
		}
		return count
	}
	for i := range size {
		for j := range i + 1 {
			v := rng.NormFloat64()
			for range excited(table.Mask(i)) + excited(table.Mask(j)) {
				v *= 0.4
			}
			c[i*size+j], c[j*size+i] = v, v
		}
	}
	c[0] = 1
	e := expansion.FromMatrix(orbitals, perSpin-electrons/2, table, table, c, nil)
	if largest > 0 {
		e = e.Truncate(largest)
	}
	return e
}
