package check

import (
	"context"
	"math"
	"math/cmplx"
	"math/rand/v2"
	"sort"

	"leadline/trial/measured/amplitude"
	"leadline/trial/measured/clifford"
	"leadline/trial/measured/collapse"
	"leadline/trial/measured/matchgate"
	"leadline/trial/measured/record"
)

const (
	causeParity = "odd parity"
	causeCoset  = "row not reached"
)

// referenceWeight estimates |Ψ_r|²; 0 in the vacuum row.
func referenceWeight(e *amplitude.Estimate, mean []complex128) float64 {
	if e.Reference == nil {
		return 0
	}
	at := e.Up.Index(e.Reference[0])*e.Down.Len() + e.Down.Index(e.Reference[1])
	return math.Min(1, math.Max(0, real(mean[at])))
}

// variance fills in the expected variance of one shot, averaged over the sector.
func (r *Report) variance(h *record.Header, e *amplitude.Estimate) {
	mean := e.Mean()
	n, dim := h.Qubits, float64(e.Size())
	weight := referenceWeight(e, mean)
	if h.Ensemble.Clifford() {
		if e.Reference == nil {
			// Linear in |Ψ_D|², whose mean over the sector is 1/dim.
			r.VarianceExpected = clifford.VacuumVariance(n, math.Sqrt(1/dim))
			return
		}
		rest := 0.0
		if dim > 1 {
			rest = clifford.ReferenceVariance(n, math.Sqrt((1-weight)/(dim-1)), math.Sqrt(weight)) * (dim - 1)
		}
		r.VarianceExpected = (rest + clifford.DiagonalVariance(n, math.Sqrt(weight))) / dim
		return
	}
	// Matchings: sampled, with occupations from the amplitudes themselves, less
	// their noise.
	se := e.Errors()
	cumulative := make([]float64, len(mean))
	sum := 0.0
	for i, v := range mean {
		sigma := cmplx.Abs(se[i])
		sum += max(0, real(v)*real(v)+imag(v)*imag(v)-sigma*sigma)
		cumulative[i] = sum
	}
	dets := make([]uint64, 0, len(mean))
	for _, u := range e.Up.Masks() {
		for _, d := range e.Down.Masks() {
			dets = append(dets, h.Determinant(u, d))
		}
	}
	draw := func(rng *rand.Rand) uint64 {
		if e.Reference == nil && rng.Uint64()&1 == 0 {
			return 0
		}
		i := sort.SearchFloat64s(cumulative, rng.Float64()*sum)
		return dets[min(i, len(dets)-1)]
	}
	samples := int(min(4000, max(100, 2e7/dim)))
	g := matchgate.Inverse(matchgate.Channel(n))
	second, err := matchgate.SecondMoment(n, g, dets, h.ReferenceMask(), draw, samples, rand.New(rand.NewPCG(1, uint64(n))))
	if e.Reference == nil {
		second, err = 4*second, 4*err
		r.VarianceExpected = second - 1/dim
	} else {
		r.VarianceExpected = second - weight/dim
	}
	r.VarianceExpectedError = err
}

// rejections fills in the fractions of shots that contribute nothing; the error
// is that of the difference from the expectation.
func (r *Report) rejections(h *record.Header, e *amplitude.Estimate) {
	f := Rejected{Cause: causeParity, Fraction: float64(e.Provenance.Rejected) / float64(r.Shots)}
	f.Error = math.Sqrt(math.Max(f.Fraction, 1/float64(r.Shots)) / float64(r.Shots))
	if h.Ensemble.Clifford() {
		weight, uncertain := 0.5, 0.0
		if e.Reference != nil {
			weight = referenceWeight(e, e.Mean())
			uncertain = real(e.Errors()[e.Up.Index(e.Reference[0])*e.Down.Len()+e.Down.Index(e.Reference[1])])
		}
		f.Cause, f.Expected = causeCoset, 1-clifford.Reached(h.Qubits, weight)
		// All shots of a setting may miss together; and the expectation is from
		// the record itself.
		f.Error = math.Hypot(math.Sqrt(f.Fraction*(1-f.Fraction)/float64(r.Settings)), uncertain*(1-clifford.Reached(h.Qubits, 0)))
	}
	r.Rejected = []Rejected{f}
}

