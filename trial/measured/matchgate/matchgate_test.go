package matchgate

import (
	"math"
	"math/bits"
	"math/cmplx"
	"math/rand/v2"
	"slices"
	"testing"

	"leadline/trial/measured/snapshot"
)

// perfectMatchings calls do with the (2n−1)!! matchings of 2n Majoranas.
func perfectMatchings(n int, do func(pairs []uint8)) {
	pairs := make([]uint8, 0, 2*n)
	used := make([]bool, 2*n)
	var place func()
	place = func() {
		if len(pairs) == 2*n {
			do(slices.Clone(pairs))
			return
		}
		a := slices.Index(used, false)
		used[a] = true
		for b := a + 1; b < 2*n; b++ {
			if !used[b] {
				used[b] = true
				pairs = append(pairs, uint8(a), uint8(b))
				place()
				pairs = pairs[:len(pairs)-2]
				used[b] = false
			}
		}
		used[a] = false
	}
	place()
}

// apply returns i^phase X^x Z^z v.
func apply(op pauli, v []complex128) []complex128 {
	w := make([]complex128, len(v))
	for i, a := range v {
		w[uint64(i)^op.x] = snapshot.Power(uint32(op.phase)+2*uint32(bits.OnesCount64(op.z&uint64(i)))) * a
	}
	return w
}

// pairDense returns −i g_a g_b v.
func pairDense(a, b uint8, v []complex128) []complex128 {
	w := apply(majorana(a), apply(majorana(b), v))
	for i := range w {
		w[i] *= -1i
	}
	return w
}

// project returns Π (1 + s_j(−i g_a g_b))/2 v, s_j = (−1)^{bit j}.
func project(pairs []uint8, outcome uint64, v []complex128) []complex128 {
	for j := range len(pairs) / 2 {
		w := pairDense(pairs[2*j], pairs[2*j+1], v)
		u := make([]complex128, len(v))
		for i := range u {
			if outcome>>j&1 == 0 {
				u[i] = (v[i] + w[i]) / 2
			} else {
				u[i] = (v[i] - w[i]) / 2
			}
		}
		v = u
	}
	return v
}

func norm2(v []complex128) float64 {
	s := 0.0
	for _, a := range v {
		s += real(a)*real(a) + imag(a)*imag(a)
	}
	return s
}

// estimate is conj(c_D) of one snapshot by the closed form.
func estimate(m *Matching, f *snapshot.Form, g []float64, det, r, outcome uint64) complex128 {
	ts, p := m.Signs(outcome, r)
	v := f.At(det ^ r)
	if v.Syndrome != 0 {
		return 0
	}
	table, _ := m.Weights(nil, g, p, nil)
	var x Index
	m.Index(&x)
	value := complex(table[x.At(v.Y)], 0) * snapshot.Power(v.Phase+2*uint32(bits.OnesCount64(ts&v.Y)))
	if RowSign(det, r) {
		value = -value
	}
	return value
}

func randomState(dets []uint64, size int, vacuum bool, rng *rand.Rand) (state []complex128) {
	state = make([]complex128, size)
	for _, d := range dets {
		state[d] = complex(rng.NormFloat64(), rng.NormFloat64())
	}
	scale := complex(1/math.Sqrt(norm2(state)), 0)
	for i := range state {
		state[i] *= scale
	}
	if vacuum {
		for i := range state {
			state[i] *= complex(math.Sqrt(0.5), 0)
		}
		state[0] = complex(math.Sqrt(0.5), 0)
	}
	return state
}

func determinants(n, electrons int) (dets []uint64) {
	for d := range uint64(1) << n {
		if bits.OnesCount64(d) == electrons {
			dets = append(dets, d)
		}
	}
	return dets
}

