package collapse

import (
	"context"
	"fmt"
	"io"
	"math"
	"math/bits"
	"math/cmplx"

	"leadline/trial/measured/amplitude"
	"leadline/trial/measured/record"
	"leadline/trial/measured/snapshot"
)

// maxRefined bounds the sector of a matchgate record that can be refined: every
// determinant takes a collapse of its own.
const maxRefined = 2000

// Refine takes one power step towards the dominant eigenvector of the mean
// snapshot on vacuum and sector. The measured state is pure, so its projector
// has rank one, and multiplying the mean snapshot with the present estimate
// brings in the elements between determinants, which the row of the vacuum
// leaves out: the noise falls from a variance of 6 to about 4 in Clifford
// records, by half in matchgate ones. The result is not linear in the snapshots
// but consistent. It has the noise of the mean snapshot in its batches; that of
// the present estimate acts along the state only, to first order.
//
// Only the vacuum row can be refined; the reference row gains nothing where the
// reference dominates. e may be projected already; the result is not. Clifford
// records are read once, matchgate ones held in memory and collapsed once for
// each determinant.
func Refine(ctx context.Context, source record.Source, e *amplitude.Estimate, opt Options) (*amplitude.Estimate, error) {
	st, err := source()
	if err != nil {
		return nil, err
	}
	h := *st.Header()
	if h.Occupied != nil {
		return nil, fmt.Errorf("record is of a reference row: only the vacuum row can be refined")
	}
	if h.Ensemble == record.Orthogonal {
		return nil, fmt.Errorf("record is of ensemble orthogonal: only lagrangian, tableau and matching can be refined")
	}
	total, _ := st.Declared()
	if total < int64(len(e.Batches)) {
		return nil, fmt.Errorf("record has %d settings, expected at least %d", total, len(e.Batches))
	}
	p, err := newPlan(&h, sectorTarget(&h, e.Up, e.Down), 0, &opt)
	if err != nil {
		return nil, err
	}
	if p.target.size() != e.Size() {
		return nil, fmt.Errorf("record has a sector of %d determinants, the estimate %d", p.target.size(), e.Size())
	}
	start := e.Mean()
	turn := complex128(1)
	if e.Turn != 0 {
		turn = cmplx.Conj(e.Turn)
	}
	for i, row := range p.target.rows {
		for j, col := range p.target.cols {
			at := i*len(p.target.cols) + j
			start[at] *= turn
			if p.target.orderSign(row, col) {
				start[at] = -start[at]
			}
		}
	}
	out := *e
	out.Turn = 0
	out.Steps = append(out.Steps[:len(out.Steps):len(out.Steps)], amplitude.Step{Name: "one power step towards the dominant eigenvector, from the estimate so far"})
	if h.Ensemble.Clifford() {
		out.Batches, out.Weights, err = p.refineClifford(ctx, st, start, len(e.Batches), total, opt.Progress)
	} else {
		out.Batches, out.Weights, err = p.refineMatching(ctx, st, start, len(e.Batches), opt)
	}
	if err != nil {
		return nil, err
	}
	for _, batch := range out.Batches {
		for i, row := range p.target.rows {
			for j, col := range p.target.cols {
				if at := i*len(p.target.cols) + j; p.target.orderSign(row, col) {
					batch[at] = -batch[at]
				}
			}
		}
	}
	return &out, nil
}

// refineClifford sets c_D = g <D|s>(conj<0|s> + <s|c⁰>) − (g−1)/d c⁰_D on average,
// outcomes off the vacuum's coset included.
func (p *plan) refineClifford(ctx context.Context, st record.Stream, start []complex128, batches int, total int64, progress func(done, total int64)) ([][]complex128, []float64, error) {
	acc := make([]float64, 2*len(start))
	workers := make([]preparer, p.workers)
	for w := range workers {
		workers[w].plan = p
	}
	var means [][]complex128
	var weights []float64
	shots := 0.0
	stride := 2 * len(p.cols)
	tile := max(1, min(tileNumbers/stride, len(p.rows)/16))
	tiles := (len(p.rows) + tile - 1) / tile
	images := make([][]image, chunkSettings)
	failures := make([]error, chunkSettings)
	ps := &pass{plan: p, batches: batches, total: total, progress: progress}
	ps.consume = func(c *chunk) error {
		share(p.workers, c.n, func(w, i int) {
			images[i], failures[i] = workers[w].image(images[i][:0], &c.list[i], start)
		})
		for i := range c.n {
			if failures[i] != nil {
				return failures[i]
			}
			shots += float64(c.list[i].setting.Count())
		}
		share(p.workers, tiles, func(_, t int) {
			lo, hi := t*tile, min((t+1)*tile, len(p.rows))
			for i := range c.list[:c.n] {
				for _, m := range images[i] {
					c.list[i].addImage(acc, stride, lo, hi, m)
				}
			}
		})
		if c.last {
			mean := make([]complex128, len(start))
			scale := math.Ldexp(p.gain, -p.header.Qubits) / shots
			shift := complex(math.Ldexp(p.gain-1, -p.header.Qubits), 0)
			for i, v := range start {
				mean[i] = complex(scale*acc[2*i], scale*acc[2*i+1]) - shift*v
			}
			means, weights = append(means, mean), append(weights, shots)
			clear(acc)
			shots = 0
		}
		return nil
	}
	if err := ps.run(ctx, st); err != nil {
		return nil, nil, err
	}
	return means, weights, nil
}

