package clifford

import (
	"math"
	"math/bits"
	"math/cmplx"
	"math/rand/v2"
	"testing"

	"leadline/trial/measured/snapshot"
)

// amplitude is <det|s_{t,u}> by the definition in the package comment.
func amplitude(c *Basis, t, u, det uint64) complex128 {
	y, coset := c.Coordinates(det)
	if coset != u {
		return 0
	}
	return snapshot.Power(c.Phase(y)+2*uint32(bits.OnesCount64(t&y))) * complex(math.Pow(2, -float64(c.K)/2), 0)
}

// bases calls do with every stabilizer basis of n qubits.
func bases(n int, do func(r, b []uint64)) {
	seen := make(map[[8]uint64]bool)
	for k := 0; k <= n; k++ {
		for word := uint64(0); word < 1<<(n*k); word++ {
			r := make([]uint64, k)
			for i := range r {
				r[i] = word >> (n * i) & mask(n)
			}
			if reduce(r, n) != k {
				continue
			}
			key := [8]uint64{0: uint64(k)}
			copy(key[1:], r)
			if seen[key] {
				continue
			}
			seen[key] = true
			for phases := uint64(0); phases < 1<<(k*(k+1)/2); phases++ {
				b := make([]uint64, k)
				at := 0
				for i := range k {
					for j := range i + 1 {
						bit := phases >> at & 1
						at++
						b[i] |= bit << j
						b[j] |= bit << i
					}
				}
				do(r, b)
			}
		}
	}
}

// randomState draws amplitudes of norm 1 on the given determinants.
func randomState(dets []uint64, rng *rand.Rand) map[uint64]complex128 {
	psi := make(map[uint64]complex128)
	norm := 0.0
	for _, d := range dets {
		a := complex(rng.NormFloat64(), rng.NormFloat64())
		psi[d] = a
		norm += real(a)*real(a) + imag(a)*imag(a)
	}
	for d := range psi {
		psi[d] /= complex(math.Sqrt(norm), 0)
	}
	return psi
}

func determinants(n, electrons int) (dets []uint64) {
	for d := range uint64(1) << n {
		if bits.OnesCount64(d) == electrons {
			dets = append(dets, d)
		}
	}
	return dets
}

// TestUnbiasedOverAllBases sums the estimator over every basis and outcome,
// weighted by the exact probabilities: 135 bases × 8 outcomes on three modes,
// 2295 × 16 on four. Mean and second moment must come out as the channel and
// the 3-design say. The estimator here is the quadratic form that the collapse
// uses, phases and syndromes included.
func TestUnbiasedOverAllBases(t *testing.T) {
	for _, n := range []int{3, 4} {
		rng := rand.New(rand.NewPCG(7, uint64(n)))
		dets := determinants(n, 2)
		psi := randomState(dets, rng)
		for _, row := range []string{"vacuum", "reference"} {
			state := make(map[uint64]complex128)
			var r uint64
			if row == "vacuum" {
				state[0] = complex(math.Sqrt(0.5), 0)
				for d, a := range psi {
					state[d] = a * complex(math.Sqrt(0.5), 0)
				}
			} else {
				r = dets[1]
				state = psi
			}
			count := 0
			d := pow2(n)
			mean := make([]complex128, len(dets))
			second := make([]float64, len(dets))
			pair := make([]complex128, len(dets)) // E[c c]
			reached, total := 0.0, 0.0
			var f snapshot.Form
			bases(n, func(rows, b []uint64) {
				count++
				var c Basis
				if err := c.Lagrangian(n, rows, b, nil, 0); err != nil {
					t.Fatal(err)
				}
				c.Form(&f)
				for outcome := range uint64(1) << n {
					ts, u := c.Decode(outcome)
					var inner complex128
					for det, a := range state {
						inner += cmplx.Conj(amplitude(&c, ts, u, det)) * a
					}
					prob := real(inner)*real(inner) + imag(inner)*imag(inner)
					total += prob
					coset, sign := c.Row(r)
					hit := coset == u
					if hit {
						reached += prob
					}
					for i, det := range dets {
						var value complex128
						v := f.At(det ^ r)
						if hit && v.Syndrome == 0 {
							phase := v.Phase + 2*uint32(bits.OnesCount64((ts^sign)&v.Y))
							value = snapshot.Power(phase) * complex((d+1)*math.Pow(2, -float64(c.K)), 0)
						}
						if row == "vacuum" {
							value *= 2
						} else if det == r {
							value--
						}
						mean[i] += complex(prob, 0) * value
						second[i] += prob * (real(value)*real(value) + imag(value)*imag(value))
						pair[i] += complex(prob, 0) * value * value
					}
				}
			})
			all := float64(count)
			if want := map[int]int{3: 135, 4: 2295}[n]; count != want {
				t.Fatalf("%d bases of %d qubits, want %d", count, n, want)
			}
			if math.Abs(total/all-1) > 1e-12 {
				t.Fatalf("probabilities sum to %.15g", total/all)
			}
			for i, det := range dets {
				want, variance := psi[det], VacuumVariance(n, cmplx.Abs(psi[det]))
				if row == "reference" {
					want *= cmplx.Conj(psi[r])
					variance = ReferenceVariance(n, cmplx.Abs(psi[det]), cmplx.Abs(psi[r]))
					if det == r {
						variance = DiagonalVariance(n, cmplx.Abs(psi[r]))
					}
				}
				mean := mean[i] / complex(all, 0)
				if cmplx.Abs(mean-want) > 1e-12 {
					t.Errorf("n=%d, %s row, det %b: mean %v, want %v", n, row, det, mean, want)
				}
				got := second[i]/all - real(mean)*real(mean) - imag(mean)*imag(mean)
				if math.Abs(got-variance) > 1e-12 {
					t.Errorf("n=%d, %s row, det %b: variance %.15g, want %.15g", n, row, det, got, variance)
				}
				if row == "vacuum" && cmplx.Abs(pair[i])/all > 1e-12 {
					t.Errorf("n=%d, det %b: E[cc] = %v, want 0", n, det, pair[i]/complex(all, 0))
				}
			}
			weight := 0.5
			if row == "reference" {
				weight = math.Pow(cmplx.Abs(psi[r]), 2)
			}
			if want := Reached(n, weight); math.Abs(reached/all-want) > 1e-12 {
				t.Errorf("n=%d, %s row: reached %.15g, want %.15g", n, row, reached/all, want)
			}
		}
	}
}