// TestUnbiasedOverAllMatchings sums the closed form over every matching and
// outcome with the exact probabilities of dense projectors: 15 matchings on
// three modes, 105 on four; vacuum row, and reference rows also of odd
// electron number. The second moment must be what SecondMoment samples.
func TestUnbiasedOverAllMatchings(t *testing.T) {
	for _, c := range []struct {
		n, electrons int
		reference    bool
	}{{3, 2, false}, {4, 2, false}, {3, 1, true}, {3, 2, true}, {4, 3, true}, {4, 2, true}} {
		rng := rand.New(rand.NewPCG(uint64(c.n), uint64(c.electrons)))
		dets := determinants(c.n, c.electrons)
		state := randomState(dets, 1<<c.n, !c.reference, rng)
		r, factor := uint64(0), complex128(2)
		if c.reference {
			r, factor = dets[len(dets)-1], 1
		}
		g := Inverse(Channel(c.n))
		mean := make([]complex128, len(dets))
		second, predicted := 0.0, 0.0
		count := 0
		var m Matching
		var f snapshot.Form
		var q squares
		perfectMatchings(c.n, func(pairs []uint8) {
			count++
			m.Set(c.n, pairs)
			m.Form(&f)
			total := 0.0
			for outcome := range uint64(1) << c.n {
				prob := norm2(project(pairs, outcome, state))
				total += prob
				_, p := m.Signs(outcome, r)
				if bits.OnesCount64(p)&1 != 0 && prob > 1e-14 {
					t.Fatalf("outcome of odd parity has probability %g", prob)
				}
				for i, d := range dets {
					value := factor * cmplx.Conj(estimate(&m, &f, g, d, r, outcome))
					mean[i] += complex(prob, 0) * value
					second += prob * norm2([]complex128{value}) / float64(len(dets))
				}
			}
			if math.Abs(total-1) > 1e-12 {
				t.Fatalf("probabilities sum to %g", total)
			}
			q.m.Set(c.n, pairs)
			for occupied, a := range state {
				if a != 0 {
					predicted += real(factor*factor) * norm2([]complex128{a}) * q.mean(g, dets, r, uint64(occupied))
				}
			}
		})
		if want := map[int]int{3: 15, 4: 105}[c.n]; count != want {
			t.Fatalf("%d matchings, want %d", count, want)
		}
		for i, d := range dets {
			want := state[d] * complex(math.Sqrt2, 0)
			if c.reference {
				want = state[d] * cmplx.Conj(state[r])
			}
			if got := mean[i] / complex(float64(count), 0); cmplx.Abs(got-want) > 1e-12 {
				t.Errorf("%+v det %b: mean %v, want %v", c, d, got, want)
			}
		}
		if math.Abs(second-predicted)/float64(count) > 1e-12 {
			t.Errorf("%+v: second moment %.15g, predicted %.15g", c, second/float64(count), predicted/float64(count))
		}
	}
}

// TestSecondMomentTable compares with figures that an independent program gave
// for half filling, vacuum row: 10.7 for the determinant of the trial itself,
// 7.2 for a double excitation and 6.8 for a disjoint determinant on eight modes;
// 15.7, 10.9, 8.5 on sixteen. Those carry 3 to 12 % of statistical error.
func TestSecondMomentTable(t *testing.T) {
	for _, c := range []struct {
		n    int
		want [3]float64
	}{{8, [3]float64{10.7, 7.2, 6.8}}, {16, [3]float64{15.7, 10.9, 8.5}}} {
		trial := uint64(1)<<(c.n/2) - 1
		dets := [3]uint64{trial}
		dets[1] = trial&^3 | 3<<(c.n/2)
		dets[2] = trial << (c.n / 2)
		for i, d := range dets {
			rng := rand.New(rand.NewPCG(11, uint64(i)))
			draw := func(rng *rand.Rand) uint64 {
				if rng.Uint64()&1 == 0 {
					return 0
				}
				return trial
			}
			got, err := SecondMoment(c.n, Inverse(Channel(c.n)), []uint64{d}, 0, draw, 6000, rng)
			sigma := math.Hypot(4*err, 0.08*c.want[i])
			if math.Abs(4*got-c.want[i]) > 2.5*sigma {
				t.Errorf("n=%d, det %b: %.2f(%.2f), want %.1f", c.n, d, 4*got, 4*err, c.want[i])
			}
		}
	}
}