// image is <s|(|0> + |c⁰>) of one outcome, up to powers of two, with its
// coset: what multiplies <D|s>.
type image struct {
	sign, syndrome uint64
	rotated        [4]complex128 // value·i^phase
}

// image evaluates the outcomes of a setting on the start vector.
func (w *preparer) image(dst []image, p *prepared, start []complex128) ([]image, error) {
	if err := w.basis.FromSetting(w.header, &p.setting); err != nil {
		return dst, err
	}
	w.basis.Form(&w.form)
	w.strings(p)
	weight := math.Ldexp(1, w.basis.N-w.basis.K)
	stride := len(p.cols)
	for _, o := range p.setting.Shots {
		word := o.Bits
		if w.reverse {
			word = bits.Reverse64(word) >> (64 - w.header.Qubits)
		}
		t, u := w.basis.Decode(word)
		m := image{sign: t, syndrome: w.form.At(u).Syndrome}
		var value complex128
		if u == 0 {
			value = 1
		}
		for i := range p.rows {
			r := &p.rows[i]
			lo, hi := p.bucket(r.syndrome ^ m.syndrome)
			cross := r.cross ^ t
			phase := r.phase + 2*uint32(bits.OnesCount64(t&r.y))
			row := start[i*stride : (i+1)*stride]
			for _, c := range p.cols[lo:hi] {
				ph := phase + c.phase + 2*uint32(bits.OnesCount64(cross&c.y))
				value += snapshot.Power(-ph) * row[c.at/2]
			}
		}
		value *= complex(weight*float64(o.Count), 0)
		m.rotated = [4]complex128{value, value * 1i, -value, -value * 1i}
		dst = append(dst, m)
	}
	return dst, nil
}

// addImage adds <D|s> times the image to the rows from lo to hi.
func (p *prepared) addImage(acc []float64, stride, lo, hi int, m image) {
	for i := lo; i < hi; i++ {
		r := &p.rows[i]
		first, last := p.bucket(r.syndrome ^ m.syndrome)
		cross := r.cross ^ m.sign
		phase := r.phase + 2*uint32(bits.OnesCount64(m.sign&r.y))
		row := acc[i*stride : (i+1)*stride]
		for _, c := range p.cols[first:last] {
			v := m.rotated[(phase+c.phase+2*uint32(bits.OnesCount64(cross&c.y)))&3]
			row[c.at] += real(v)
			row[c.at+1] += imag(v)
		}
	}
}

// refineMatching multiplies the mean snapshot with (1, c⁰) column by column; a
// column is a collapse for the row of its determinant.
func (p *plan) refineMatching(ctx context.Context, st record.Stream, start []complex128, batches int, opt Options) ([][]complex128, []float64, error) {
	if len(start) > maxRefined {
		return nil, nil, fmt.Errorf("sector has %d determinants, at most %d can be refined from a matchgate record", len(start), maxRefined)
	}
	var settings []*record.Setting
	for {
		s := new(record.Setting)
		if err := st.Next(s); err != nil {
			if err != io.EOF {
				return nil, nil, err
			}
			break
		}
		settings = append(settings, s)
	}
	var dets []uint64
	for _, row := range p.target.rows {
		for _, col := range p.target.cols {
			dets = append(dets, row|col)
		}
	}
	var out [][]complex128
	var weights []float64
	for i := -1; i < len(dets); i++ {
		row, factor := uint64(0), complex128(0.5) // average doubles the vacuum row
		if i >= 0 {
			row, factor = dets[i], start[i]
		}
		q, err := newPlan(p.header, p.target, row, &opt)
		if err != nil {
			return nil, nil, err
		}
		q.target.alpha = 0 // all in the record's own order
		stream, err := record.NewMemory(p.header, settings)()
		if err != nil {
			return nil, nil, err
		}
		res, err := q.average(ctx, stream, batches, int64(len(settings)), nil)
		if err != nil {
			return nil, nil, err
		}
		if out == nil {
			out, weights = make([][]complex128, len(res.batches)), res.weights
			for b := range out {
				out[b] = make([]complex128, len(dets))
			}
		}
		for b, batch := range res.batches {
			for d, v := range batch {
				out[b][d] += factor * v
			}
		}
		if opt.Progress != nil {
			opt.Progress(int64(i+2), int64(len(dets)+1))
		}
	}
	return out, weights, nil
}
