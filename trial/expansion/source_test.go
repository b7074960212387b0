package expansion

import (
	"math"
	"math/bits"
	"math/cmplx"
	"math/rand/v2"
	"sync"
	"testing"

	"gonum.org/v1/gonum/mat"

	"leadline/hamiltonian"
	"leadline/trial"
	"leadline/trial/expansion/internal/lanes"
	"leadline/trial/trialtest"
)

// Minors, gradient and second derivatives against determinants of submatrices
// and finite differences, which are exact for polynomials of degree one in each
// element; other numbers in each lane.
func TestMinors(t *testing.T) {
	rng := rand.New(rand.NewPCG(1, 2))
	gauss := func(n int) []float64 {
		x := make([]float64, n*lanes.Size)
		for k := range x {
			x[k] = rng.NormFloat64()
		}
		return x
	}
	for _, c := range []struct{ active, electrons int }{{1, 0}, {1, 1}, {3, 1}, {4, 2}, {6, 3}, {7, 3}, {7, 5}} {
		s := newSpace(c.active, c.electrons, allStrings(c.active, c.electrons))
		nh, np := c.electrons, c.active-c.electrons
		levels := min(nh, np)
		theta, g := gauss(s.excitations()), gauss(s.minors())
		m, w := make([]float64, s.minors()*lanes.Size), gauss(s.excitations())
		second := gauss(np * (np - 1) / 2 * nh * (nh - 1) / 2)
		s.computeMinors(m, theta, levels)
		s.gradient(w, append([]float64(nil), g...), m, theta, levels)
		s.secondDerivatives(second, g, m, levels)
		sum := gauss(1)
		s.innerProduct(sum, g, m, levels)
		for lane := range lanes.Width {
			at := func(x []float64, k int) complex128 {
				return complex(x[k*lanes.Size+lane], x[k*lanes.Size+lanes.Width+lane])
			}
			near := func(what string, got, want complex128) {
				t.Helper()
				if cmplx.Abs(got-want) > 1e-11*(1+cmplx.Abs(want)) {
					t.Fatalf("%v, lane %d: %s is %v, expected %v", c, lane, what, got, want)
				}
			}
			one := make([]complex128, s.excitations())
			for k := range one {
				one[k] = at(theta, k)
			}
			value := func() complex128 {
				var sum complex128
				for k := range levels + 1 {
					for p, rows := range s.particles.levels[k].table.Masks() {
						for h, columns := range s.holes.levels[k].table.Masks() {
							sum += at(g, s.offset[k]+p*s.holes.count(k)+h) * submatrix(one, nh, rows, columns)
						}
					}
				}
				return sum
			}
			for k := range levels + 1 {
				for p, rows := range s.particles.levels[k].table.Masks() {
					for h, columns := range s.holes.levels[k].table.Masks() {
						near("minor", at(m, s.offset[k]+p*s.holes.count(k)+h), submatrix(one, nh, rows, columns))
					}
				}
			}
			near("value", at(sum, 0), value())
			derivative := func(k int, f func() complex128) complex128 {
				old := one[k]
				one[k] = old + 1
				up := f()
				one[k] = old
				return up - f()
			}
			for k := range one {
				near("derivative", at(w, k), derivative(k, value))
			}
			if lane > 0 {
				continue
			}
			for b := range np {
				for a := range b {
					for j := range nh {
						for i := range j {
							want := derivative(a*nh+i, func() complex128 { return derivative(b*nh+j, value) })
							near("second derivative", at(second, pairNumber(a, b)*nh*(nh-1)/2+pairNumber(i, j)), want)
						}
					}
				}
			}
		}
	}
}

// submatrix returns det θ[rows, columns] by expansion along the first row.
func submatrix(theta []complex128, width int, rows, columns uint64) complex128 {
	if rows == 0 {
		return 1
	}
	r := bits.TrailingZeros64(rows)
	var sum complex128
	sign := complex128(1)
	for rest := columns; rest != 0; rest &= rest - 1 {
		c := bits.TrailingZeros64(rest)
		sum += sign * theta[r*width+c] * submatrix(theta, width, rows&(rows-1), columns^1<<c)
		sign = -sign
	}
	return sum
}

