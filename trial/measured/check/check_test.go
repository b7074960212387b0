package check_test

import (
	"context"
	"encoding/json"
	"math"
	"math/bits"
	"math/rand/v2"
	"strings"
	"testing"

	"leadline/trial/measured/amplitude"
	"leadline/trial/measured/check"
	"leadline/trial/measured/collapse"
	"leadline/trial/measured/record"
	"leadline/trial/measured/simulate"
)

var ctx = context.Background()

// state is on three orbitals with one electron of each spin, or two up.
func state(up, down int, seed uint64) *simulate.State {
	rng := rand.New(rand.NewPCG(seed, 3))
	n := map[int]int{1: 3, 2: 3}
	st := &simulate.State{Orbitals: 3, Up: up, Down: down}
	norm := 0.0
	for range n[up] * n[down] {
		a := complex(rng.NormFloat64(), rng.NormFloat64())
		if len(st.Amplitudes) == 0 {
			a = 3
		}
		st.Amplitudes = append(st.Amplitudes, a)
		norm += real(a)*real(a) + imag(a)*imag(a)
	}
	for i := range st.Amplitudes {
		st.Amplitudes[i] /= complex(math.Sqrt(norm), 0)
	}
	return st
}

func settings(t *testing.T, st *simulate.State, opt simulate.Options) (*record.Header, []*record.Setting) {
	t.Helper()
	h, list, err := simulate.Settings(ctx, st, opt)
	if err != nil {
		t.Fatal(err)
	}
	return h, list
}

func run(t *testing.T, h *record.Header, list []*record.Setting) (*check.Report, *amplitude.Estimate) {
	t.Helper()
	r, e, err := check.Run(ctx, record.NewMemory(h, list), collapse.Options{})
	if err != nil {
		t.Fatal(err)
	}
	return r, e
}

// has returns the warning of a check, or nil.
func has(r *check.Report, name string) *check.Warning {
	for i := range r.Warnings {
		if r.Warnings[i].Check == name {
			return &r.Warnings[i]
		}
	}
	return nil
}

// TestGoodRecords checks records without device noise: κ is 1, the variance is
// the expected one, as is the rejected fraction, and nothing stops.
func TestGoodRecords(t *testing.T) {
	for _, e := range []record.Ensemble{record.Lagrangian, record.Tableau, record.Matching, record.Orthogonal} {
		for _, reference := range []*[2]uint64{nil, {0b011, 0b001}} {
			opt := simulate.Options{Ensemble: e, Reference: reference, Order: record.Interleaved, Settings: 4000, Seed: 3}
			if e == record.Orthogonal {
				opt.Settings = 500
			}
			r, est := run(t, mustHeader(t, opt), mustSettings(t, opt))
			if d := math.Abs(r.Kappa - 1); d > 4*r.KappaError || !(r.KappaError > 0) {
				t.Errorf("%s, reference %v: κ = %.3f(%.3f), want 1", e, reference != nil, r.Kappa, r.KappaError)
			}
			// From 32 batches of 9 amplitudes, tails heavier with fewer shots.
			tolerance := 0.2
			if e == record.Orthogonal {
				tolerance = 0.4
			}
			if ratio := r.Variance / r.VarianceExpected; math.Abs(ratio-1) > tolerance {
				t.Errorf("%s, reference %v: variance %.2f, expected %.2f(%.2f)", e, reference != nil, r.Variance, r.VarianceExpected, r.VarianceExpectedError)
			}
			f := r.Rejected[0]
			if math.Abs(f.Fraction-f.Expected) > 4*f.Error {
				t.Errorf("%s, reference %v: rejected %.4f, expected %.4f(%.4f)", e, reference != nil, f.Fraction, f.Expected, f.Error)
			}
			x := est.Noise() / (r.Kappa * r.Kappa)
			if reference == nil && math.Abs(r.Infidelity-x/(1+x)) > 1e-12 {
				t.Errorf("%s: infidelity %.4f, want %.4f", e, r.Infidelity, x/(1+x))
			}
			for _, w := range r.Warnings {
				if w.Level == "stop" || w.Check == "reading" || w.Check == "norm" {
					t.Errorf("%s, reference %v: %+v", e, reference != nil, w)
				}
			}
			text, err := json.Marshal(r)
			if err != nil {
				t.Fatal(err)
			}
			for _, key := range []string{"ensemble", "qubits", "settings", "shots", "row", "kappa", "kappa_error", "variance", "variance_expected", "infidelity", "rejected", "valid"} {
				if !strings.Contains(string(text), `"`+key+`":`) {
					t.Errorf("JSON lacks %q", key)
				}
			}
		}
	}
}

func mustHeader(t *testing.T, opt simulate.Options) *record.Header {
	h, err := simulate.NewHeader(state(2, 1, 1), &opt)
	if err != nil {
		t.Fatal(err)
	}
	return h
}

func mustSettings(t *testing.T, opt simulate.Options) []*record.Setting {
	_, list := settings(t, state(2, 1, 1), opt)
	return list
}

