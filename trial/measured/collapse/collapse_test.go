package collapse_test

import (
	"bytes"
	"context"
	"errors"
	"math"
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
		e := run(t, record.At("record", bytes.NewReader(b.Bytes()), int64(b.Len())), collapse.Options{})
		if !slices.Equal(e.Mean(), want) {
			t.Error("amplitudes differ")
		}
		if e.Provenance.Digest == "" || e.Provenance.Shots != 600 || e.Provenance.Settings != 300 {
			t.Errorf("provenance %+v", e.Provenance)
		}
		cut := b.Bytes()[:b.Len()-60]
		if _, err := collapse.Run(ctx, record.At("cut", bytes.NewReader(cut), int64(len(cut))), collapse.Options{}); err == nil {
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
