package amplitude_test

import (
	"math"
	"math/bits"
	"math/cmplx"
	"math/rand/v2"
	"testing"

	"leadline/hamiltonian/strings"
	"leadline/trial/measured/amplitude"
)

// noisy returns an estimate of psi whose batches carry white noise: the variance
// of each real part of a shot is sigma²/2, batches have unequal weights.
func noisy(m, up, down int, psi []complex128, sigma float64, shots int, rng *rand.Rand) *amplitude.Estimate {
	e := &amplitude.Estimate{Up: strings.New(m, up), Down: strings.New(m, down)}
	for b := range 32 {
		n := float64(shots/32 + b%3)
		batch := make([]complex128, len(psi))
		for i, v := range psi {
			s := sigma / math.Sqrt(2*n)
			batch[i] = v + complex(s*rng.NormFloat64(), s*rng.NormFloat64())
		}
		e.Batches = append(e.Batches, batch)
		e.Weights = append(e.Weights, n)
	}
	return e
}

func random(n int, rng *rand.Rand) []complex128 {
	psi := make([]complex128, n)
	norm := 0.0
	for i := range psi {
		psi[i] = complex(rng.NormFloat64(), rng.NormFloat64())
		norm += real(psi[i])*real(psi[i]) + imag(psi[i])*imag(psi[i])
	}
	for i := range psi {
		psi[i] /= complex(math.Sqrt(norm), 0)
	}
	return psi
}

func norm2(v []complex128) float64 {
	s := 0.0
	for _, a := range v {
		s += real(a)*real(a) + imag(a)*imag(a)
	}
	return s
}

// TestUnbiasedNorm averages |c|² without noise over many records: 1 within its
// error, and the jackknife error of one record describes the spread.
func TestUnbiasedNorm(t *testing.T) {
	rng := rand.New(rand.NewPCG(1, 1))
	psi := random(36, rng)
	const records = 400
	var sum, sum2, predicted, noise float64
	for range records {
		e := noisy(4, 2, 2, psi, math.Sqrt(6), 1000, rng)
		f := e.NewForm(nil)
		fig := f.Figure()
		sum += fig.Value
		sum2 += fig.Value * fig.Value
		predicted += fig.Error * fig.Error
		noise += e.Noise()
		if got := f.Plain(); math.Abs(got-norm2(e.Mean())) > 1e-12 {
			t.Fatalf("plain form %g, norm of the mean %g", got, norm2(e.Mean()))
		}
	}
	mean := sum / records
	spread := math.Sqrt(sum2/records - mean*mean)
	if math.Abs(mean-1) > 4*spread/math.Sqrt(records) {
		t.Errorf("|c|² = %.4f ± %.4f, want 1", mean, spread/math.Sqrt(records))
	}
	if r := math.Sqrt(predicted/records) / spread; math.Abs(r-1) > 0.2 {
		t.Errorf("jackknife error is %.2f times the spread", r)
	}
	if got := noise / records; math.Abs(got/(6*36./1023)-1) > 0.05 {
		t.Errorf("noise %.4f, want σ² dim/S = %.4f", got, 6*36./1023)
	}
}

// TestFormOfAnOperator compares with the expectation value itself, without noise
// and left out one batch at a time.
func TestFormOfAnOperator(t *testing.T) {
	rng := rand.New(rand.NewPCG(2, 1))
	n := 9
	psi := random(n, rng)
	a := make([]complex128, n*n)
	for i := range n {
		for j := range i + 1 {
			a[i*n+j] = complex(rng.NormFloat64(), rng.NormFloat64())
			a[j*n+i] = cmplx.Conj(a[i*n+j])
		}
		a[i*n+i] = complex(rng.NormFloat64(), 0)
	}
	apply := func(dst, src []complex128) {
		for i := range n {
			dst[i] = 0
			for j := range n {
				dst[i] += a[i*n+j] * src[j]
			}
		}
	}
	value := func(c []complex128) float64 {
		dst := make([]complex128, n)
		apply(dst, c)
		s := 0.0
		for i := range n {
			s += real(cmplx.Conj(c[i]) * dst[i])
		}
		return s
	}
	clean := noisy(3, 1, 1, psi, 0, 320, rng)
	f := clean.NewForm(apply)
	if got, want := f.Unbiased(), value(psi); math.Abs(got-want) > 1e-12 {
		t.Errorf("without noise %g, want %g", got, want)
	}
	e := noisy(3, 1, 1, psi, 2, 320, rng)
	f = e.NewForm(apply)
	part := e.Clone()
	part.Batches, part.Weights = append(part.Batches[:5], part.Batches[6:]...), append(part.Weights[:5], part.Weights[6:]...)
	if got, want := f.Without(5), part.NewForm(apply).Unbiased(); math.Abs(got-want) > 1e-12 {
		t.Errorf("without batch 5: %g, want %g", got, want)
	}
}

