package afqmc

import (
	"math"

	"leadline/afqmc/statistics"
)

// Status says how a run ended.
type Status string

const (
	StatusComplete    Status = "complete"
	StatusTarget      Status = "target_reached"
	StatusInterrupted Status = "interrupted"
)

// Result is what a run gives: an energy with its error and, beside it, what
// makes it doubtful.
type Result struct {
	Status Status
	// Sampled is false where the run ended before any row was sampled: then
	// there is no energy.
	Sampled bool
	// Energy is the mixed estimate Σ W Re E_L / Σ W with its statistical error;
	// time step, population size and the constraint's bias are not in it.
	Energy statistics.Estimate
	// Autocorrelation is τ = ½ + Σρ in imaginary time.
	Autocorrelation float64
	// Time is the imaginary time whose rows were used, Discarded what the
	// equilibration check left out beyond the job's equilibration.
	Time, Discarded float64
	// TrialEnergy is ⟨Ψ_T|H|Ψ_T⟩/⟨Ψ_T|Ψ_T⟩ and TrialSpinSquared its ⟨S²⟩; NaN
	// where the trial cannot give them.
	TrialEnergy, TrialSpinSquared float64
	Figures                       Figures
	Warnings                      []Warning
}

// Figures are the numbers behind the diagnostics.
type Figures struct {
	OverlapDeviation float64 // largest |O_stored/O − 1|
	Capped           float64 // fraction of walker-steps with bounded hybrid energy
	Bounded          float64 // fraction with a bounded force-bias component
	Killed           float64 // fraction killed by the constraint
	Efficiency       float64 // mean effective fraction of walkers at population control
	PhaseDiffusion   float64 // ⟨(arg R)²⟩/τ
	Local            statistics.Spread
	TailSamples      int     // local energies in the tail that the Hill exponent is from
	Drift            float64 // |E_2nd half − E_1st half| / (2 error)
	Imaginary        float64 // Σ W Im E_L / Σ W
	Growth           float64 // mean growth energy
}

// samples keeps the rows after equilibration and a bounded selection of local
// energies.
type samples struct {
	numerator, weight, growth, imaginary []float64
	local                                []float64
	stride, offset                       int
}

const mostLocal = 2_000_000 // local energies kept for the tail diagnostics

func newSamples(walkers, rows int) *samples {
	s := &samples{stride: 1 + walkers*rows/mostLocal}
	rows = min(rows, 1<<20)
	for _, column := range []*[]float64{&s.numerator, &s.weight, &s.growth, &s.imaginary} {
		*column = make([]float64, 0, rows)
	}
	s.local = make([]float64, 0, walkers*rows/s.stride+1)
	return s
}

func (s *samples) add(r Row, w *Walk) {
	s.numerator = append(s.numerator, r.Numerator)
	s.weight = append(s.weight, r.Weight)
	s.growth = append(s.growth, r.Growth)
	s.imaginary = append(s.imaginary, r.Imaginary)
	for i := s.offset; i < len(w.energy); i += s.stride {
		if w.State.Weight[i] > 0 {
			s.local = append(s.local, real(w.energy[i]))
		}
	}
	s.offset = (s.offset + 7) % s.stride
}

// reached reports whether the error is already within the target, looked at
// every targetEvery rows and only on series long enough for their error.
func (s *samples) reached(target float64) bool {
	if n := len(s.weight); n == 0 || n%targetEvery != 0 {
		return false
	}
	e := statistics.Ratio(s.numerator, s.weight)
	return !e.TooShort() && e.Error <= target
}

const targetEvery = 20

// trim returns how many rows at the start are still drifting: what the
// truncation rule proposes, if it differs from the rest by more than four
// combined standard errors (the rule picks the worst of many places).
func (s *samples) trim() int {
	n := len(s.weight)
	energies := make([]float64, n)
	for i := range energies {
		energies[i] = s.numerator[i] / s.weight[i]
	}
	d := statistics.Truncation(energies)
	if d == 0 {
		return 0
	}
	head := statistics.Ratio(s.numerator[:d], s.weight[:d])
	tail := statistics.Ratio(s.numerator[d:], s.weight[d:])
	// The head's error is taken from the tail's fluctuations: its own drift
	// would widen it.
	spread := tail.Error * math.Sqrt(1+float64(n-d)/float64(d))
	if math.Abs(head.Mean-tail.Mean) > 4*spread {
		return d
	}
	return 0
}

// analyse turns the samples into a result.
func (w *Walk) analyse(s *samples, status Status) *Result {
	interval := w.Options.TimeStep * float64(w.Options.every(MeasureInterval))
	r := &Result{Status: status, TrialEnergy: math.NaN(), TrialSpinSquared: math.NaN()}
	if e, ok := w.Guide.Expectations(); ok {
		r.TrialEnergy, r.TrialSpinSquared = e.Energy(w.Guide.Hamiltonian), e.SpinSquared()
	}
	r.Sampled = len(s.weight) > 0
	if !r.Sampled {
		r.Energy = statistics.Mean(nil)
		return r
	}
	cut := s.trim()
	num, den := s.numerator[cut:], s.weight[cut:]
	r.Energy = statistics.Ratio(num, den)
	r.Autocorrelation = r.Energy.Autocorrelation * interval
	r.Time, r.Discarded = float64(len(num))*interval, float64(cut)*interval

	total := w.State.Total
	total.add(w.State.Interval)
	steps := math.Max(1, float64(total.Steps))
	r.Figures = Figures{
		OverlapDeviation: w.State.Checks.OverlapDeviation,
		Capped:           float64(total.Capped) / steps,
		Bounded:          float64(total.Bounded) / steps,
		Killed:           float64(total.Killed) / steps,
		Efficiency:       total.Efficiency / math.Max(1, float64(total.Controls)),
		PhaseDiffusion:   total.Phase / steps / w.Options.TimeStep,
		Imaginary:        statistics.Mean(s.imaginary[cut:]).Mean,
		Growth:           statistics.Mean(s.growth[cut:]).Mean,
	}
	if half := len(num) / 2; half > 0 {
		first, second := statistics.Ratio(num[:half], den[:half]), statistics.Ratio(num[half:], den[half:])
		if r.Energy.Error > 0 {
			r.Figures.Drift = math.Abs(second.Mean-first.Mean) / (2 * r.Energy.Error)
		}
	}
	r.Figures.Local = statistics.Describe(s.local)
	r.Figures.TailSamples = int(statistics.TailFraction * float64(len(s.local)))
	r.Warnings = diagnose(w, r)
	return r
}
