package amplitude

import "math"

// Form is a real quadratic form of the amplitudes, c ↦ Re<c|A|c>, known through
// its values between batches: with S = Σ w_b c_b it holds <S|A|S>, <S|A|c_b> and
// <c_b|A|c_b>. That is enough for its unbiased estimate from pairs of different
// batches, Σ_{b≠b'} w_b w_b' <c_b|A|c_b'>/Σ_{b≠b'} w_b w_b', in which the noise of
// a batch never meets itself, and for the same with one batch left out.
type Form struct {
	weights         []float64
	sumW, sumW2     float64
	total, diagonal float64
	cross, own      []float64
}

// NewForm evaluates <c|A|c>; apply(dst, src) sets dst = A·src for hermitian A
// and may be called from several goroutines at once. nil means the identity.
func (e *Estimate) NewForm(apply func(dst, src []complex128)) *Form {
	sum, _ := e.total()
	return e.newForm(sum, func(b int, scratch func() []complex128) []complex128 {
		if apply == nil {
			return e.Batches[b]
		}
		dst := scratch()
		apply(dst, e.Batches[b])
		return dst
	}, func(b int) []complex128 { return e.Batches[b] })
}

// newForm takes the left vector S, A·c_b and c_b as the caller provides them;
// without batch it takes A·c_b for c_b too.
func (e *Estimate) newForm(sum []complex128, image func(b int, scratch func() []complex128) []complex128, batch func(b int) []complex128) *Form {
	n := len(e.Batches)
	f := &Form{weights: e.Weights, cross: make([]float64, n), own: make([]float64, n)}
	parallel(n, len(sum), func(b int, scratch func() []complex128) {
		a := image(b, scratch)
		c := a
		if batch != nil {
			c = batch(b)
		}
		for i, v := range a {
			f.cross[b] += real(sum[i])*real(v) + imag(sum[i])*imag(v)
			f.own[b] += real(c[i])*real(v) + imag(c[i])*imag(v)
		}
	})
	f.finish()
	return f
}

func (f *Form) finish() {
	for b, w := range f.weights {
		f.sumW += w
		f.sumW2 += w * w
		f.total += w * f.cross[b]
		f.diagonal += w * w * f.own[b]
	}
}

// Plain returns the form of the mean, noise included.
func (f *Form) Plain() float64 { return f.total / (f.sumW * f.sumW) }

// Unbiased returns the estimate from pairs of different batches; NaN with fewer
// than two.
func (f *Form) Unbiased() float64 { return f.unbiased(-1) }

// Without returns that with one batch left out.
func (f *Form) Without(batch int) float64 { return f.unbiased(batch) }

func (f *Form) unbiased(without int) float64 {
	total, diagonal, sumW, sumW2 := f.total, f.diagonal, f.sumW, f.sumW2
	if without >= 0 {
		w := f.weights[without]
		total += -2*w*f.cross[without] + w*w*f.own[without]
		diagonal -= w * w * f.own[without]
		sumW -= w
		sumW2 -= w * w
	}
	if len(f.weights) < 2 || sumW*sumW <= sumW2 {
		return math.NaN()
	}
	return (total - diagonal) / (sumW*sumW - sumW2)
}

// Figure returns the unbiased estimate with its jackknife error.
func (f *Form) Figure() Figure {
	return Jackknife(len(f.weights), func(b int) float64 { return f.unbiased(b) })
}

// Jackknife returns the value of a statistic with one standard error, where
// of(b) is the statistic without batch b and of(−1) that of all batches.
func Jackknife(batches int, of func(without int) float64) Figure {
	value := of(-1)
	if batches < 3 {
		return Figure{value, math.NaN()}
	}
	mean := 0.0
	replicas := make([]float64, batches)
	for b := range replicas {
		replicas[b] = of(b)
		mean += replicas[b] / float64(batches)
	}
	sum := 0.0
	for _, v := range replicas {
		sum += (v - mean) * (v - mean)
	}
	return Figure{value, math.Sqrt(sum * float64(batches-1) / float64(batches))}
}
