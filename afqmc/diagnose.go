package afqmc

import (
	"fmt"
	"math"
)

// Level says how much a warning weighs.
type Level string

const (
	Note    Level = "note"    // worth knowing
	Caution Level = "caution" // quote with care
	Stop    Level = "stop"    // do not quote the number
)

// Warning is a doubt about the result, kept beside the number.
type Warning struct {
	Check  string  `json:"check"`
	Level  Level   `json:"level"`
	Text   string  `json:"text"`
	Figure float64 `json:"figure"`
}

// threshold grades a figure: within ok nothing, between ok and warn a note,
// beyond warn a caution, beyond fail the level of a failed check. Where larger
// is better the figures are compared the other way round. The limits were set
// on molecules and lattices with known answers, good trials and deliberately
// broken ones (common practice otherwise).
type threshold struct {
	ok, warn, fail float64
	failed         Level
	larger         bool
}

func (t threshold) grade(figure float64) Level {
	beyond := func(limit float64) bool {
		if t.larger {
			return figure < limit
		}
		return figure > limit
	}
	switch {
	case math.IsNaN(figure):
		return ""
	case beyond(t.fail):
		return t.failed
	case beyond(t.warn):
		return Caution
	case beyond(t.ok):
		return Note
	}
	return ""
}

var (
	limitOverlap    = threshold{ok: 1e-8, warn: 1e-6, fail: 1e-6, failed: Stop}
	limitCapped     = threshold{ok: 3e-4, warn: 1e-3, fail: 1e-2, failed: Stop}
	limitBounded    = threshold{ok: 1e-4, warn: 1e-3, fail: 1e-2, failed: Caution}
	limitKilled     = threshold{ok: 3e-5, warn: 2e-4, fail: 1e-3, failed: Caution}
	limitEfficiency = threshold{ok: 0.97, warn: 0.95, fail: 0.8, failed: Stop, larger: true}
	limitPhase      = threshold{ok: 0.1, warn: 0.5, fail: 2, failed: Caution}
	limitHill       = threshold{ok: 3, warn: 2.5, fail: 2.1, failed: Stop, larger: true}
	limitRatio      = threshold{ok: 2.2, warn: 2.5, fail: 4, failed: Caution}
	limitSpin       = threshold{ok: 0.01, warn: 0.01, fail: 0.1, failed: Stop}
	limitDrift      = threshold{ok: 2, warn: 2, fail: 3, failed: Caution}
)

const (
	// tailEnough is the number of samples in the tail from which its exponent may
	// condemn a result; with fewer it can only raise a caution.
	tailEnough = 100
	// noSpread is the spread of local energies, hartree, below which the trial is
	// exact to rounding and tails mean nothing.
	noSpread = 1e-7
)

// diagnose grades the figures of a result.
func diagnose(w *Walk, r *Result) []Warning {
	var out []Warning
	add := func(check string, level Level, figure float64, format string, args ...any) {
		if level != "" {
			out = append(out, Warning{check, level, fmt.Sprintf(format, args...), figure})
		}
	}
	f := r.Figures
	add("stored_overlap", limitOverlap.grade(f.OverlapDeviation), f.OverlapDeviation,
		"stored and recomputed overlaps differ by up to %.1e", f.OverlapDeviation)
	add("capped_steps", limitCapped.grade(f.Capped), f.Capped,
		"%.2g of the walker-steps had their energy bounded: the bound, not the physics, sets part of the result; try a smaller time step or a better trial", f.Capped)
	add("force_bias", limitBounded.grade(f.Bounded), f.Bounded,
		"%.2g of the walker-steps had a force-bias component bounded; try a smaller time step or a better trial", f.Bounded)
	add("killed_walkers", limitKilled.grade(f.Killed), f.Killed,
		"%.2g of the walker-steps ended at the constraint; try a smaller time step or a better trial", f.Killed)
	add("effective_walkers", limitEfficiency.grade(f.Efficiency), f.Efficiency,
		"weights spread so that only %.2g of the walkers count", f.Efficiency)
	add("phase_diffusion", limitPhase.grade(f.PhaseDiffusion), f.PhaseDiffusion,
		"phases turn by %.2g per unit of imaginary time: the constraint's bias may be large", f.PhaseDiffusion)
	if f.Local.Deviation > noSpread {
		level := limitHill.grade(f.Local.Hill)
		if level == Stop && f.TailSamples < tailEnough {
			level = Caution
		}
		add("energy_tail", level, f.Local.Hill,
			"local energies have a heavy tail (exponent %.2g): the error bar is soft above 2 and meaningless below; a better trial is needed", f.Local.Hill)
		add("energy_spread", limitRatio.grade(f.Local.Ratio), f.Local.Ratio,
			"local energies spread %.2g times wider than their core: heavy tail, a longer run than the error suggests is needed", f.Local.Ratio)
		// The largest of n samples with tail exponent α grows like n^(1/α); α = 2.5
		// is where the tail itself is cautioned.
		limit := max(100, math.Pow(float64(f.Local.Samples), 1/limitHill.warn))
		add("largest_energy", threshold{ok: limit, warn: limit, fail: limit, failed: Caution}.grade(f.Local.Largest), f.Local.Largest,
			"one local energy lies %.3g standard deviations away: the trial may have nodes where the state has none", f.Local.Largest)
	}
	e := r.Energy
	fluctuates := f.Local.Deviation > noSpread || math.IsNaN(f.Local.Deviation)
	if fluctuates && e.Blocked > 0 && e.Correlated > 0 {
		ratio := e.Blocked / e.Correlated
		switch {
		case ratio < 0.6 || ratio > 1.6:
			add("error_methods", Caution, ratio, "the errors from blocking and from autocorrelation differ by a factor %.2g; the larger is quoted, a longer run would settle it", ratio)
		case ratio < 0.8 || ratio > 1.25:
			add("error_methods", Note, ratio, "the errors from blocking and from autocorrelation differ by a factor %.2g; the larger is quoted", ratio)
		}
	}
	if fluctuates && e.TooShort() {
		independent := float64(e.Rows) / (2 * e.Autocorrelation)
		add("run_length", Caution, independent, "too short for its error bar: about %.0f independent samples, at least 20 and a settled block length are needed; lengthen the run", independent)
	}
	if !fluctuates {
		f.Drift = 0
	}
	add("drift", limitDrift.grade(f.Drift), f.Drift,
		"the two halves of the run differ by %.2g standard deviations; longer equilibration may be needed", f.Drift)
	if r.Discarded > 0 {
		add("equilibration", Note, r.Discarded, "the first %.3g of sampled imaginary time still drifted and were left out", r.Discarded)
	}
	if !math.IsNaN(r.TrialEnergy) && e.Mean > r.TrialEnergy+3*e.Error+noSpread {
		add("variational_bracket", Caution, e.Mean-r.TrialEnergy, "the energy lies %.3g above the trial's own energy, which projection should lower", e.Mean-r.TrialEnergy)
	}
	sz := 0.5 * math.Abs(float64(w.Guide.Hamiltonian.Up-w.Guide.Hamiltonian.Down))
	contamination := math.Abs(w.startSpinSquared - sz*(sz+1))
	add("start_spin", limitSpin.grade(contamination), contamination,
		"the walkers start with <S^2> = %.3f, not the pure spin %.3g: the projection keeps other spins for long", w.startSpinSquared, sz*(sz+1))
	return out
}
