package collapse_test

import (
	"math"
	"math/bits"
	"math/cmplx"
	"math/rand/v2"
	"slices"
	"testing"

	"leadline/hamiltonian/strings"
	"leadline/trial/measured/calibrate"
	"leadline/trial/measured/collapse"
	"leadline/trial/measured/record"
	"leadline/trial/measured/simulate"
)

// flipped returns the probability of reading b when the true bits are a.
func flipped(a, b uint64, rates []simulate.Flip) float64 {
	p := 1.0
	for j, f := range rates {
		rate := f.Zero
		if a>>j&1 != 0 {
			rate = f.One
		}
		if (a^b)>>j&1 == 0 {
			rate = 1 - rate
		}
		p *= rate
	}
	return p
}

// twirled calls do with every setting of the fully twirled ensemble on three
// qubits (matchings in any order and orientation: signed permutations up to
// what readout cannot see) or two (Clifford bases with every GL and X).
func twirled(e record.Ensemble, do func(*record.Setting)) {
	if e == record.Matching {
		permutations([]uint8{0, 1, 2, 3, 4, 5}, func(p []uint8) { do(&record.Setting{Pairs: p}) })
		return
	}
	for _, r := range [][]uint64{{}, {1}, {2}, {3}, {1, 2}} {
		k := len(r)
		for phases := range uint64(1) << (k * (k + 1) / 2) {
			b := []uint64{phases & 1, 0}[:k]
			if k == 2 {
				b[0] |= phases >> 2 & 1 << 1
				b[1] = phases>>2&1 | phases>>1&1<<1
			}
			for _, gl := range [][]uint64{{1, 2}, {2, 1}, {1, 3}, {3, 1}, {2, 3}, {3, 2}} {
				for x := range uint64(4) {
					do(&record.Setting{R: r, B: b, GL: gl, X: x})
				}
			}
		}
	}
}

func permutations(list []uint8, do func([]uint8)) {
	var place func(k int)
	place = func(k int) {
		if k == len(list) {
			do(list)
			return
		}
		for i := k; i < len(list); i++ {
			list[k], list[i] = list[i], list[k]
			place(k + 1)
			list[k], list[i] = list[i], list[k]
		}
	}
	place(0)
}

// exactly returns the expectation value of the estimates over all settings and
// outcomes, as a record with real-valued weights: one record per outcome, added
// up with its probability.
func exactly(t *testing.T, h *record.Header, psi []complex128, rates []simulate.Flip, value func(*record.Setting) []complex128) []complex128 {
	t.Helper()
	var sum []complex128
	settings := 0.0
	twirled(h.Ensemble, func(s *record.Setting) {
		settings++
		exact, err := simulate.Probabilities(h, s, psi)
		if err != nil {
			t.Fatal(err)
		}
		for read := range exact {
			read := uint64(read)
			p := 0.0
			for truth, q := range exact {
				p += q * flipped(uint64(truth), read, rates)
			}
			one := s.Clone()
			one.Shots = []record.Outcome{{Bits: read, Count: 1}}
			for i, v := range value(one) {
				if sum == nil {
					sum = make([]complex128, 64)
				}
				sum[i] += complex(p, 0) * v
			}
		}
	})
	for i := range sum {
		sum[i] /= complex(settings, 0)
	}
	return sum
}

