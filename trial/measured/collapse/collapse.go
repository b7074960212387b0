package collapse

import (
	"context"
	"fmt"
	"math"
	"sync"

	"leadline/hamiltonian/strings"
	"leadline/trial/measured/amplitude"
	"leadline/trial/measured/calibrate"
	"leadline/trial/measured/matchgate"
	"leadline/trial/measured/record"
)

// Run estimates the amplitudes of the record's sector. Only the sector is
// imposed: projections are up to the caller (package amplitude). It reads the
// record once; with a calibration, once more for each of its n+1 numbers to
// carry their errors along (not for Clifford ensembles, which have one).
func Run(ctx context.Context, source record.Source, opt Options) (*amplitude.Estimate, error) {
	st, err := source()
	if err != nil {
		return nil, err
	}
	h := *st.Header()
	if opt.Reading.Order != "" {
		h.Order = opt.Reading.Order
		// The reference of the record counts in the order it was written in.
		if err := h.Validate(); err != nil {
			return nil, err
		}
	}
	batches := opt.Batches
	if batches == 0 {
		batches = defaultBatches
	}
	total, err := record.Total(st)
	if err != nil {
		return nil, err
	}
	if total == 0 {
		return nil, fmt.Errorf("record has no settings")
	}
	batches = min(batches, int(total))
	dim := Dimension(&h)
	limit := opt.MemoryLimit
	if limit == 0 {
		limit = defaultMemoryLimit
	}
	if need := 16 * dim * float64(batches+4); need > limit {
		return nil, fmt.Errorf("sector of %d and %d electrons in %d orbitals has %.3g determinants: %d batches take %.1f GiB, expected at most %.1f GiB",
			h.Up, h.Down, h.Modes()/2, dim, batches, need/(1<<30), limit/(1<<30))
	}
	m := h.Modes() / 2
	e := &amplitude.Estimate{Up: strings.New(m, h.Up), Down: strings.New(m, h.Down)}
	if h.Occupied != nil {
		up, down := h.Reference()
		e.Reference = &[2]uint64{up, down}
	}
	p, err := newPlan(&h, sectorTarget(&h, e.Up, e.Down), h.ReferenceMask(), &opt)
	if err != nil {
		return nil, err
	}
	res, err := p.average(ctx, st, batches, total, opt.Progress)
	if err != nil {
		return nil, err
	}
	e.Batches, e.Weights = res.batches, res.weights
	row := "vacuum"
	if h.Occupied != nil {
		row = "reference"
	}
	e.Provenance = amplitude.Provenance{Ensemble: string(h.Ensemble), Row: row, Trial: h.Trial, HamiltonianSHA256: h.HamiltonianSHA256,
		OrbitalsSHA256: h.OrbitalsSHA256, Digest: res.digest, Settings: res.settings, Shots: res.shots, Rejected: res.rejected}
	if opt.Calibration != nil {
		e.Provenance.Calibration = opt.Calibration.Digest
		if err := p.carryCalibration(ctx, source, e, opt.Calibration); err != nil {
			return nil, err
		}
	}
	return e, nil
}

// Masks estimates the amplitudes of a list of determinants, masks of modes in
// the record's own order, from all settings together: for checks. Amplitudes
// are in the record's own order too.
func Masks(ctx context.Context, source record.Source, masks []uint64, opt Options) ([]complex128, error) {
	st, err := source()
	if err != nil {
		return nil, err
	}
	h := st.Header()
	t, err := maskTarget(h, masks)
	if err != nil {
		return nil, err
	}
	p, err := newPlan(h, t, h.ReferenceMask(), &opt)
	if err != nil {
		return nil, err
	}
	total, err := record.Total(st)
	if err != nil {
		return nil, err
	}
	if total < 1 {
		return nil, fmt.Errorf("record has no settings")
	}
	res, err := p.average(ctx, st, 1, total, opt.Progress)
	if err != nil {
		return nil, err
	}
	return res.batches[0], nil
}

// averaged is the outcome of one pass over a record.
type averaged struct {
	batches                   [][]complex128
	weights                   []float64
	settings, shots, rejected int64
	digest                    string
}