// Walkers that no determinant of the expansion sees have overlap and density
// zero and a finite energy; ones with a NaN have no finite overlap; neither
// harms its neighbours.
func TestDeadWalkers(t *testing.T) {
	for _, k := range []int{0, 1, 4, 6, 12, 24} {
		c := windows[k]
		e := c.expansion(t, 7)
		s, err := New(e)
		if err != nil {
			t.Fatal(err)
		}
		h := c.hamiltonian()
		guide, err := trial.NewGuide(h, s, 1<<30)
		if err != nil {
			t.Fatal(err)
		}
		w := trialtest.RandomWalkers(s.Sector(), false, 3, 2)
		want := guide.NewMixed(3)
		guide.Evaluate(want, w)
		guide.LocalEnergies(want, w)
		for j := range w.Orbitals {
			for spin := range 2 {
				w.Set(0, spin, j, 0, 0)
			}
		}
		w.Set(1, 0, e.Core, 0, complex(math.NaN(), 0))
		got := guide.NewMixed(3)
		guide.Evaluate(got, w)
		guide.LocalEnergies(got, w)
		if !got.Overlap[0].Zero() || cmplx.IsNaN(got.Energy[0]) {
			t.Errorf("%s: dead walker has overlap %v, energy %v", c.name, got.Overlap[0], got.Energy[0])
		}
		length := len(got.Density) / 6
		for _, v := range got.Density[:2*length] {
			if v != 0 {
				t.Fatalf("%s: dead walker has a density", c.name)
			}
		}
		if !math.IsNaN(got.Overlap[1].Log) {
			t.Errorf("%s: walker with NaN has overlap %v", c.name, got.Overlap[1])
		}
		if got.Overlap[2] != want.Overlap[2] || got.Energy[2] != want.Energy[2] {
			t.Errorf("%s: a neighbour changed from %v, %v to %v, %v", c.name, want.Overlap[2], want.Energy[2], got.Overlap[2], got.Energy[2])
		}
	}
}

// The scale of amplitudes and walkers only shifts ln O.
func TestScale(t *testing.T) {
	c := windows[1]
	e := c.expansion(t, 7)
	big := e.with(append([]Determinant(nil), e.Determinants...))
	for k := range big.Determinants {
		big.Determinants[k].Amplitude *= 1e90
	}
	w := trialtest.RandomWalkers(e.Sector(), false, 2, 2)
	scaled := trialtest.RandomWalkers(e.Sector(), false, 2, 2)
	for k := range scaled.Data {
		scaled.Data[k] *= 1e60
	}
	evaluate := func(e *Expansion, w trial.Walkers) *trial.Mixed {
		s, err := New(e)
		if err != nil {
			t.Fatal(err)
		}
		guide, err := trial.NewGuide(c.hamiltonian(), s, 1<<30)
		if err != nil {
			t.Fatal(err)
		}
		m := guide.NewMixed(w.Count)
		guide.Evaluate(m, w)
		guide.LocalEnergies(m, w)
		return m
	}
	a, b := evaluate(e, w), evaluate(big, scaled)
	shift := math.Log(10) * (90 + 60*float64(w.Up+w.Down))
	for i := range w.Count {
		if d := b.Overlap[i].Log - a.Overlap[i].Log - shift; math.Abs(d) > 1e-11 {
			t.Errorf("ln O off by %g", d)
		}
		if d := cmplx.Abs(a.Energy[i] - b.Energy[i]); d > 1e-11*(1+cmplx.Abs(a.Energy[i])) {
			t.Errorf("energy off by %g", d)
		}
	}
}

// Several goroutines at once, with more walkers than a tile, give what one gives,
// to the last bit.
func TestConcurrent(t *testing.T) {
	for _, k := range []int{1, 5, 24} {
		c := windows[k]
		s, err := New(c.expansion(t, 7))
		if err != nil {
			t.Fatal(err)
		}
		guide, err := trial.NewGuide(c.hamiltonian(), s, 1<<30)
		if err != nil {
			t.Fatal(err)
		}
		w := trialtest.RandomWalkers(s.Sector(), false, 2*s.tile+3, 2)
		results := make([]*trial.Mixed, 4)
		var wait sync.WaitGroup
		for g := range results {
			results[g] = guide.NewMixed(w.Count)
			wait.Go(func() {
				for range 3 {
					guide.Evaluate(results[g], w)
					guide.LocalEnergies(results[g], w)
				}
			})
		}
		wait.Wait()
		for _, m := range results[1:] {
			for i := range w.Count {
				if m.Overlap[i] != results[0].Overlap[i] || m.Energy[i] != results[0].Energy[i] {
					t.Fatalf("%s: walker %d differs between goroutines", c.name, i)
				}
			}
		}
	}
}