// TestPhase removes a known phase from a real state: the angle agrees within its
// error and the real projection halves the noise.
func TestPhase(t *testing.T) {
	rng := rand.New(rand.NewPCG(3, 1))
	const angle = 0.4
	pulls := 0.0
	const records = 100
	for range records {
		psi := random(36, rng)
		for i := range psi {
			psi[i] = complex(real(psi[i]), 0)
		}
		scale := complex(1/math.Sqrt(norm2(psi)), 0)
		turned := make([]complex128, len(psi))
		for i := range psi {
			psi[i] *= scale
			turned[i] = psi[i] * cmplx.Rect(1, angle)
		}
		e := noisy(4, 2, 2, turned, math.Sqrt(6), 4000, rng)
		before := e.Noise()
		step := e.Real()
		theta := math.Mod(-cmplx.Phase(e.Turn)+2*math.Pi, math.Pi)
		se := math.Sqrt(3. / 4000) // of the imaginary part along the state
		pulls += (theta - angle) * (theta - angle) / (se * se) / records
		for _, v := range e.Mean() {
			if imag(v) != 0 {
				t.Fatal("imaginary parts are left")
			}
		}
		if r := e.Noise() / before; r < 0.35 || r > 0.65 {
			t.Errorf("noise after the real projection is %.2f of that before", r)
		}
		// The phase is fitted, so one of the 36 imaginary parts is missing.
		if r := step.Removed / step.Expected; r < 0.4 || r > 1.9 {
			t.Errorf("removed weight is %.2f of its expectation", r)
		}
	}
	if math.Abs(pulls-1) > 4*math.Sqrt(2./records) {
		t.Errorf("angle: mean square pull %.2f, want 1", pulls)
	}
}

// TestRotateKeepsTheHalvesTogether checks that a phase near the cut of the
// arctangent does not spoil its error.
func TestPhaseNearTheCut(t *testing.T) {
	rng := rand.New(rand.NewPCG(3, 2))
	psi := make([]complex128, 9)
	psi[0] = cmplx.Rect(1, math.Pi/2)
	fig := noisy(3, 1, 1, psi, 1, 3200, rng).Rotate()
	if want := math.Sqrt(0.5 / 3200); math.Abs(fig.Error/want-1) > 0.5 {
		t.Errorf("error of the phase %.3g, want about %.3g", fig.Error, want)
	}
}

// spinPlus applies S₊ by the definition, Σ_p a†_p↑ a_p↓, moving operators past
// each other by hand; determinants are masks, up orbitals before down ones.
func spinPlus(m int, v map[uint64]complex128) map[uint64]complex128 {
	out := make(map[uint64]complex128)
	for det, a := range v {
		for p := range m {
			down, up := uint64(1)<<(m+p), uint64(1)<<p
			if det&down == 0 || det&up != 0 {
				continue
			}
			sign := 1 - 2*(bits.OnesCount64(det&(down-1))&1)
			left := det ^ down
			sign *= 1 - 2*(bits.OnesCount64(left&(up-1))&1)
			out[left|up] += complex(float64(sign), 0) * a
		}
	}
	return out
}

