package afqmc

import (
	"math"

	"leadline/trial"
)

// State is everything that a projection carries from step to step: one value,
// all fields exported, so that it can be written and read back.
type State struct {
	// Step counts the steps done.
	Step int
	// Columns holds the walkers' columns; see [trial.Walkers].
	Columns []float64
	// Weight holds W, one per walker; their mean is 1 after population control.
	Weight []float64
	// Overlap holds ⟨Ψ_T|φ⟩, one per walker.
	Overlap []trial.Overlap
	// Fields holds ⟨v_g⟩: 2·ng numbers per walker, real parts then imaginary parts.
	Fields []float64
	// TrialEnergy is E_T.
	TrialEnergy float64
	// ReferenceEnergy is the running mixed energy that the cap is centred on and
	// that E_T follows.
	ReferenceEnergy float64
	// LogGrowth is the logarithm of all factors taken out of the weights by
	// population control.
	LogGrowth float64
	// GrowthReference is LogGrowth + ln(mean weight) at the last measurement.
	GrowthReference float64
	// GrowthTime is the integral of E_T over imaginary time since then.
	GrowthTime float64
	// Counters since the last measurement and over the run.
	Interval, Total Counters
	// Checks are extremes over the run.
	Checks Checks
}

// Counters count events of walker-steps.
type Counters struct {
	Steps   int64   // walker-steps of living walkers
	Capped  int64   // hybrid energy out of bounds
	Bounded int64   // some force-bias component bounded
	Killed  int64   // cos arg R ≤ 0
	Phase   float64 // Σ (arg R)²
	// Efficiency sums (ΣW)²/(n ΣW²) over population controls.
	Efficiency float64
	Controls   int64
}

func (c *Counters) add(d Counters) {
	c.Steps += d.Steps
	c.Capped += d.Capped
	c.Bounded += d.Bounded
	c.Killed += d.Killed
	c.Phase += d.Phase
	c.Efficiency += d.Efficiency
	c.Controls += d.Controls
}

// Checks are extremes over the run.
type Checks struct {
	// OverlapDeviation is the largest |O_stored/O − 1| met after
	// re-orthogonalisation and population control.
	OverlapDeviation float64
}

// totalWeight returns ΣW and ΣW².
func (s *State) totalWeight() (sum, square float64) {
	for _, w := range s.Weight {
		sum += w
		square += w * w
	}
	return sum, square
}

// logNorm returns the logarithm of the norm of the projected state so far.
func (s *State) logNorm() float64 {
	sum, _ := s.totalWeight()
	return s.LogGrowth + math.Log(sum/float64(len(s.Weight)))
}
