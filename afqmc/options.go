package afqmc

import (
	"fmt"
	"math"
)

// Options are the settings of a projection. Zero fields take the defaults named.
type Options struct {
	TimeStep      float64 // τ, 1/hartree; default 0.005
	Walkers       int     // default 400
	Equilibration float64 // imaginary time before sampling; zero: none
	Length        float64 // imaginary time sampled; default 50
	Seed          uint64
	// TargetError ends sampling once one standard error is this small; 0: never.
	TargetError float64
	// Cap bounds E_hyb and E_L to the running energy ± √(2/τ). Automatic: on
	// unless a factor has s = −1, where the cap would bias sign-free problems.
	Cap Cap
	// Single takes fields and their exponential in single precision; with a guide
	// from [trial.NewSingleGuide] the expectations ⟨v_g⟩ are too, and with them
	// force bias and direct energy. Overlaps, weights, one-body and exchange
	// energies and sums stay double.
	Single bool
	// Cores is the number of goroutines that work on tiles; default 1. Results
	// do not depend on it.
	Cores int
}

// Cap says whether local and hybrid energies are bounded.
type Cap int

const (
	CapAutomatic Cap = iota
	CapOn
	CapOff
)

const (
	// MeasureInterval is the imaginary time between energy measurements, to the
	// nearest whole step.
	MeasureInterval = 0.05
	controlInterval = 0.1 // between re-orthogonalisations and population controls
)

func (o Options) withDefaults() Options {
	set := func(v *float64, to float64) {
		if *v == 0 {
			*v = to
		}
	}
	set(&o.TimeStep, 0.005)
	set(&o.Length, 50)
	if o.Walkers == 0 {
		o.Walkers = 400
	}
	if o.Cores < 1 {
		o.Cores = 1
	}
	return o
}

func (o Options) validate() error {
	positive := func(v float64) bool { return v > 0 && !math.IsInf(v, 0) }
	switch {
	case !positive(o.TimeStep):
		return fmt.Errorf("time step is %g, expected a positive number", o.TimeStep)
	case o.Walkers < 2:
		return fmt.Errorf("%d walkers, expected at least 2", o.Walkers)
	case !(o.Equilibration >= 0) || math.IsInf(o.Equilibration, 0):
		return fmt.Errorf("equilibration is %g, expected zero or a positive number", o.Equilibration)
	case !positive(o.Length) || o.Length < o.TimeStep:
		return fmt.Errorf("sampled length is %g, expected at least one time step", o.Length)
	case !(o.TargetError >= 0):
		return fmt.Errorf("target error is %g, expected zero or a positive number", o.TargetError)
	}
	return nil
}

// every returns the number of steps nearest to an interval of imaginary time.
func (o Options) every(interval float64) int {
	return max(1, int(math.Round(interval/o.TimeStep)))
}

// steps returns the numbers of equilibration and sampling steps, each a whole
// number of measurements.
func (o Options) steps() (equilibration, sampling int) {
	m := o.every(MeasureInterval)
	round := func(t float64) int { return m * int(math.Ceil(t/o.TimeStep/float64(m)-1e-9)) }
	return round(o.Equilibration), max(m, round(o.Length))
}