// TestGaussianAgreesWithCycles compares the Pfaffian route with the closed form,
// determinant by determinant, in several rows.
func TestGaussianAgreesWithCycles(t *testing.T) {
	for _, n := range []int{2, 5, 8} {
		rng := rand.New(rand.NewPCG(1, uint64(n)))
		g := Inverse(Channel(n))
		e := NewGaussian(n, g)
		var m Matching
		var f snapshot.Form
		for range 10 {
			pairs := Pairs(nil, n, rng)
			m.Set(n, pairs)
			m.Form(&f)
			outcome := rng.Uint64() & (1<<n - 1)
			r := rng.Uint64() & (1<<n - 1)
			e.SetMatching(pairs, outcome, r)
			_, p := m.Signs(outcome, r)
			if odd := bits.OnesCount64(p)&1 != 0; odd != e.ParityOdd() {
				t.Fatalf("n=%d: parity differs", n)
			}
			dets := make([]uint64, 0)
			for d := range uint64(1) << n {
				if bits.OnesCount64(d^r)&1 == 0 {
					dets = append(dets, d)
				}
			}
			values := make([]complex128, len(dets))
			e.Determinants(values, dets, r, n, nil)
			scale := g[n/2] * math.Ldexp(1, -n)
			for i, d := range dets {
				got := values[i]
				if RowSign(d, r) {
					got = -got
				}
				if want := estimate(&m, &f, g, d, r, outcome); cmplx.Abs(got-want) > 1e-11*scale {
					t.Fatalf("n=%d row %b det %b: Pfaffian %v, cycles %v", n, r, d, got, want)
				}
			}
		}
	}
}

// TestOverlapIsTheSumOverDeterminants checks the Wick contractions of every row
// against Σ_D <r|M^{-1}(G)|D> det V[D].
func TestOverlapIsTheSumOverDeterminants(t *testing.T) {
	const n = 5
	rng := rand.New(rand.NewPCG(8, 9))
	g := Inverse(Channel(n))
	e := NewGaussian(n, g)
	for _, c := range []struct {
		electrons int
		r         uint64
	}{{2, 0}, {4, 0}, {1, 0b00100}, {2, 0b10010}, {3, 0b01011}, {2, 0b11110}} {
		q := Rotation(nil, n, rng)
		outcome := rng.Uint64() & (1<<n - 1)
		const walkers = 3
		all := [2][]float64{make([]float64, walkers*n*c.electrons), make([]float64, walkers*n*c.electrons)}
		for i := range all[0] {
			all[0][i], all[1][i] = rng.NormFloat64(), rng.NormFloat64()
		}
		e.SetOrthogonal(q, outcome, c.r)
		overlaps := make([]complex128, walkers)
		e.Overlaps(overlaps, c.r, all, c.electrons)
		dets := determinants(n, c.electrons)
		values := make([]complex128, len(dets))
		e.Determinants(values, dets, c.r, n, nil)
		for w, got := range overlaps {
			v := make([]complex128, n*c.electrons)
			for i := range n {
				for k := range c.electrons {
					at := (i*walkers+w)*c.electrons + k
					v[i*c.electrons+k] = complex(all[0][at], all[1][at])
				}
			}
			var want complex128
			for i, d := range dets {
				value := values[i] * minor(v, c.electrons, d)
				if RowSign(d, c.r) {
					value = -value
				}
				want += value
			}
			if cmplx.Abs(got-want) > 1e-11 {
				t.Errorf("%+v: overlap %v, sum over determinants %v", c, got, want)
			}
		}
	}
}

// minor is det V[D,:] by expansion along the first column.
func minor(v []complex128, electrons int, det uint64) complex128 {
	var rows []int
	for ; det != 0; det &= det - 1 {
		rows = append(rows, bits.TrailingZeros64(det))
	}
	var expand func(rows []int, col int) complex128
	expand = func(rows []int, col int) complex128 {
		if len(rows) == 0 {
			return 1
		}
		var s complex128
		for i, r := range rows {
			rest := append(slices.Clone(rows[:i]), rows[i+1:]...)
			term := v[r*electrons+col] * expand(rest, col+1)
			if i&1 == 1 {
				term = -term
			}
			s += term
		}
		return s
	}
	return expand(rows, 0)
}
