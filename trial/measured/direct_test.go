package measured_test

import (
	"context"
	"fmt"
	"math/bits"
	"math/cmplx"
	"math/rand/v2"
	"testing"

	"leadline/hamiltonian"
	"leadline/trial"
	"leadline/trial/measured"
	"leadline/trial/measured/collapse"
	"leadline/trial/measured/record"
	"leadline/trial/measured/simulate"
	"leadline/trial/trialtest"
)

func randomState(m, up, down int, seed uint64) *simulate.State {
	rng := rand.New(rand.NewPCG(seed, 3))
	st := &simulate.State{Orbitals: m, Up: up, Down: down}
	for range choose(m, up) * choose(m, down) {
		st.Amplitudes = append(st.Amplitudes, complex(rng.NormFloat64(), rng.NormFloat64()))
	}
	return st
}

func choose(n, k int) int {
	c := 1
	for i := range k {
		c = c * (n - i) / (i + 1)
	}
	return c
}

// simulated makes a small record.
func simulated(t *testing.T, st *simulate.State, opt simulate.Options) record.Source {
	t.Helper()
	h, settings, err := simulate.Settings(context.Background(), st, opt)
	if err != nil {
		t.Fatal(err)
	}
	return record.NewMemory(h, settings)
}

var ensembles = []record.Ensemble{record.Lagrangian, record.Tableau, record.Matching, record.Orthogonal}

// TestDirectEqualsCollapse compares the mean of the snapshots' own overlaps with
// the overlap of the collapsed amplitudes, for random complex walkers whose
// columns are neither orthogonal nor normalised: other formulas, the same
// number. Odd electron numbers, both rows, both spin orders.
func TestDirectEqualsCollapse(t *testing.T) {
	for _, e := range ensembles {
		for _, c := range []struct {
			up, down  int
			order     record.Order
			reference *[2]uint64
		}{
			{2, 2, record.Blocked, nil},
			{2, 1, record.Interleaved, nil},
			{2, 2, record.Blocked, &[2]uint64{0b011, 0b101}},
			{1, 2, record.Interleaved, &[2]uint64{0b010, 0b101}},
		} {
			st := randomState(3, c.up, c.down, 1)
			source := simulated(t, st, simulate.Options{Ensemble: e, Order: c.order, Reference: c.reference, Settings: 20, ShotsPerSetting: 2, Seed: 4})
			direct, err := measured.NewDirect(source, 3, 0, nil)
			if err != nil {
				t.Fatal(err)
			}
			est, err := collapse.Run(context.Background(), source, collapse.Options{})
			if err != nil {
				t.Fatal(err)
			}
			amplitudes := est.Mean()
			w := trialtest.RandomWalkers(direct.Sector(), false, 4, 2)
			got := make([]trial.Overlap, w.Count)
			direct.Overlaps(got, w)
			for i := range w.Count {
				var want complex128
				scale := 0.0
				for a, u := range est.Up.Masks() {
					for b, v := range est.Down.Masks() {
						term := cmplx.Conj(amplitudes[a*est.Down.Len()+b]) * minor(w, i, hamiltonian.Up, u) * minor(w, i, hamiltonian.Down, v)
						want += term
						scale += cmplx.Abs(term)
					}
				}
				if d := cmplx.Abs(got[i].Value() - want); d > 1e-12*scale {
					t.Errorf("%s %+v: overlap %v, collapsed %v, difference %.2g of %.2g", e, c, got[i].Value(), want, d, scale)
				}
			}
		}
	}
}

// minor is det φ[rows of the mask], by expansion along the first row.
func minor(w trial.Walkers, i, spin int, mask uint64) complex128 {
	var expand func(mask, columns uint64) complex128
	expand = func(mask, columns uint64) complex128 {
		if mask == 0 {
			return 1
		}
		p := bits.TrailingZeros64(mask)
		var sum complex128
		sign := complex128(1)
		for rest := columns; rest != 0; rest &= rest - 1 {
			k := bits.TrailingZeros64(rest)
			sum += sign * w.At(i, spin, p, k) * expand(mask&(mask-1), columns&^(1<<k))
			sign = -sign
		}
		return sum
	}
	return expand(mask, 1<<w.Electrons(spin)-1)
}

// TestDirectConforms runs the law of all trial sources, with a core and virtual
// orbitals around the measured window.
func TestDirectConforms(t *testing.T) {
	for _, e := range ensembles {
		for _, c := range []struct {
			orbitals, core int
			reference      *[2]uint64
		}{{2, 0, nil}, {4, 1, nil}, {4, 1, &[2]uint64{1, 2}}} {
			t.Run(fmt.Sprintf("%s/%d orbitals/reference %v", e, c.orbitals, c.reference != nil), func(t *testing.T) {
				source := simulated(t, randomState(2, 1, 1, 2), simulate.Options{Ensemble: e, Reference: c.reference, Settings: 12, Seed: 1})
				direct, err := measured.NewDirect(source, c.orbitals, c.core, nil)
				if err != nil {
					t.Fatal(err)
				}
				trialtest.Run(t, trialtest.RandomHamiltonian(direct.Sector(), 2, 0, false, 3), direct)
			})
		}
	}
}
