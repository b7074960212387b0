package collapse_test

import (
	"bytes"
	"context"
	"errors"
	"math"
	"math/bits"
	"math/cmplx"
	"math/rand/v2"
	"slices"
	"testing"

	"leadline/hamiltonian/strings"
	"leadline/trial/measured/amplitude"
	"leadline/trial/measured/calibrate"
	"leadline/trial/measured/collapse"
	"leadline/trial/measured/record"
	"leadline/trial/measured/simulate"
)

var ctx = context.Background()

var ensembles = []record.Ensemble{record.Lagrangian, record.Tableau, record.Matching, record.Orthogonal}

// randomState has one large amplitude, as trial states do, of norm 1.
func randomState(m, up, down int, seed uint64) *simulate.State {
	rng := rand.New(rand.NewPCG(seed, 3))
	st := &simulate.State{Orbitals: m, Up: up, Down: down}
	norm := 0.0
	for range strings.Count(m, up) * strings.Count(m, down) {
		a := complex(rng.NormFloat64(), rng.NormFloat64())
		if len(st.Amplitudes) == 0 {
			a *= 3
		}
		st.Amplitudes = append(st.Amplitudes, a)
		norm += real(a)*real(a) + imag(a)*imag(a)
	}
	for i := range st.Amplitudes {
		st.Amplitudes[i] /= complex(math.Sqrt(norm), 0)
	}
	return st
}

func simulated(t testing.TB, st *simulate.State, opt simulate.Options) record.Source {
	t.Helper()
	h, settings, err := simulate.Settings(ctx, st, opt)
	if err != nil {
		t.Fatal(err)
	}
	return record.NewMemory(h, settings)
}

func run(t testing.TB, source record.Source, opt collapse.Options) *amplitude.Estimate {
	t.Helper()
	e, err := collapse.Run(ctx, source, opt)
	if err != nil {
		t.Fatal(err)
	}
	return e
}

// deviation returns χ² of the estimate against amplitudes, and the number of
// real parts that went into it. A part without noise, such as the imaginary one
// of |Ψ_r|², must be exact.
func deviation(t *testing.T, e *amplitude.Estimate, want []complex128) (chi2, dof float64) {
	t.Helper()
	se := e.Errors()
	for i, v := range e.Mean() {
		for _, part := range [2][3]float64{{real(v), real(want[i]), real(se[i])}, {imag(v), imag(want[i]), imag(se[i])}} {
			d := part[0] - part[1]
			if part[2] < 1e-12 {
				if math.Abs(d) > 1e-10 {
					t.Errorf("amplitude %d is %g without noise, want %g", i, part[0], part[1])
				}
				continue
			}
			chi2 += d * d / (part[2] * part[2])
			dof++
		}
	}
	return chi2, dof
}

// TestRecoversTheState collapses simulated records of every ensemble, row and
// spin order and compares with the state within the errors of the collapse. χ²
// per degree of freedom is 1 within 4σ = 4·sqrt(2/dof); that errors from 32
// batches are uncertain themselves adds 0.15.
func TestRecoversTheState(t *testing.T) {
	for _, e := range ensembles {
		settings := 6000
		if e == record.Orthogonal {
			settings = 600
		}
		for _, c := range []struct {
			up, down  int
			order     record.Order
			bits      record.BitOrder
			reference *[2]uint64
			shots     int
		}{
			{2, 1, record.Blocked, record.Q0First, nil, 1},
			{1, 1, record.Interleaved, record.Q0Last, nil, 3},
			{2, 2, record.Interleaved, record.Q0First, &[2]uint64{0b011, 0b011}, 2},
			{1, 2, record.Blocked, record.Q0Last, &[2]uint64{0b001, 0b011}, 1},
		} {
			st := randomState(3, c.up, c.down, 5)
			source := simulated(t, st, simulate.Options{Ensemble: e, Order: c.order, Bits: c.bits, Reference: c.reference,
				Settings: settings, ShotsPerSetting: c.shots, Seed: 8})
			est := run(t, source, collapse.Options{})
			want := slices.Clone(st.Amplitudes)
			if c.reference != nil {
				r := want[est.Up.Index(c.reference[0])*est.Down.Len()+est.Down.Index(c.reference[1])]
				for i := range want {
					want[i] *= cmplx.Conj(r)
				}
			}
			chi2, dof := deviation(t, est, want)
			if r := chi2 / dof; !(math.Abs(r-1) <= 4*math.Sqrt(2/dof)+0.15) {
				t.Errorf("%s %+v: χ²/dof = %.2f with %g degrees of freedom", e, c, r, dof)
			}
		}
	}
}

// TestSameBitsOnAnyNumberOfCores compares one worker with seven, bit by bit.
func TestSameBitsOnAnyNumberOfCores(t *testing.T) {
	for _, e := range ensembles {
		st := randomState(4, 2, 2, 1)
		source := simulated(t, st, simulate.Options{Ensemble: e, Settings: 150, ShotsPerSetting: 3, Seed: 2})
		one := run(t, source, collapse.Options{Workers: 1})
		seven := run(t, source, collapse.Options{Workers: 7})
		for b := range one.Batches {
			if !slices.Equal(one.Batches[b], seven.Batches[b]) {
				t.Fatalf("%s: batch %d differs", e, b)
			}
		}
	}
}