// average takes the means of all batches.
func (p *plan) average(ctx context.Context, st record.Stream, batches int, total int64, progress func(done, total int64)) (*averaged, error) {
	res := &averaged{}
	acc := make([]float64, 2*p.target.size())
	var batchShots int64
	add := p.accumulateChunk(acc)
	if p.header.Ensemble == record.Orthogonal {
		add = p.accumulateOrthogonal(acc)
	}
	ps := &pass{plan: p, batches: batches, total: total, progress: progress}
	ps.consume = func(c *chunk) error {
		if err := add(c); err != nil {
			return err
		}
		for i := range c.list[:c.n] {
			batchShots += c.list[i].shots
			res.rejected += c.list[i].rejected
		}
		if c.last {
			mean := make([]complex128, p.target.size())
			p.finish(mean, acc, float64(batchShots))
			res.batches = append(res.batches, mean)
			res.weights = append(res.weights, float64(batchShots))
			clear(acc)
			batchShots = 0
		}
		return nil
	}
	if err := ps.run(ctx, st); err != nil {
		return nil, err
	}
	res.settings, res.shots, res.digest = ps.settings, ps.shots, ps.digest
	return res, nil
}

// accumulateChunk prepares the settings of a chunk, then adds them to the
// accumulator, tile by tile.
func (p *plan) accumulateChunk(acc []float64) func(*chunk) error {
	workers := make([]preparer, p.workers)
	for w := range workers {
		workers[w].plan = p
	}
	stride := 2 * len(p.cols)
	// Small tiles for the cache, but enough of them to share out.
	tile := max(1, min(tileNumbers/stride, len(p.rows)/16))
	tiles := (len(p.rows) + tile - 1) / tile
	var mu sync.Mutex
	return func(c *chunk) error {
		var failed error
		share(p.workers, c.n, func(w, i int) {
			if err := workers[w].prepare(&c.list[i]); err != nil {
				mu.Lock()
				failed = err
				mu.Unlock()
			}
		})
		if failed != nil {
			return failed
		}
		share(p.workers, tiles, func(_, t int) {
			lo, hi := t*tile, min((t+1)*tile, len(p.rows))
			for i := range c.list[:c.n] {
				if s := &c.list[i]; len(s.terms) > 0 {
					s.accumulate(acc, stride, lo, hi)
				}
			}
		})
		return nil
	}
}

// carryCalibration adds the error of the calibration to the batches: batch b
// gets the change of all amplitudes, to first order, under the pseudo-value of
// the inverse channel for calibration batch b. It is common to all amplitudes
// and shows in everything computed from them.
func (p *plan) carryCalibration(ctx context.Context, source record.Source, e *amplitude.Estimate, c *calibrate.Channel) error {
	n := len(e.Batches)
	if len(c.Replicas) < n {
		return fmt.Errorf("calibration has %d batches, expected the record's %d", len(c.Replicas), n)
	}
	m := len(c.Replicas)
	full := matchgate.Inverse(c.Kept)
	// shift[b][k]: pseudo-values of batch b, centred; batches of the
	// calibration beyond the record's join in turn.
	shift := make([][]float64, n)
	mean := make([]float64, len(full))
	for b := range n {
		shift[b] = make([]float64, len(full))
	}
	for b := range m {
		g := matchgate.Inverse(c.Replicas[b])
		for k := range full {
			shift[b*n/m][k] += float64(m-1) * (full[k] - g[k]) * float64(n) / float64(m)
		}
	}
	for b := range n {
		for k, v := range shift[b] {
			mean[k] += v / float64(n)
		}
	}
	for k := range full {
		moves := false
		for b := range n {
			shift[b][k] -= mean[k]
			moves = moves || math.Abs(shift[b][k]) > 1e-12*full[k]
		}
		if !moves {
			continue // degree 0 of a matchgate channel is exact
		}
		derivative, err := p.derivative(ctx, source, e, k)
		if err != nil {
			return err
		}
		for b, batch := range e.Batches {
			f := complex(shift[b][k], 0)
			for i, v := range derivative {
				batch[i] += f * v
			}
		}
	}
	return nil
}

// derivative returns the change of the mean amplitudes with number k of the
// inverse channel, in which they are linear.
func (p *plan) derivative(ctx context.Context, source record.Source, e *amplitude.Estimate, k int) ([]complex128, error) {
	if p.header.Ensemble.Clifford() {
		// c_D = g·x_D − δ_{Dr}(g−1)/d
		d := e.Mean()
		for i := range d {
			d[i] /= complex(p.gain, 0)
		}
		if p.row != 0 {
			nc := len(p.target.cols)
			for i, row := range p.target.rows {
				for j, col := range p.target.cols {
					if row|col == p.row {
						d[i*nc+j] -= complex(math.Ldexp(1/p.gain, -p.header.Qubits), 0)
					}
				}
			}
		}
		return d, nil
	}
	one := *p
	unit := make([]float64, len(p.inverse))
	unit[k] = 1
	one.setChannel(unit)
	st, err := source()
	if err != nil {
		return nil, err
	}
	total, _ := st.Declared()
	res, err := one.average(ctx, st, 1, total, nil)
	if err != nil {
		return nil, err
	}
	return res.batches[0], nil
}
