package afqmc

import "math"

// Control resamples the walkers in proportion to their weights by a comb with
// one uniform offset (systematic resampling: the unbiased choice of smallest
// variance) and sets all weights to 1; the mean weight taken out is kept in
// LogGrowth. E_T follows the running energy. No living walker is an error.
func (w *Walk) Control() error {
	s := w.State
	n := len(s.Weight)
	sum, square := s.totalWeight()
	if math.IsInf(square, 0) || math.IsNaN(sum) {
		return errOverflow
	}
	if sum == 0 {
		return errExtinct
	}
	s.Interval.Efficiency += sum * sum / (float64(n) * square)
	s.Interval.Controls++
	s.LogGrowth += math.Log(sum / float64(n))

	w.stream.key(w.Options.Seed, uint64(s.Step), controlStream)
	offset := w.stream.rand.Float64()
	spacing := sum / float64(n)
	copies := w.copies
	clear(copies)
	cumulative, tooth := 0.0, 0
	last := 0
	for i, weight := range s.Weight {
		if weight > 0 {
			last = i
		}
		cumulative += weight
		for tooth < n && (float64(tooth)+offset)*spacing < cumulative {
			copies[i]++
			tooth++
		}
	}
	copies[last] += n - tooth // rounding of the last tooth
	free := 0
	for i := range copies {
		for copies[i] > 1 {
			for copies[free] != 0 {
				free++
			}
			w.copyWalker(free, i)
			copies[free] = 1
			copies[i]--
		}
	}
	for i := range s.Weight {
		s.Weight[i] = 1
	}
	s.TrialEnergy = s.ReferenceEnergy
	return nil
}

// copyWalker overwrites walker to by walker from, with all that belongs to it.
func (w *Walk) copyWalker(to, from int) {
	s, ng := w.State, len(w.Propagator.Shift)
	copy(w.walkers.Walker(to), w.walkers.Walker(from))
	s.Overlap[to] = s.Overlap[from]
	copy(s.Fields[2*to*ng:2*(to+1)*ng], s.Fields[2*from*ng:2*(from+1)*ng])
}

// checkOverlaps compares stored overlaps with recomputed ones.
func (w *Walk) checkOverlaps() {
	w.crew.run(len(w.tiles), func(ws *workspace, t int) {
		from, to := w.tiles[t][0], w.tiles[t][1]
		ws.mixed.Overlap = ws.old
		w.Guide.Overlaps(ws.mixed, w.walkers.Slice(from, to))
		for i := from; i < to; i++ {
			w.deviation[i] = deviation(w.State.Overlap[i], ws.old[i-from])
		}
	})
	for _, d := range w.deviation {
		if w.State.Checks.OverlapDeviation < d || math.IsNaN(d) {
			w.State.Checks.OverlapDeviation = d
		}
	}
}