// TestSpin checks the projector: on a random state the parts of all spins add up
// to the state, each is an eigenvector (|S₊c|² = [S(S+1) − S_z(S_z+1)]|c|²), they
// are orthogonal, and the number of states of each spin is the trace.
func TestSpin(t *testing.T) {
	for _, c := range [][3]int{{4, 2, 2}, {4, 3, 1}, {4, 1, 2}, {3, 2, 2}, {3, 3, 1}} {
		m, up, down := c[0], c[1], c[2]
		rng := rand.New(rand.NewPCG(4, uint64(up)))
		n := strings.Count(m, up) * strings.Count(m, down)
		psi := random(n, rng)
		sum := make([]complex128, n)
		total := 0.0
		dimension := 0.0
		for twoS := max(up-down, down-up); twoS <= min(up+down, 2*m-up-down); twoS += 2 {
			e := noisy(m, up, down, psi, 0, 64, rng)
			step, err := e.Spin(twoS)
			if err != nil {
				t.Fatal(err)
			}
			part := e.Mean()
			state := make(map[uint64]complex128)
			for i, u := range e.Up.Masks() {
				for j, d := range e.Down.Masks() {
					sum[i*e.Down.Len()+j] += part[i*e.Down.Len()+j]
					state[u|d<<m] = part[i*e.Down.Len()+j]
				}
			}
			weight := norm2(part)
			total += weight
			plus := 0.0
			for _, v := range spinPlus(m, state) {
				plus += norm2([]complex128{v})
			}
			s, z := float64(twoS)/2, float64(up-down)/2
			if want := (s*(s+1) - z*(z+1)) * weight; math.Abs(plus-want) > 1e-12 {
				t.Errorf("%v spin %g: |S₊c|² = %.12g, want %.12g", c, s, plus, want)
			}
			if math.Abs(step.Removed-(1-weight)) > 1e-12 {
				t.Errorf("%v spin %g: removed %.12g, want %.12g", c, s, step.Removed, 1-weight)
			}
			dimension += amplitude.SpinDimension(m, up, down, twoS)
		}
		for i := range sum {
			if cmplx.Abs(sum[i]-psi[i]) > 1e-12 {
				t.Fatalf("%v: parts do not add up to the state", c)
			}
		}
		if math.Abs(total-1) > 1e-12 {
			t.Errorf("%v: weights add up to %.15g: parts are not orthogonal", c, total)
		}
		if dimension != float64(n) {
			t.Errorf("%v: dimensions add up to %g, want %d", c, dimension, n)
		}
	}
	e := noisy(4, 2, 2, make([]complex128, 36), 1, 64, rand.New(rand.NewPCG(1, 1)))
	for _, twoS := range []int{-1, 1, 6} {
		if _, err := e.Spin(twoS); err == nil {
			t.Errorf("spin %d/2 is accepted", twoS)
		}
	}
}

// TestRemovedWeight projects states that have the symmetry and states that have
// not: the excess over noise is zero within its error, or the weight that is
// really lost.
func TestRemovedWeight(t *testing.T) {
	rng := rand.New(rand.NewPCG(5, 1))
	irreps := []int{0, 1, 0, 1}
	for _, symmetric := range []bool{true, false} {
		pulls := 0.0
		const records = 200
		for range records {
			psi := random(36, rng)
			lost := 0.0
			probe := noisy(4, 2, 2, psi, 0, 64, rng)
			for i, u := range probe.Up.Masks() {
				for j, d := range probe.Down.Masks() {
					if odd := bits.OnesCount64((u&0b1010)^(d&0b1010))&1 != 0; odd {
						if symmetric {
							psi[i*6+j] = 0
						}
						lost += norm2(psi[i*6+j : i*6+j+1])
					}
				}
			}
			e := noisy(4, 2, 2, psi, math.Sqrt(6), 2000, rng)
			step := e.KeepIrrep(irreps, 0)
			pulls += (step.Excess.Value - lost) * (step.Excess.Value - lost) / (step.Excess.Error * step.Excess.Error) / records
			if rest := step.Removed - step.Expected - step.Excess.Value; math.Abs(rest) > 1e-12 {
				t.Fatalf("removed, expected and excess do not fit: %g", rest)
			}
		}
		if math.Abs(pulls-1) > 0.5 {
			t.Errorf("symmetric %v: mean square pull of the excess %.2f, want 1", symmetric, pulls)
		}
	}
}

// TestThreshold keeps a large amplitude and drops most of the empty ones.
func TestThreshold(t *testing.T) {
	rng := rand.New(rand.NewPCG(6, 1))
	psi := make([]complex128, 36)
	psi[7] = 1
	e := noisy(4, 2, 2, psi, math.Sqrt(6), 2000, rng)
	step := e.Threshold(2)
	kept := 0
	for i, v := range e.Mean() {
		if v != 0 {
			kept++
		} else if i == 7 {
			t.Error("the large amplitude is dropped")
		}
	}
	// |noise| > 2σ has the probability e^{−4} = 1.8 % for complex noise.
	if kept < 1 || kept > 4 || step.Removed <= 0 || step.Linear {
		t.Errorf("%d amplitudes kept, step %+v", kept, step)
	}
}

// TestHalves checks that the halves average to the whole.
func TestHalves(t *testing.T) {
	rng := rand.New(rand.NewPCG(7, 1))
	e := noisy(3, 1, 1, random(9, rng), 1, 640, rng)
	a, b := e.Halves()
	wa, wb := 0.0, 0.0
	for i, w := range e.Weights {
		if i < 16 {
			wa += w
		} else {
			wb += w
		}
	}
	for i, v := range e.Mean() {
		if got := (a[i]*complex(wa, 0) + b[i]*complex(wb, 0)) / complex(wa+wb, 0); cmplx.Abs(got-v) > 1e-14 {
			t.Errorf("amplitude %d: halves give %v, want %v", i, got, v)
		}
	}
}
