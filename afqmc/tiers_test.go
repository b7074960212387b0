package afqmc_test

import (
	"context"
	"fmt"
	"math"
	"os"
	"os/exec"
	"strconv"
	"strings"
	"testing"

	"leadline/afqmc"
	"leadline/hamiltonian/linalg"
	"leadline/hamiltonian/meanfield"
)

// tierMolecules are walked for 200 steps on each kernel tier.
var tierMolecules = []string{"H6_ring_R2.8_sto6g", "LiH_1.6A_sto6g", "Be_ccpvdz"}

// tierSeries returns the energies and weights of 200 steps on three molecules.
func tierSeries(t *testing.T) (out []float64) {
	for _, name := range tierMolecules {
		guide, start := guided(t, load(t, name), meanfield.RHF)
		var got rows
		_, err := afqmc.Run(context.Background(), guide, start, afqmc.Options{
			TimeStep: 0.005, Walkers: 30, Equilibration: 0.5, Length: 0.5, Seed: 4,
		}, &got)
		if err != nil {
			t.Fatal(err)
		}
		for _, r := range got {
			out = append(out, r.Energy, r.Weight)
		}
	}
	return out
}

// TestTiersAgree: every kernel tier gives the same series to 1e-9 over 200 steps.
// The test runs itself again with kernels taken away; see package linalg.
func TestTiersAgree(t *testing.T) {
	const mark = "tier series: "
	if os.Getenv("LEADLINE_TIER") != "" {
		var words []string
		for _, v := range tierSeries(t) {
			words = append(words, strconv.FormatFloat(v, 'g', -1, 64))
		}
		fmt.Println(mark + linalg.Kernel() + " " + strings.Join(words, " "))
		return
	}
	want := tierSeries(t)
	kernels := map[string]bool{}
	for _, debug := range []string{"cpu.avx512f=off", "cpu.all=off"} {
		child := exec.Command(os.Args[0], "-test.run=^TestTiersAgree$")
		child.Env = append(os.Environ(), "LEADLINE_TIER=1", "GODEBUG="+debug)
		text, err := child.Output()
		if err != nil {
			t.Fatalf("%s: %v\n%s", debug, err, text)
		}
		_, line, found := strings.Cut(string(text), mark)
		line, _, _ = strings.Cut(line, "\n")
		words := strings.Fields(line)
		if !found || len(words) != len(want)+1 {
			t.Fatalf("%s: %d numbers, expected %d", debug, len(words)-1, len(want))
		}
		kernels[words[0]] = true
		largest := 0.0
		for i, w := range words[1:] {
			v, err := strconv.ParseFloat(w, 64)
			if err != nil {
				t.Fatal(err)
			}
			largest = math.Max(largest, math.Abs(v-want[i])/math.Abs(want[i]))
		}
		t.Logf("%s against %s: largest relative difference %.1e", words[0], linalg.Kernel(), largest)
		if largest > 1e-9 {
			t.Errorf("%s against %s: relative difference %.1e, expected at most 1e-9", words[0], linalg.Kernel(), largest)
		}
	}
	if !kernels["gonum"] {
		t.Errorf("kernels %v ran, expected gonum's among them", kernels)
	}
}
