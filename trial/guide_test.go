package trial_test

import (
	"math"
	"math/cmplx"
	"testing"

	"gonum.org/v1/gonum/mat"

	"leadline/hamiltonian"
	"leadline/trial"
	"leadline/trial/determinant"
	"leadline/trial/trialtest"
)

// plain hides every ability of a source but overlaps.
type plain struct{ trial.Source }

// TestShift: a source without expectation values gets a shift from the mixed
// density, where antisymmetric factors must have none: the one-body part of the
// propagator leaves them out.
func TestShift(t *testing.T) {
	sector := hamiltonian.Sector{Orbitals: 4, Up: 2, Down: 1}
	h := trialtest.RandomHamiltonian(sector, 5, 2, false, 1)
	up, down := mat.NewDense(4, 2, []float64{1, 0, 0, 1, 0, 0, 0, 0}), mat.NewDense(4, 1, []float64{1, 0, 0, 0})
	source, err := determinant.New(4, trial.RealOrbitals(up, down))
	if err != nil {
		t.Fatal(err)
	}
	start := trialtest.RandomWalkers(sector, false, 1, 2)
	for _, s := range []trial.Source{source, plain{source}} {
		guide, err := trial.NewGuide(h, s, 1<<30)
		if err != nil {
			t.Fatal(err)
		}
		shift := guide.Shift(start)
		if len(shift) != 5 || shift[3] != 0 || shift[4] != 0 || shift[0] == 0 {
			t.Errorf("shift %v, expected zero for the last two factors only", shift)
		}
	}
	guide, err := trial.NewGuide(h, source, 1<<30)
	if err != nil {
		t.Fatal(err)
	}
	for g, l := range guide.Shift(start)[:3] {
		row := h.Factors.Row(g, hamiltonian.Up)
		want := 2*row[hamiltonian.Pair(0, 0)] + row[hamiltonian.Pair(1, 1)]
		if math.Abs(l-want) > 1e-14 {
			t.Errorf("shift of factor %d is %g, expected %g", g, l, want)
		}
	}
}

// TestSingleGuide: half-rotated factors in single precision give the fields to
// 1e-6, for real and complex supports, summed over spins or not.
func TestSingleGuide(t *testing.T) {
	sector := hamiltonian.Sector{Orbitals: 5, Up: 2, Down: 2}
	re := mat.NewDense(5, 2, []float64{0.6, 0, 0, 1, 0, 0, 0, 0, 0, 0})
	im := mat.NewDense(5, 2, []float64{0, 0, 0, 0, 0.8, 0, 0, 0, 0, 0})
	real := mat.NewDense(5, 2, []float64{0.6, 0, 0, 1, 0.8, 0, 0, 0, 0, 0})
	other := mat.NewDense(5, 2, []float64{1, 0, 0, 1, 0, 0, 0, 0, 0, 0})
	for _, o := range []trial.Orbitals{
		trial.RealOrbitals(real, real),
		trial.RealOrbitals(real, other),
		{Re: [2]*mat.Dense{re, re}, Im: [2]*mat.Dense{im, im}},
	} {
		source, err := determinant.New(5, o)
		if err != nil {
			t.Fatal(err)
		}
		h := trialtest.RandomHamiltonian(sector, 6, 0, false, 3)
		w := trialtest.RandomWalkers(sector, false, 4, 4)
		double, err := trial.NewGuide(h, source, 1<<30)
		if err != nil {
			t.Fatal(err)
		}
		single, err := trial.NewSingleGuide(h, source, 1<<30)
		if err != nil {
			t.Fatal(err)
		}
		a, b := double.NewMixed(4), single.NewMixed(4)
		double.Evaluate(a, w)
		single.Evaluate(b, w)
		largest, scale := 0.0, 0.0
		for i := range a.Fields {
			largest = math.Max(largest, math.Abs(a.Fields[i]-b.Fields[i]))
			scale = math.Max(scale, math.Abs(a.Fields[i]))
		}
		if largest > 1e-6*scale || largest == 0 {
			t.Errorf("fields differ by %.1e of %.1e, expected about 1e-7 of it", largest, scale)
		}
	}
}

func TestOverlapArithmetic(t *testing.T) {
	a, b := trial.OverlapOf(3-4i), trial.OverlapOf(2i)
	if d := cmplx.Abs(a.Times(b).Value() - (3-4i)*2i); d > 1e-13 {
		t.Errorf("product off by %.1e", d)
	}
	if d := cmplx.Abs(a.Over(b) - (3-4i)/2i); d > 1e-13 {
		t.Errorf("ratio off by %.1e", d)
	}
	zero := trial.OverlapOf(0)
	if !zero.Zero() || zero.Over(a) != 0 || !cmplx.IsNaN(a.Over(zero)) || a.Zero() {
		t.Error("zero overlap is not handled")
	}
	large := trial.Overlap{Log: 2000, Phase: 1}
	if got := large.Over(trial.Overlap{Log: 1999, Phase: 1}); math.Abs(cmplx.Abs(got)-math.E) > 1e-12 {
		t.Errorf("ratio of overlaps beyond the range of numbers is %v, expected e", got)
	}
}

// TestWalkers: what Set writes At reads, columns are contiguous, paired walkers
// share their columns, slices alias.
func TestWalkers(t *testing.T) {
	sector := hamiltonian.Sector{Orbitals: 3, Up: 2, Down: 2}
	w := trial.NewWalkers(sector, true, 2)
	w.Set(1, hamiltonian.Up, 2, 1, 5-6i)
	if w.At(1, hamiltonian.Down, 2, 1) != 5-6i {
		t.Error("paired walkers do not share their columns")
	}
	if w.Data[w.Stride()+2*3*1+2] != 5 || w.Data[w.Stride()+2*3*1+3+2] != -6 {
		t.Error("a column is not M real parts, then M imaginary parts")
	}
	u := w.Unpaired()
	if u.Columns() != 4 || u.At(1, hamiltonian.Down, 2, 1) != 5-6i {
		t.Error("unpaired copy differs")
	}
	part := w.Slice(1, 2)
	part.Set(0, hamiltonian.Up, 0, 0, 7)
	if w.At(1, hamiltonian.Up, 0, 0) != 7 {
		t.Error("slice does not alias")
	}
}
