package afqmc

import (
	"errors"
	"math"
	"math/rand/v2"
	"testing"

	"leadline/hamiltonian"
	"leadline/trial"
	"leadline/trial/determinant"
	"leadline/trial/trialtest"

	"gonum.org/v1/gonum/mat"
)

// smallWalk returns a walk of walkers that have moved apart.
func smallWalk(t *testing.T, walkers int) *Walk {
	t.Helper()
	sector := hamiltonian.Sector{Orbitals: 5, Up: 2, Down: 2}
	h := trialtest.RandomHamiltonian(sector, 4, 0, false, 3)
	c := mat.NewDense(5, 2, nil)
	c.Set(0, 0, 1)
	c.Set(1, 1, 1)
	source, err := determinant.New(5, trial.RealOrbitals(c, c))
	if err != nil {
		t.Fatal(err)
	}
	guide, err := trial.NewGuide(h, source, 1<<30)
	if err != nil {
		t.Fatal(err)
	}
	w, err := NewWalk(guide, trial.RealOrbitals(c, c), Options{TimeStep: 0.01, Walkers: walkers, Cap: CapOff})
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(w.Close)
	for range 30 {
		if err := w.Step(false, false); err != nil {
			t.Fatal(err)
		}
	}
	return w
}

// TestControl: the comb copies walkers with all that belongs to them, and over
// many resamplings each walker is copied in proportion to its weight: within five
// standard errors of a count between its neighbouring integers.
func TestControl(t *testing.T) {
	const n, rounds = 24, 400
	w := smallWalk(t, n)
	s := w.State
	rng := rand.New(rand.NewPCG(4, 5))
	weights, sum := make([]float64, n), 0.0
	for i := range weights {
		weights[i] = math.Exp(rng.NormFloat64())
		if i%7 == 3 {
			weights[i] = 0
		}
		sum += weights[i]
	}
	overlaps := append([]trial.Overlap(nil), s.Overlap...)
	columns := append([]float64(nil), s.Columns...)
	fields := append([]float64(nil), s.Fields...)
	mean := make([]float64, n)
	for round := range rounds {
		copy(s.Weight, weights)
		copy(s.Overlap, overlaps)
		copy(s.Columns, columns)
		copy(s.Fields, fields)
		s.Step = 1000 + round
		before := s.LogGrowth
		if err := w.Control(); err != nil {
			t.Fatal(err)
		}
		if got, want := s.LogGrowth-before, math.Log(sum/n); math.Abs(got-want) > 1e-12 {
			t.Fatalf("growth of %g taken out, expected %g", got, want)
		}
		total := 0
		for i, copies := range countCopies(s.Overlap, overlaps) {
			mean[i] += float64(copies) / rounds
			total += copies
		}
		if total != n {
			t.Fatalf("%d of %d walkers are copies of old ones", total, n)
		}
		for i, weight := range s.Weight {
			if weight != 1 {
				t.Fatalf("weight %d is %g after control, expected 1", i, weight)
			}
		}
		w.checkOverlaps()
	}
	if d := s.Checks.OverlapDeviation; d > 1e-10 {
		t.Errorf("stored overlaps differ by %.1e from recomputed ones", d)
	}
	ng := len(w.Propagator.Shift)
	stored := append([]float64(nil), s.Fields...)
	w.crew.run(len(w.tiles), func(ws *workspace, k int) { w.evaluate(ws, w.tiles[k], false) })
	for i, v := range stored {
		if math.Abs(v-s.Fields[i]) > 1e-9*(1+math.Abs(v)) {
			t.Fatalf("field expectation %d of walker %d did not follow its walker", i%ng, i/(2*ng))
		}
	}
	for i := range mean {
		expected := weights[i] * n / sum
		fraction := expected - math.Floor(expected)
		sigma := math.Sqrt(fraction*(1-fraction)/rounds) + 1e-9
		if math.Abs(mean[i]-expected) > 5*sigma {
			t.Errorf("walker %d was copied %.3f times on average, expected %.3f(%.3f)", i, mean[i], expected, sigma)
		}
	}
}

// countCopies returns how often each old overlap appears among the new ones.
func countCopies(now, old []trial.Overlap) []int {
	count := make([]int, len(old))
	for _, o := range now {
		for i := range old {
			if o == old[i] {
				count[i]++
				break
			}
		}
	}
	return count
}

func TestExtinction(t *testing.T) {
	w := smallWalk(t, 4)
	clear(w.State.Weight)
	if err := w.Control(); !errors.Is(err, errExtinct) {
		t.Errorf("no walker left: error %v", err)
	}
}

// TestOrthonormalise: the columns come out orthonormal, the overlap shrinks by
// the determinant taken out, and dependent columns are refused.
func TestOrthonormalise(t *testing.T) {
	sector := hamiltonian.Sector{Orbitals: 7, Up: 4, Down: 3}
	w := trialtest.RandomWalkers(sector, false, 3, 9)
	c := [2]*mat.Dense{mat.NewDense(7, 4, nil), mat.NewDense(7, 3, nil)}
	for spin := range c {
		_, n := c[spin].Dims()
		for j := range n {
			c[spin].Set(j, j, 1)
		}
	}
	source, err := determinant.New(7, trial.RealOrbitals(c[0], c[1]))
	if err != nil {
		t.Fatal(err)
	}
	before, after := make([]trial.Overlap, 3), make([]trial.Overlap, 3)
	source.Overlaps(before, w)
	scratch := newGram(7, 4)
	logs := make([]float64, 3)
	for i := range w.Count {
		if logs[i], err = orthonormalise(w, i, scratch); err != nil {
			t.Fatal(err)
		}
	}
	source.Overlaps(after, w)
	for i := range w.Count {
		if d := deviation(after[i].Times(trial.Overlap{Log: logs[i], Phase: 1}), before[i]); d > 1e-11 {
			t.Errorf("overlap of walker %d changed by %.1e beside the determinant taken out", i, d)
		}
		for spin := range 2 {
			for a := range w.Electrons(spin) {
				for b := range w.Electrons(spin) {
					var product complex128
					for p := range 7 {
						product += conj(w.At(i, spin, p, a)) * w.At(i, spin, p, b)
					}
					want := 0.0
					if a == b {
						want = 1
					}
					if math.Hypot(real(product)-want, imag(product)) > 1e-11 {
						t.Errorf("columns %d and %d have product %v", a, b, product)
					}
				}
			}
		}
	}
	for p := range 7 {
		w.Set(0, 0, p, 1, w.At(0, 0, p, 0)*2i)
	}
	if _, err := orthonormalise(w, 0, scratch); err == nil {
		t.Error("dependent columns were accepted")
	}
}
