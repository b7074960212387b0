package simulate

import (
	"context"
	"math"
	"math/bits"
	"math/cmplx"
	"math/rand/v2"
	"testing"

	"github.com/google/go-cmp/cmp"

	"leadline/trial/measured/record"
	"leadline/trial/measured/snapshot"
)

var ensembles = []record.Ensemble{record.Lagrangian, record.Tableau, record.Matching, record.Orthogonal}

func randomState(m, up, down int, seed uint64) *State {
	rng := rand.New(rand.NewPCG(seed, 1))
	size := 1
	for _, k := range []int{up, down} {
		c := 1
		for i := range k {
			c = c * (m - i) / (i + 1)
		}
		size *= c
	}
	st := &State{Orbitals: m, Up: up, Down: down, Amplitudes: make([]complex128, size)}
	for i := range st.Amplitudes {
		st.Amplitudes[i] = complex(rng.NormFloat64(), rng.NormFloat64())
	}
	return st
}

// pauli returns i^phase X^x Z^z v.
func pauli(x, z uint64, phase int, v []complex128) []complex128 {
	w := make([]complex128, len(v))
	for i, a := range v {
		w[uint64(i)^x] = a * snapshot.Power(uint32(phase)+2*uint32(bits.OnesCount64(z&uint64(i))))
	}
	return w
}

// majorana returns g_a v: g_{2p} = Z…Z X_p, g_{2p+1} = Z…Z Y_p.
func majorana(a int, v []complex128) []complex128 {
	bit := uint64(1) << (a / 2)
	if a%2 == 0 {
		return pauli(bit, bit-1, 0, v)
	}
	return pauli(bit, bit-1|bit, 1, v)
}

// observable applies the operator whose sign qubit j reads, straight from the
// format's definition of the setting.
func observable(h *record.Header, s *record.Setting, j int, v []complex128) []complex128 {
	switch h.Ensemble {
	case record.Tableau:
		return pauli(s.TX[j], s.TZ[j], bits.OnesCount64(s.TX[j]&s.TZ[j])+2*int(s.TSign>>j&1), v)
	case record.Matching:
		w := majorana(int(s.Pairs[2*j]), majorana(int(s.Pairs[2*j+1]), v))
		for i := range w {
			w[i] *= -1i
		}
		return w
	}
	// −i g̃_{2j} g̃_{2j+1}, g̃ = Qg
	m := 2 * h.Qubits
	row := func(r int, v []complex128) []complex128 {
		sum := make([]complex128, len(v))
		for nu := range m {
			for i, a := range majorana(nu, v) {
				sum[i] += complex(s.Q[r*m+nu], 0) * a
			}
		}
		return sum
	}
	w := row(2*j, row(2*j+1, v))
	for i := range w {
		w[i] *= -1i
	}
	return w
}