// TestReadoutNoiseIsOneFactor checks the exact statement about gate-independent
// noise: with the full twirl, asymmetric and unequal readout errors multiply
// every amplitude of the vacuum row by one real number, which is the one the
// theory gives; and a calibration with the same errors recovers the amplitudes
// themselves, in the reference row too, where the factors differ.
func TestReadoutNoiseIsOneFactor(t *testing.T) {
	for _, e := range []record.Ensemble{record.Lagrangian, record.Matching} {
		n, electrons := 2, 1
		rates := []simulate.Flip{{Zero: 0.01, One: 0.11}, {Zero: 0.06, One: 0.02}, {Zero: 0.03, One: 0.05}}
		if e == record.Matching {
			n, electrons = 3, 2
		}
		rates = rates[:n]
		var dets []uint64
		for d := range uint64(1) << n {
			if bits.OnesCount64(d) == electrons {
				dets = append(dets, d)
			}
		}
		rng := rand.New(rand.NewPCG(4, 4))
		psi := make([]complex128, 1<<n)
		norm := 0.0
		for _, d := range dets {
			psi[d] = complex(rng.NormFloat64(), rng.NormFloat64())
			norm += real(psi[d])*real(psi[d]) + imag(psi[d])*imag(psi[d])
		}
		for d := range psi {
			psi[d] /= complex(math.Sqrt(norm), 0)
		}
		// The vacuum, measured by the noisy device, gives the channel.
		h := &record.Header{Ensemble: e, Qubits: n, Kind: record.Calibration, Order: record.Blocked, Bits: record.Q0First,
			HamiltonianSHA256: record.UnknownHash, OrbitalsSHA256: record.UnknownHash}
		vacuum := make([]complex128, 1<<n)
		vacuum[0] = 1
		kept := exactly(t, h, vacuum, rates, func(s *record.Setting) []complex128 {
			estimate, err := calibrate.Setting(h, s)
			if err != nil {
				t.Fatal(err)
			}
			var f []complex128
			for _, v := range estimate {
				f = append(f, complex(v, 0))
			}
			return f
		})
		channel := &calibrate.Channel{Header: h}
		for _, v := range kept[:len(calibrate.Ideal(e, n))] {
			channel.Kept = append(channel.Kept, real(v))
		}
		for _, reference := range []uint64{0, dets[0]} {
			h := *h
			h.Kind, h.Up, h.Down = record.Trial, electrons, 0
			state := slices.Clone(psi)
			if reference == 0 {
				for d := range state {
					state[d] *= complex(math.Sqrt(0.5), 0)
				}
				state[0] = complex(math.Sqrt(0.5), 0)
			} else {
				for p := range n {
					if reference>>p&1 != 0 {
						h.Occupied = append(h.Occupied, p)
					}
				}
			}
			mean := func(c *calibrate.Channel) []complex128 {
				return exactly(t, &h, state, rates, func(s *record.Setting) []complex128 {
					v, err := collapse.Masks(ctx, record.NewMemory(&h, []*record.Setting{s}), dets, collapse.Options{Calibration: c})
					if err != nil {
						t.Fatal(err)
					}
					return v
				})
			}
			truth := func(i int) complex128 {
				if reference == 0 {
					return psi[dets[i]]
				}
				return psi[dets[i]] * cmplx.Conj(psi[reference])
			}
			if reference == 0 {
				raw := mean(nil)
				kappa := factor(e, n, electrons, rates)
				for i := range dets {
					if got := raw[i] / truth(i); cmplx.Abs(got-complex(kappa, 0)) > 1e-12 {
						t.Errorf("%s: factor of det %b is %.15g, want %.15g for all", e, dets[i], got, kappa)
					}
				}
			}
			calibrated := mean(channel)
			for i := range dets {
				if cmplx.Abs(calibrated[i]-truth(i)) > 1e-12 {
					t.Errorf("%s, row %b: calibrated amplitude of %b is %.15g, want %.15g", e, reference, dets[i], calibrated[i], truth(i))
				}
			}
		}
	}
}

// factor is κ: (d·q₀ − 1)/(d − 1) with q₀ = Π(1 − p_q) for the Clifford group;
// Σ_j C(n−N,j) 2^{−(n−N)} e_{N/2+j}(1−2p)/C(n,N/2+j) for matchgates, with
// p the mean of both errors of a qubit and e_k the elementary symmetric
// polynomials.
func factor(e record.Ensemble, n, electrons int, rates []simulate.Flip) float64 {
	if e.Clifford() {
		d, q := math.Ldexp(1, n), 1.0
		for _, f := range rates {
			q *= 1 - (f.Zero+f.One)/2
		}
		return (d*q - 1) / (d - 1)
	}
	poly := make([]float64, n+1)
	poly[0] = 1
	for _, f := range rates {
		for k := n; k > 0; k-- {
			poly[k] += poly[k-1] * (1 - f.Zero - f.One)
		}
	}
	kappa := 0.0
	for j := 0; j <= n-electrons; j++ {
		k := electrons/2 + j
		kappa += float64(strings.Count(n-electrons, j)) * math.Ldexp(1, electrons-n) * poly[k] / float64(strings.Count(n, k))
	}
	return kappa
}

// TestCalibrationErrorIsCarried corrects reference-row records of a noisy device
// with short calibrations: over many pairs of records the deviation of an
// amplitude must fit its error, most of which comes from the calibration.
func TestCalibrationErrorIsCarried(t *testing.T) {
	rates := make([]simulate.Flip, 4)
	for j := range rates {
		rates[j] = simulate.Flip{Zero: 0.02, One: 0.05}
	}
	st := randomState(2, 1, 1, 7)
	ref := &[2]uint64{1, 1}
	for _, e := range []record.Ensemble{record.Lagrangian, record.Matching} {
		const records = 40
		pulls, share := 0.0, 0.0
		for seed := range uint64(records) {
			opt := simulate.Options{Ensemble: e, Reference: ref, Settings: 2000, ShotsPerSetting: 20, Seed: 300 + seed, Readout: rates}
			source := simulated(t, st, opt)
			opt.Calibration, opt.Settings, opt.ShotsPerSetting, opt.Seed = true, 320, 1, 700+seed
			c, err := calibrate.Estimate(simulated(t, st, opt), 32)
			if err != nil {
				t.Fatal(err)
			}
			est := run(t, source, collapse.Options{Calibration: c})
			plain := run(t, source, collapse.Options{})
			// Part of the amplitude of the reference itself, the largest.
			got, se := real(est.Mean()[0]), real(est.Errors()[0])
			want := real(st.Amplitudes[0] * cmplx.Conj(st.Amplitudes[0]))
			pulls += (got - want) * (got - want) / (se * se) / records
			share += real(plain.Errors()[0]) / se / records
		}
		if math.Abs(pulls-1) > 0.7 {
			t.Errorf("%s: mean square pull %.2f, want 1", e, pulls)
		}
		if share > 0.7 {
			t.Errorf("%s: the error without calibration is %.2f of the whole: the test tests nothing", e, share)
		}
	}
}