// A list with more references than frames are kept still gives the same.
func TestFewFrames(t *testing.T) {
	for _, k := range []int{1, 24} {
		c := windows[k]
		e := c.expansion(t, 7)
		w := trialtest.RandomWalkers(e.Sector(), false, 40, 3)
		var results [2]*trial.Mixed
		for k := range results {
			s, err := New(e)
			if err != nil {
				t.Fatal(err)
			}
			if k == 1 {
				s.spaces[0].framesLeft = 1
				s.spaces[1].framesLeft = 1
			}
			guide, err := trial.NewGuide(c.hamiltonian(), s, 1<<30)
			if err != nil {
				t.Fatal(err)
			}
			results[k] = guide.NewMixed(w.Count)
			for range 2 {
				guide.Evaluate(results[k], w)
				guide.LocalEnergies(results[k], w)
			}
		}
		for i := range w.Count {
			if results[0].Overlap[i] != results[1].Overlap[i] || results[0].Energy[i] != results[1].Energy[i] {
				t.Errorf("%s, walker %d: %v, %v with all frames, %v, %v with one", c.name, i,
					results[0].Overlap[i], results[0].Energy[i], results[1].Overlap[i], results[1].Energy[i])
			}
		}
	}
}

// A short list in a window of 10626 strings for each spin, too large for anything
// over all determinants: density and local energy against what overlaps alone
// give, expectation values against the local energy of the state itself.
func TestLargeWindow(t *testing.T) {
	rng := rand.New(rand.NewPCG(3, 1))
	e := &Expansion{Orbitals: 26, Core: 1, Active: 24, Up: 4, Down: 3}
	pick := func(n int) (mask uint64) {
		for bits.OnesCount64(mask) < n {
			mask |= 1 << rng.IntN(e.Active)
		}
		return mask
	}
	for range 60 {
		e.Determinants = append(e.Determinants, Determinant{Up: pick(4), Down: pick(3), Amplitude: complex(rng.NormFloat64(), rng.NormFloat64())})
	}
	s, err := New(unique(e))
	if err != nil {
		t.Fatal(err)
	}
	h := trialtest.RandomHamiltonian(e.Sector(), 3, 1, false, 2)
	w := trialtest.RandomWalkers(e.Sector(), false, 2, 4)
	var results [2]*trial.Mixed
	for k, source := range []trial.Source{s, trial.Complete(s)} {
		guide, err := trial.NewGuide(h, source, 1<<30)
		if err != nil {
			t.Fatal(err)
		}
		results[k] = guide.NewMixed(w.Count)
		guide.Evaluate(results[k], w)
		guide.LocalEnergies(results[k], w)
	}
	for k, want := range results[1].Fields {
		if math.Abs(results[0].Fields[k]-want) > 1e-9*(1+math.Abs(want)) {
			t.Errorf("field %d is %v, from overlaps %v", k, results[0].Fields[k], want)
		}
	}
	for i, want := range results[1].Energy {
		if cmplx.Abs(results[0].Energy[i]-want) > 1e-9*(1+cmplx.Abs(want)) {
			t.Errorf("local energy %d is %v, from overlaps %v", i, results[0].Energy[i], want)
		}
	}
	if _, _, _, ok := s.whole(); ok {
		t.Fatal("the window is spread out over all determinants")
	}
	density := s.OneBodyDensity()
	for spin := range 2 {
		if trace := mat.Trace(density[spin]); math.Abs(trace-float64(w.Electrons(spin))) > 1e-10 {
			t.Errorf("trace of the density of spin %d is %v", spin, trace)
		}
	}
	var oneBody float64
	for spin := range 2 {
		var product mat.Dense
		product.Mul(h.OneBody[spin], density[spin])
		oneBody += mat.Trace(&product)
	}
	bare := *h
	bare.Factors = hamiltonian.NewFactors(e.Orbitals, 0)
	if got, want := s.Energy(&bare), h.Constant+oneBody; math.Abs(got-want) > 1e-10*(1+math.Abs(want)) {
		t.Errorf("one-body energy %v, from the density %v", got, want)
	}
}