// probability is <ψ| Π_j (1 + (−1)^{b_j} O_j)/2 |ψ>.
func probability(h *record.Header, s *record.Setting, outcome uint64, psi []complex128) float64 {
	v := psi
	for j := range h.Qubits {
		w := observable(h, s, j, v)
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
	sum := 0.0
	for i := range v {
		sum += real(cmplx.Conj(psi[i]) * v[i])
	}
	return sum
}

// stateProbability is |<s|ψ>|² for the affine form that the format defines,
// summed by hand.
func stateProbability(h *record.Header, s *record.Setting, outcome uint64, psi []complex128) float64 {
	n, k := h.Qubits, len(s.R)
	b := outcome ^ s.X
	if len(s.GL) > 0 { // invert by search
		for try := range uint64(1) << n {
			var image uint64
			for j := range n {
				image ^= s.GL[j] & -(try >> j & 1)
			}
			if image == outcome^s.X {
				b = try
			}
		}
	}
	u := b
	for _, r := range s.R {
		u &^= r & -r
	}
	var inner complex128
	for y := range uint64(1) << k {
		det, phase := u, uint32(0)
		for i := range k {
			if y>>i&1 == 0 {
				continue
			}
			det ^= s.R[i]
			phase += uint32(s.B[i]>>i&1) + 2*uint32(bits.OnesCount64(s.B[i]&y&(1<<i-1)))
			pivot := bits.TrailingZeros64(s.R[i])
			phase += 2 * uint32(b>>pivot&1)
		}
		inner += cmplx.Conj(snapshot.Power(phase)) * psi[det]
	}
	return (real(inner)*real(inner) + imag(inner)*imag(inner)) / math.Ldexp(1, k)
}

// TestOutcomesFollowTheBornRule draws many shots of a few settings and compares
// with probabilities from the definitions in the format, by χ² summed over the
// settings. Both ways of sampling are used: single shots and many at once.
func TestOutcomesFollowTheBornRule(t *testing.T) {
	st := randomState(2, 1, 1, 4)
	for _, e := range ensembles {
		for _, ref := range []*[2]uint64{nil, {1, 2}} {
			opt := Options{Ensemble: e, Reference: ref, Settings: 6, ShotsPerSetting: 4000, Seed: 9}
			h, settings, err := Settings(context.Background(), st, opt)
			if err != nil {
				t.Fatal(err)
			}
			list, err := components(st, h)
			if err != nil {
				t.Fatal(err)
			}
			psi := make([]complex128, 1<<h.Qubits)
			for _, c := range list {
				psi[c.det] = c.amplitude
			}
			chi2, dof := 0.0, 0.0
			for _, s := range settings {
				if err := s.Validate(h); err != nil {
					t.Fatal(err)
				}
				counts := make(map[uint64]float64)
				for _, o := range s.Shots {
					counts[o.Bits] = float64(o.Count)
				}
				total := 0.0
				exact, err := Probabilities(h, s, psi)
				if err != nil {
					t.Fatal(err)
				}
				for b := range uint64(1) << h.Qubits {
					var p float64
					if e == record.Lagrangian {
						p = stateProbability(h, s, b, psi)
					} else {
						p = probability(h, s, b, psi)
					}
					total += p
					if math.Abs(exact[b]-p) > 1e-12 {
						t.Fatalf("%s: probability of %b is %.15g, want %.15g", e, b, exact[b], p)
					}
					if p < 1e-12 {
						if counts[b] != 0 {
							t.Errorf("%s: impossible outcome %b drawn", e, b)
						}
						continue
					}
					want := p * 4000
					chi2 += (counts[b] - want) * (counts[b] - want) / want
					dof++
				}
				dof--
				if math.Abs(total-1) > 1e-9 {
					t.Fatalf("%s: probabilities sum to %g", e, total)
				}
			}
			if sigma := math.Sqrt(2 * dof); math.Abs(chi2-dof) > 4*sigma {
				t.Errorf("%s: χ² = %.1f with %g degrees of freedom, σ %.1f", e, chi2, dof, sigma)
			}
		}
	}
}

// TestSingleShotsAgreeWithMany compares the halving of the vector with the full
// transform on one basis.
func TestSingleShotsAgreeWithMany(t *testing.T) {
	rng := rand.New(rand.NewPCG(1, 9))
	v := make([]complex128, 16)
	for i := range v {
		v[i] = complex(rng.NormFloat64(), rng.NormFloat64())
	}
	full := append([]complex128(nil), v...)
	transform(full)
	norm := 0.0
	for _, a := range full {
		norm += real(a)*real(a) + imag(a)*imag(a)
	}
	const shots = 20000
	var counts [16]float64
	for range shots {
		counts[halve(append([]complex128(nil), v...), rng)]++
	}
	chi2 := 0.0
	for i, a := range full {
		want := shots * (real(a)*real(a) + imag(a)*imag(a)) / norm
		chi2 += (counts[i] - want) * (counts[i] - want) / want
	}
	if math.Abs(chi2-15) > 4*math.Sqrt(30) {
		t.Errorf("χ² = %.1f, want 15 within four times 5.5", chi2)
	}
}

func TestDeterministic(t *testing.T) {
	st := randomState(3, 1, 2, 2)
	for _, e := range ensembles {
		opt := Options{Ensemble: e, Settings: 100, ShotsPerSetting: 3, Seed: 5, Workers: 1}
		_, one, err := Settings(context.Background(), st, opt)
		if err != nil {
			t.Fatal(err)
		}
		opt.Workers = 7
		h, seven, err := Settings(context.Background(), st, opt)
		if err != nil {
			t.Fatal(err)
		}
		if !cmp.Equal(one, seven) {
			t.Errorf("%s: one worker and seven draw different records", e)
		}
		if want := !e.Clifford(); h.Ancilla != want {
			t.Errorf("%s: ancilla %v, want %v for three electrons", e, h.Ancilla, want)
		}
		opt.Seed++
		if _, other, _ := Settings(context.Background(), st, opt); cmp.Equal(one, other) {
			t.Errorf("%s: seed has no effect", e)
		}
	}
}

// TestReadout checks the misread fractions on a calibration whose bits are all
// known: a Clifford basis would hide them, so the bits go through read alone.
func TestReadout(t *testing.T) {
	h, err := NewHeader(&State{Orbitals: 1}, &Options{Ensemble: record.Matching, Calibration: true})
	if err != nil {
		t.Fatal(err)
	}
	d := newDevice(h, &Options{Readout: []Flip{{0.1, 0}, {0, 0.3}}}, nil)
	rng := rand.New(rand.NewPCG(1, 1))
	const shots = 40000
	for range shots {
		d.read(0b10, rng)
	}
	want := map[uint64]float64{0b10: .9 * .7, 0b11: .1 * .7, 0b00: .9 * .3, 0b01: .1 * .3}
	for word, p := range want {
		sigma := math.Sqrt(shots * p * (1 - p))
		if got := float64(d.counts[word]); math.Abs(got-shots*p) > 4*sigma {
			t.Errorf("word %b: %g of %d, want %.0f, σ %.0f", word, got, shots, shots*p, sigma)
		}
	}
}

func BenchmarkRun(b *testing.B) {
	st := randomState(6, 3, 3, 1)
	for _, e := range ensembles {
		b.Run(string(e), func(b *testing.B) {
			for b.Loop() {
				if _, _, err := Settings(context.Background(), st, Options{Ensemble: e, Settings: 200, Seed: 1}); err != nil {
					b.Fatal(err)
				}
			}
			b.ReportMetric(b.Elapsed().Seconds()/float64(b.N)/200*1e6, "us/setting")
		})
	}
}