// TestWrongBitOrder is the norm test: bits printed the other way round than the
// header says leave next to nothing of the norm, and the report names the
// remedy.
func TestWrongBitOrder(t *testing.T) {
	for _, e := range []record.Ensemble{record.Lagrangian, record.Matching} {
		h, list := settings(t, state(1, 1, 2), simulate.Options{Ensemble: e, Settings: 3000, Seed: 4})
		for _, s := range list {
			for i := range s.Shots {
				s.Shots[i].Bits = bits.Reverse64(s.Shots[i].Bits) >> (64 - h.Qubits)
			}
		}
		r, _ := run(t, h, list)
		w := has(r, "reading")
		if r.Kappa > 0.5 || w == nil || w.Level != "stop" || !strings.Contains(w.Text, "bits reversed:") {
			t.Errorf("%s: κ = %.2f(%.2f), warning %+v, readings %+v", e, r.Kappa, r.KappaError, w, r.Readings)
		}
	}
}

// TestDampedRecord checks κ of a device with readout errors against theory, and
// the parity monitor: (1 − Π(1−2p))/2 of the shots.
func TestDampedRecord(t *testing.T) {
	const p = 0.02
	rates := make([]simulate.Flip, 6)
	for j := range rates {
		rates[j] = simulate.Flip{Zero: p, One: p}
	}
	h, list := settings(t, state(1, 1, 2), simulate.Options{Ensemble: record.Matching, Settings: 8000, Seed: 4, Readout: rates})
	r, _ := run(t, h, list)
	// κ_N = Σ_j C(n−N,j) 2^{N−n} (1−2p)^{N/2+j}, n = 6, N = 2
	kappa := 0.0
	choose := []float64{1, 4, 6, 4, 1}
	for j, c := range choose {
		kappa += c / 16 * math.Pow(1-2*p, float64(1+j))
	}
	if math.Abs(r.Kappa-kappa) > 4*r.KappaError {
		t.Errorf("κ = %.3f(%.3f), theory %.3f", r.Kappa, r.KappaError, kappa)
	}
	f, want := r.Rejected[0], (1-math.Pow(1-2*p, 6))/2
	if math.Abs(f.Fraction-want) > 4*f.Error || f.Expected != 0 {
		t.Errorf("odd parity %.4f(%.4f), theory %.4f", f.Fraction, f.Error, want)
	}
	if has(r, "parity") == nil {
		t.Error("no note about the parity")
	}
}

// TestBelongsToTheJob compares declared amplitudes, energy and fingerprint.
func TestBelongsToTheJob(t *testing.T) {
	st := state(1, 1, 2)
	h, list := settings(t, st, simulate.Options{Ensemble: record.Lagrangian, Settings: 4000, Seed: 4, HamiltonianSHA256: strings.Repeat("ab", 32)})
	// A diagonal Hamiltonian: energy of determinant (p, q) is 1 + p + 2q.
	apply := func(dst, src []complex128) {
		for i, v := range src {
			dst[i] = complex(float64(1+i/3+2*(i%3)), 0) * v
		}
	}
	exact := 0.0
	for i, v := range st.Amplitudes {
		exact += float64(1+i/3+2*(i%3)) * (real(v)*real(v) + imag(v)*imag(v))
	}
	for p := range 3 {
		for q := range 3 {
			h.TopAmplitudes = append(h.TopAmplitudes, record.Amplitude{Mask: 1<<p | 1<<(3+q), Value: st.Amplitudes[3*p+q]})
		}
	}
	h.TrialEnergy = &exact
	r, e := run(t, h, list)
	r.CompareEnergy(e, apply)
	if math.Abs(r.Energy.Value-exact) > 4*r.Energy.Error {
		t.Errorf("energy %.4f(%.4f), exact %.4f", r.Energy.Value, r.Energy.Error, exact)
	}
	if r.TopOverlap == nil || math.Abs(r.TopOverlap.Value-1) > 4*r.TopOverlap.Error {
		t.Errorf("overlap with the declared amplitudes %+v, want 1", r.TopOverlap)
	}
	if !r.CompareFingerprint(h, strings.Repeat("ab", 32)) {
		t.Error("the right fingerprint is refused")
	}
	for _, name := range []string{"energy", "amplitudes", "orbitals"} {
		if w := has(r, name); w != nil {
			t.Errorf("warning %+v", *w)
		}
	}
	// Another sign convention of one orbital, another Hamiltonian, another file.
	for i := range h.TopAmplitudes {
		if h.TopAmplitudes[i].Mask&1 != 0 {
			h.TopAmplitudes[i].Value = -h.TopAmplitudes[i].Value
		}
	}
	wrong := exact + 1
	h.TrialEnergy = &wrong
	r, e = run(t, h, list)
	r.CompareEnergy(e, apply)
	if r.CompareFingerprint(h, strings.Repeat("cd", 32)) {
		t.Error("another fingerprint is accepted")
	}
	for _, name := range []string{"energy", "amplitudes", "orbitals"} {
		if w := has(r, name); w == nil || w.Level != "stop" {
			t.Errorf("%s: warning %+v, want a stop", name, w)
		}
	}
	h.HamiltonianSHA256 = record.UnknownHash
	if r.CompareFingerprint(h, strings.Repeat("cd", 32)) {
		t.Error("an unknown fingerprint is accepted")
	}
}

// TestFewSettings warns, and refuses where no error bar can be had.
func TestFewSettings(t *testing.T) {
	h, list := settings(t, state(1, 1, 2), simulate.Options{Ensemble: record.Matching, Settings: 20, ShotsPerSetting: 500, Seed: 4})
	r, _ := run(t, h, list)
	if has(r, "settings") == nil {
		t.Error("20 settings give no warning")
	}
	if _, _, err := check.Run(ctx, record.NewMemory(h, list[:2]), collapse.Options{}); err == nil {
		t.Error("two settings are accepted")
	}
}