// dense returns i^phase X^x Z^z |v>.
func dense(x, z uint64, phase int, v []complex128) []complex128 {
	w := make([]complex128, len(v))
	for i, a := range v {
		s := uint32(phase) + 2*uint32(bits.OnesCount64(z&uint64(i)))
		w[uint64(i)^x] = snapshot.Power(s) * a
	}
	return w
}

// TestTableauAgainstDensePaulis checks that the canonical state of every
// outcome is the joint eigenvector that the tableau and the outcome name.
func TestTableauAgainstDensePaulis(t *testing.T) {
	rng := rand.New(rand.NewPCG(3, 4))
	for trial := range 200 {
		n := 1 + trial%5
		x, z, r := randomTableau(n, rng)
		var c Basis
		if err := c.Tableau(n, x, z, r); err != nil {
			t.Fatal(err)
		}
		for outcome := range uint64(1) << n {
			ts, u := c.Decode(outcome)
			state := make([]complex128, 1<<n)
			norm := 0.0
			for det := range state {
				state[det] = amplitude(&c, ts, u, uint64(det))
				norm += real(state[det])*real(state[det]) + imag(state[det])*imag(state[det])
			}
			if math.Abs(norm-1) > 1e-12 {
				t.Fatalf("norm %g", norm)
			}
			for j := range n {
				phase := bits.OnesCount64(x[j]&z[j]) + 2*int(r>>j&1) + 2*int(outcome>>j&1)
				for i, a := range dense(x[j], z[j], phase, state) {
					if cmplx.Abs(a-state[i]) > 1e-12 {
						t.Fatalf("n=%d outcome %b: not an eigenvector of generator %d", n, outcome, j)
					}
				}
			}
		}
	}
}

// randomTableau evolves Z_j by random Hadamard, phase and CNOT gates.
func randomTableau(n int, rng *rand.Rand) (x, z []uint64, r uint64) {
	x, z = make([]uint64, n), make([]uint64, n)
	for j := range n {
		z[j] = 1 << j
	}
	r = rng.Uint64() & mask(n)
	for range 20 * n {
		a, b := rng.IntN(n), rng.IntN(n)
		for j := range n {
			xa, za := x[j]>>a&1, z[j]>>a&1
			xb, zb := x[j]>>b&1, z[j]>>b&1
			if a == b { // Hadamard
				r ^= (xa & za) << j
				x[j] ^= (xa ^ za) << a
				z[j] ^= (xa ^ za) << a
			} else if a < b { // phase gate
				r ^= (xa & za) << j
				z[j] ^= xa << a
			} else { // CNOT a → b
				r ^= (xa & zb & (xb ^ za ^ 1)) << j
				x[j] ^= xa << b
				z[j] ^= zb << a
			}
		}
	}
	return x, z, r
}

// TestUniform draws bases of three qubits: all 135 must appear equally often,
// judged by χ² with 134 degrees of freedom (mean 134, σ 16.4).
func TestUniform(t *testing.T) {
	rng := rand.New(rand.NewPCG(5, 6))
	const n, draws = 3, 135 * 200
	p := RankDistribution(n)
	counts := make(map[[7]uint64]int)
	for range draws {
		k := Rank(p, rng)
		r := Subspace(nil, n, k, rng)
		b := Phases(nil, k, rng)
		var key [7]uint64
		key[0] = uint64(k)
		copy(key[1:4], r)
		copy(key[4:], b)
		counts[key]++
	}
	if len(counts) != 135 {
		t.Fatalf("%d bases drawn, want 135", len(counts))
	}
	chi2 := 0.0
	for _, c := range counts {
		chi2 += float64((c-200)*(c-200)) / 200
	}
	if math.Abs(chi2-134) > 4*16.4 {
		t.Errorf("χ² = %.1f, want 134 within four σ", chi2)
	}
}

// TestRankDistribution compares with the limits for large n, by brute count of
// the product formula: .4194 .4194 .1398 .0200 .0013 for k = n, n−1, ….
func TestRankDistribution(t *testing.T) {
	p := RankDistribution(40)
	for i, want := range []float64{.4194, .4194, .1398, .0200, .0013} {
		if math.Abs(p[40-i]-want) > 5e-5 {
			t.Errorf("P(n−%d) = %.5f, want %.4f", i, p[40-i], want)
		}
	}
}