// declared compares with the amplitudes of the header: ρ = |Σ conj(a_D) c_D| over
// the norms of both on the declared determinants, the measured one without
// noise.
func (r *Report) declared(h *record.Header, e *amplitude.Estimate) {
	r.DeclaredEnergy = h.TrialEnergy
	if len(h.TopAmplitudes) == 0 {
		return
	}
	var top []complex128
	var at []int
	weight := 0.0
	for i, u := range e.Up.Masks() {
		for j, d := range e.Down.Masks() {
			for _, a := range h.TopAmplitudes {
				if h.Determinant(u, d) != a.Mask|h.AncillaMask() || a.Value == 0 {
					continue
				}
				v := a.Value
				if h.OrderSign(u, d) {
					v = -v
				}
				top, at = append(top, v), append(at, i*e.Down.Len()+j)
				weight += real(v)*real(v) + imag(v)*imag(v)
			}
		}
	}
	if weight == 0 {
		return
	}
	part := amplitude.Estimate{Weights: e.Weights}
	for _, batch := range e.Batches {
		few := make([]complex128, len(at))
		for k, i := range at {
			few[k] = batch[i]
		}
		part.Batches = append(part.Batches, few)
	}
	own := part.NewForm(nil)
	inner := func(without int) float64 {
		var sum complex128
		all := 0.0
		for b, batch := range part.Batches {
			if b == without {
				continue
			}
			for k, a := range top {
				sum += complex(e.Weights[b], 0) * cmplx.Conj(a) * batch[k]
			}
			all += e.Weights[b]
		}
		return cmplx.Abs(sum) / all
	}
	f := amplitude.Jackknife(len(e.Batches), func(b int) float64 {
		return inner(b) / math.Sqrt(weight*math.Max(own.Without(b), 1e-300))
	})
	r.TopOverlap = &Estimate{f.Value, f.Error}
	if f.Value+manyDeviations*f.Error < 1 {
		r.warning("amplitudes", "stop", f.Value, "measured and declared amplitudes overlap by %.3f(%.3f): other orbitals, signs or order of the spin orbitals", f.Value, f.Error)
	}
}

// readings collapses the record again with the bits reversed, with the other
// order of the spin orbitals, and with both.
func (r *Report) readings(ctx context.Context, source record.Source, h *record.Header, opt collapse.Options, own amplitude.Figure) error {
	other := record.Interleaved
	if h.Order == record.Interleaved {
		other = record.Blocked
	}
	best := -1
	for _, c := range []struct {
		name    string
		reading collapse.Reading
	}{
		{"bits reversed", collapse.Reading{ReverseBits: true}},
		{"order " + string(other), collapse.Reading{Order: other}},
		{"bits reversed and order " + string(other), collapse.Reading{ReverseBits: true, Order: other}},
	} {
		opt.Reading = c.reading
		e, err := collapse.Run(ctx, source, opt)
		if ctx.Err() != nil {
			return ctx.Err()
		}
		if err != nil {
			continue // the header does not allow this reading
		}
		k := kappaSquared(e, e.NewForm(nil))
		value, kerr := root(k)
		r.Readings = append(r.Readings, Reading{c.name, value, kerr})
		if k.Value-2*k.Error > own.Value+2*own.Error && (best < 0 || value > r.Readings[best].Kappa) {
			best = len(r.Readings) - 1
		}
	}
	if best >= 0 {
		r.warning("reading", "stop", r.Readings[best].Kappa, "norm is %.3f(%.3f) as the header says, %.3f(%.3f) with %s: the header is probably wrong",
			r.Kappa, r.KappaError, r.Readings[best].Kappa, r.Readings[best].KappaError, r.Readings[best].Name)
	} else {
		r.warning("reading", "caution", r.Kappa, "norm is %.3f(%.3f), and no other reading of the bits gives more: a very noisy device, or another convention", r.Kappa, r.KappaError)
	}
	return nil
}

// CompareEnergy fills in the energy of the measured state, <c|H|c>/<c|c> with the
// noise left out of numerator and denominator, and compares it with the
// declared one. apply(dst, src) sets dst = H·src on the sector, constant
// included, and may be called from several goroutines.
func (r *Report) CompareEnergy(e *amplitude.Estimate, apply func(dst, src []complex128)) {
	norm, energy := e.NewForm(nil), e.NewForm(apply)
	f := amplitude.Jackknife(len(e.Batches), func(b int) float64 { return energy.Without(b) / norm.Without(b) })
	r.Energy = &Estimate{f.Value, f.Error}
	if r.DeclaredEnergy == nil {
		return
	}
	if d := (f.Value - *r.DeclaredEnergy) / f.Error; math.Abs(d) > manyDeviations {
		r.warning("energy", "stop", f.Value-*r.DeclaredEnergy, "energy of the measured state is %.6f(%.6f), declared is %.6f: %.1f standard errors apart", f.Value, f.Error, *r.DeclaredEnergy, d)
	}
}
