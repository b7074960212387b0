// Package calibrate estimates the noisy measurement channel from a record of
// the vacuum, taken with the same ensemble and the same circuits: robust shadow
// estimation (Chen, Yu, Zeng and Flammia, PRX Quantum 2, 030348 (2021)), for
// matchgates degree by degree.
//
// It holds for noise that does not depend on the gates, twirled over the whole
// group. Ratios of amplitudes in the vacuum row need none of it: there such
// noise is one common factor.
package calibrate

import (
	"fmt"
	"io"
	"math"

	"leadline/trial/measured/clifford"
	"leadline/trial/measured/matchgate"
	"leadline/trial/measured/record"
)

// Channel is a measurement channel: what it keeps of each part of a state.
type Channel struct {
	// Header is that of the calibration record.
	Header *record.Header
	Digest string
	Shots  int64
	// Kept is f: one number for the Clifford group, 1/(2^n+1) without noise;
	// n+1 numbers for matchgates, C(n,k)/C(2n,2k) without noise.
	Kept []float64
	// Replicas holds the same numbers with one batch of settings left out at a
	// time, for the jackknife.
	Replicas [][]float64
}

// Ideal returns the channel of a noiseless measurement of n qubits.
func Ideal(e record.Ensemble, n int) []float64 {
	if e.Clifford() {
		return []float64{1 / (math.Ldexp(1, n) + 1)}
	}
	return matchgate.Channel(n)
}

// Estimate reads a calibration record in batches of consecutive settings.
func Estimate(source record.Source, batches int) (*Channel, error) {
	st, err := source()
	if err != nil {
		return nil, err
	}
	h := st.Header()
	if h.Kind != record.Calibration {
		return nil, fmt.Errorf("record holds a %s, expected a calibration", h.Kind)
	}
	total, err := record.Total(st)
	if err != nil {
		return nil, err
	}
	if total < 2 {
		return nil, fmt.Errorf("calibration record has %d settings, expected at least 2", total)
	}
	batches = min(batches, int(total))
	size := len(Ideal(h.Ensemble, h.Qubits))
	sums, shots := make([][]float64, batches), make([]float64, batches)
	for b := range sums {
		sums[b] = make([]float64, size)
	}
	sampler := newSampler(h)
	var s record.Setting
	for i := int64(0); ; i++ {
		if err := st.Next(&s); err == io.EOF {
			break
		} else if err != nil {
			return nil, err
		}
		if i >= total {
			return nil, fmt.Errorf("calibration record has more than the %d settings of its end mark", total)
		}
		b := int(i * int64(batches) / total)
		if err := sampler.add(sums[b], &s); err != nil {
			return nil, err
		}
		shots[b] += float64(s.Count())
	}
	c := &Channel{Header: h, Digest: st.Digest(), Kept: make([]float64, size)}
	all := 0.0
	for b, sum := range sums {
		for k, v := range sum {
			c.Kept[k] += v
		}
		all += shots[b]
	}
	for b, sum := range sums {
		replica := make([]float64, size)
		for k, v := range sum {
			replica[k] = (c.Kept[k] - v) / (all - shots[b])
		}
		c.Replicas = append(c.Replicas, replica)
	}
	c.Shots = int64(all)
	for k := range c.Kept {
		c.Kept[k] /= all
	}
	for _, f := range append([][]float64{c.Kept}, c.Replicas...) {
		for k, v := range f {
			if !(v > 0) {
				return nil, fmt.Errorf("calibration keeps %.3g of degree %d: too few shots, or not a record of the vacuum", v, 2*k)
			}
		}
	}
	return c, nil
}

// Errors returns one standard error of each number by the jackknife.
func (c *Channel) Errors() []float64 {
	return spread(c.Kept, c.Replicas)
}

