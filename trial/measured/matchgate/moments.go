package matchgate

import (
	"math"
	"math/bits"
	"math/rand/v2"

	"leadline/trial/measured/snapshot"
)

// SecondMoment estimates the mean over dets of E|Σ_k g_k [z^k]<r|G_z|D>|², one
// noiseless shot, and its standard error, from random matchings. It depends on
// the state only through its occupations: draw returns a determinant with the
// probability that the measured state has it. In the vacuum row the variance of
// an amplitude is four times that, less |Ψ_D|².
func SecondMoment(n int, g []float64, dets []uint64, r uint64, draw func(*rand.Rand) uint64, samples int, rng *rand.Rand) (mean, err float64) {
	var q squares
	var pairs []uint8
	sum, sum2 := 0.0, 0.0
	for range samples {
		pairs = Pairs(pairs[:0], n, rng)
		q.m.Set(n, pairs)
		v := q.mean(g, dets, r, draw(rng))
		sum += v
		sum2 += v * v
	}
	mean = sum / float64(samples)
	return mean, math.Sqrt(max(0, sum2/float64(samples)-mean*mean) / float64(max(1, samples-1)))
}

// squares averages the square of the estimate over determinants, for the
// outcomes of a matching that an occupied determinant allows: p_c is the parity
// of its electrons on cycle c, the other signs are free and do not matter.
type squares struct {
	m       Matching
	form    snapshot.Form
	index   Index
	table   []float64
	scratch []float64
}

func (q *squares) mean(g []float64, dets []uint64, r, occupied uint64) float64 {
	q.m.Form(&q.form)
	q.m.Index(&q.index)
	var p uint64
	for c := range q.m.Cycles {
		p |= uint64(bits.OnesCount64((occupied^r)&q.m.cycle[c].modes)&1) << c
	}
	q.table, q.scratch = q.m.Weights(q.table[:0], g, p, q.scratch)
	sum := 0.0
	for _, d := range dets {
		if v := q.form.At(d ^ r); v.Syndrome == 0 {
			w := q.table[q.index.At(v.Y)]
			sum += w * w
		}
	}
	return sum / float64(len(dets))
}