// TestFilesAndMemoryAgree sends a record through both forms of the file.
func TestFilesAndMemoryAgree(t *testing.T) {
	st := randomState(3, 2, 1, 1)
	h, settings, err := simulate.Settings(ctx, st, simulate.Options{Ensemble: record.Matching, Bits: record.Q0Last, Settings: 300, ShotsPerSetting: 2, Seed: 3})
	if err != nil {
		t.Fatal(err)
	}
	want := run(t, record.NewMemory(h, settings), collapse.Options{}).Mean()
	for _, open := range []func(*bytes.Buffer) (*record.Writer, error){
		func(b *bytes.Buffer) (*record.Writer, error) { return record.NewTextWriter(b, h) },
		func(b *bytes.Buffer) (*record.Writer, error) { return record.NewPackedWriter(b, h) },
	} {
		var b bytes.Buffer
		w, err := open(&b)
		if err != nil {
			t.Fatal(err)
		}
		for _, s := range settings {
			if err := w.Write(s); err != nil {
				t.Fatal(err)
			}
		}
		if err := w.Close(); err != nil {
			t.Fatal(err)
		}
		e := run(t, func() (record.Stream, error) {
			return record.Open("record", bytes.NewReader(b.Bytes()), int64(b.Len()))
		}, collapse.Options{})
		if !slices.Equal(e.Mean(), want) {
			t.Error("amplitudes differ")
		}
		if e.Provenance.Digest == "" || e.Provenance.Shots != 600 || e.Provenance.Settings != 300 {
			t.Errorf("provenance %+v", e.Provenance)
		}
		cut := b.Bytes()[:b.Len()-60]
		if _, err := collapse.Run(ctx, func() (record.Stream, error) {
			return record.Open("cut", bytes.NewReader(cut), int64(len(cut)))
		}, collapse.Options{}); err == nil {
			t.Error("a cut record is collapsed")
		}
	}
}

// TestManyShotsOfASetting compares the histogram's Walsh transform with one
// outcome at a time: the same record with every outcome in a setting of its own.
func TestManyShotsOfASetting(t *testing.T) {
	for _, e := range ensembles[:3] {
		for _, reference := range []*[2]uint64{nil, {0b011, 0b101}} {
			st := randomState(3, 2, 2, 6)
			h, settings, err := simulate.Settings(ctx, st, simulate.Options{Ensemble: e, Reference: reference, Settings: 12, ShotsPerSetting: 500, Seed: 2})
			if err != nil {
				t.Fatal(err)
			}
			var split []*record.Setting
			for _, s := range settings {
				for _, o := range s.Shots {
					one := s.Clone()
					one.ID = uint32(len(split))
					one.Shots = []record.Outcome{o}
					split = append(split, one)
				}
			}
			a := run(t, record.NewMemory(h, settings), collapse.Options{Batches: 1}).Mean()
			b := run(t, record.NewMemory(h, split), collapse.Options{Batches: 1}).Mean()
			for i := range a {
				if cmplx.Abs(a[i]-b[i]) > 1e-12 {
					t.Errorf("%s: amplitude %d is %v together, %v one by one", e, i, a[i], b[i])
				}
			}
		}
	}
}

// TestErrorsMatchTheSpread compares the jackknife errors with the spread of 100
// independent records: within 20 %, both for the weight of the noise and for
// single amplitudes on average.
func TestErrorsMatchTheSpread(t *testing.T) {
	const records = 100
	for _, e := range ensembles[:3] {
		for _, shots := range []int{1, 20} {
			st := randomState(2, 1, 1, 7)
			var predicted float64
			sum := make([]complex128, len(st.Amplitudes))
			sum2 := 0.0
			for seed := range uint64(records) {
				est := run(t, simulated(t, st, simulate.Options{Ensemble: e, Settings: 640, ShotsPerSetting: shots, Seed: 100 + seed}), collapse.Options{})
				predicted += est.Noise() / records
				for i, v := range est.Mean() {
					sum[i] += v / records
					sum2 += (real(v)*real(v) + imag(v)*imag(v)) / records
				}
			}
			for _, v := range sum {
				sum2 -= real(v)*real(v) + imag(v)*imag(v)
			}
			spread := sum2 * records / (records - 1)
			if r := math.Sqrt(predicted / spread); math.Abs(r-1) > 0.2 {
				t.Errorf("%s, %d shots per setting: jackknife error %.3g times the spread", e, shots, r)
			}
		}
	}
}

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

func TestRefusals(t *testing.T) {
	st := randomState(3, 2, 1, 1)
	h, settings, err := simulate.Settings(ctx, st, simulate.Options{Ensemble: record.Matching, Settings: 40, Seed: 3})
	if err != nil {
		t.Fatal(err)
	}
	odd := *h
	odd.Ancilla, odd.Qubits = false, 6
	if _, err := collapse.Run(ctx, record.NewMemory(&odd, settings), collapse.Options{}); err == nil {
		t.Error("an odd number of electrons in the vacuum row without an ancilla is accepted")
	}
	if _, err := collapse.Run(ctx, record.NewMemory(h, settings), collapse.Options{MemoryLimit: 1000}); err == nil {
		t.Error("the memory limit is ignored")
	}
	if _, err := collapse.Run(ctx, record.NewMemory(h, nil), collapse.Options{}); err == nil {
		t.Error("an empty record is accepted")
	}
	other := *h
	other.Kind, other.Twirl = record.Calibration, record.TwirlX
	if _, err := collapse.Run(ctx, record.NewMemory(h, settings), collapse.Options{Calibration: &calibrate.Channel{Header: &other}}); err == nil {
		t.Error("a calibration with another twirl is accepted")
	}
	cancelled, cancel := context.WithCancel(ctx)
	cancel()
	if _, err := collapse.Run(cancelled, record.NewMemory(h, settings), collapse.Options{}); !errors.Is(err, context.Canceled) {
		t.Errorf("cancelled collapse returns %v", err)
	}
}