// spread is the jackknife error of values from their replicas.
func spread(values []float64, replicas [][]float64) []float64 {
	se := make([]float64, len(values))
	n := float64(len(replicas))
	for k := range se {
		mean := 0.0
		for _, r := range replicas {
			mean += r[k] / n
		}
		for _, r := range replicas {
			se[k] += (r[k] - mean) * (r[k] - mean) * (n - 1) / n
		}
		se[k] = math.Sqrt(se[k])
	}
	return se
}

// Fits reports why the channel cannot correct the record with header h.
func (c *Channel) Fits(h *record.Header) error {
	o := c.Header
	switch {
	case o.Ensemble.Clifford() != h.Ensemble.Clifford():
		return fmt.Errorf("calibration is of ensemble %s, the record of %s", o.Ensemble, h.Ensemble)
	case o.Qubits != h.Qubits:
		return fmt.Errorf("calibration has %d qubits, the record %d", o.Qubits, h.Qubits)
	case o.Twirl != h.Twirl:
		return fmt.Errorf("calibration has twirl %q, the record %q", o.Twirl, h.Twirl)
	case o.CalibrationID != "" && h.CalibrationID != "" && o.CalibrationID != h.CalibrationID:
		return fmt.Errorf("calibration is %q, the record names %q", o.CalibrationID, h.CalibrationID)
	}
	return nil
}

// Setting returns the mean of the single-shot estimates of one setting, with no
// regard to its kind.
func Setting(h *record.Header, s *record.Setting) ([]float64, error) {
	f := make([]float64, len(Ideal(h.Ensemble, h.Qubits)))
	if err := newSampler(h).add(f, s); err != nil {
		return nil, err
	}
	shots := float64(s.Count())
	for k := range f {
		f[k] /= shots
	}
	return f, nil
}

// sampler turns settings into sums of single-shot estimates of f.
type sampler struct {
	h        *record.Header
	basis    clifford.Basis
	matching matchgate.Matching
	gaussian *matchgate.Gaussian
	choose   []float64
	poly     []float64
}

func newSampler(h *record.Header) *sampler {
	s := &sampler{h: h, poly: make([]float64, h.Qubits+1)}
	for k := range h.Qubits + 1 {
		s.choose = append(s.choose, matchgate.Binomial(h.Qubits, k))
	}
	if h.Ensemble == record.Orthogonal {
		s.gaussian = matchgate.NewGaussian(h.Qubits, matchgate.Inverse(matchgate.Channel(h.Qubits)))
	}
	return s
}

// add adds the estimates of the setting's shots. Clifford:
// f̂ = (d|<0|s>|² − 1)/(d−1). Matchgate: f̂_k = [z^k] 2^n<0|G_z|0> / C(n,k),
// where 2^n<0|G_z|0> = Π_c (1 + p_c z^{m_c}) for a matching.
func (s *sampler) add(dst []float64, set *record.Setting) error {
	h := s.h
	switch {
	case h.Ensemble.Clifford():
		if err := s.basis.FromSetting(h, set); err != nil {
			return err
		}
		d := math.Ldexp(1, h.Qubits)
		for _, o := range set.Shots {
			f := -1 / (d - 1)
			if _, u := s.basis.Decode(o.Bits); u == 0 {
				f = (math.Ldexp(1, h.Qubits-s.basis.K) - 1) / (d - 1)
			}
			dst[0] += f * float64(o.Count)
		}
		return nil
	case h.Ensemble == record.Matching:
		s.matching.Set(h.Qubits, set.Pairs)
		for _, o := range set.Shots {
			_, p := s.matching.Signs(o.Bits, 0)
			s.matching.Polynomial(s.poly, p)
			for k, v := range s.poly {
				dst[k] += v / s.choose[k] * float64(o.Count)
			}
		}
	default:
		for _, o := range set.Shots {
			s.gaussian.SetOrthogonal(set.Q, o.Bits, 0)
			for k, v := range s.gaussian.Polynomial() {
				dst[k] += v / s.choose[k] * float64(o.Count)
			}
		}
	}
	return nil
}
