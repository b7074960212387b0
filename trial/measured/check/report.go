// Package check judges a record before anyone spends computer time on it:
// figures of merit of the collapsed amplitudes beside what theory expects of a
// noiseless device, whether the bits are read in the right order, and whether
// the record belongs to the Hamiltonian at hand.
package check

import (
	"context"
	"fmt"
	"math"

	"leadline/trial/measured/amplitude"
	"leadline/trial/measured/collapse"
	"leadline/trial/measured/record"
)

// Report holds the figures of merit of a record.
type Report struct {
	Ensemble record.Ensemble `json:"ensemble"`
	Qubits   int             `json:"qubits"`
	// Row is "vacuum", or the occupied modes of the reference determinant.
	Row      any   `json:"row"`
	Settings int64 `json:"settings"`
	Shots    int64 `json:"shots"`
	// Determinants is the dimension of the sector.
	Determinants int `json:"determinants"`
	// Kappa is the norm of the amplitudes without noise, sqrt(max(0, κ²)): 1
	// for a perfect device, the damping of a noisy one. In the reference row κ²
	// is Σ|c_D|²/c_r, since both carry |Ψ_r|².
	Kappa      float64 `json:"kappa"`
	KappaError float64 `json:"kappa_error"`
	// EffectiveShots is S κ².
	EffectiveShots float64 `json:"effective_shots"`
	// Variance per complex amplitude and shot, from the batches, and what
	// single shots of a noiseless device give, with its own sampling error
	// (zero where there is a formula). Several shots of one setting add to it.
	Variance              float64 `json:"variance"`
	VarianceExpected      float64 `json:"variance_expected"`
	VarianceExpectedError float64 `json:"variance_expected_error"`
	// Infidelity x/(1+x), x = noise/norm², of the amplitudes as they are; every
	// projection lowers it.
	Infidelity float64 `json:"infidelity"`
	// Rejected lists shots that contribute nothing, by cause.
	Rejected []Rejected `json:"rejected"`
	// Readings tells κ for other readings of the file, if the one of the header
	// fails.
	Readings []Reading `json:"readings,omitempty"`
	// TopOverlap is the overlap of the amplitudes with those that the header
	// declares, both normalised on the declared determinants' share: 1 if they
	// agree. nil without any.
	TopOverlap *Estimate `json:"top_overlap,omitempty"`
	// Energy is that of the measured state, noise removed, hartree; set by
	// CompareEnergy.
	Energy         *Estimate `json:"energy,omitempty"`
	DeclaredEnergy *float64  `json:"declared_energy,omitempty"`
	Warnings       []Warning `json:"warnings"`
	Valid          bool      `json:"valid"`
}

// Rejected is a fraction of the shots and what a noiseless device would give.
type Rejected struct {
	Cause    string  `json:"cause"`
	Fraction float64 `json:"fraction"`
	Error    float64 `json:"error"`
	Expected float64 `json:"expected"`
}

// Reading is κ under another reading of the file.
type Reading struct {
	Name       string  `json:"name"`
	Kappa      float64 `json:"kappa"`
	KappaError float64 `json:"kappa_error"`
}

// Estimate is a number with one standard error.
type Estimate struct {
	Value float64 `json:"value"`
	Error float64 `json:"error"`
}

// Warning is a doubt about the record. Levels are note, caution and stop.
type Warning struct {
	Check  string  `json:"check"`
	Level  string  `json:"level"`
	Text   string  `json:"text"`
	Figure float64 `json:"figure"`
}

// Thresholds of the warnings.
const (
	fewSettings    = 100  // error bars come from the spread between settings
	noisyTrial     = 0.3  // noise over norm²: the trial is mostly noise
	wrongReading   = 0.5  // κ² below this by two errors asks for other readings
	manyDeviations = 4.0  // standard errors that chance does not explain
	oddParity      = 0.02 // device errors that shrink the record visibly
)

// Run reads and collapses the record of the sector and fills in all figures
// that need no Hamiltonian. A record that fails the norm test is collapsed once
// more for every other reading.
func Run(ctx context.Context, source record.Source, opt collapse.Options) (*Report, *amplitude.Estimate, error) {
	st, err := source()
	if err != nil {
		return nil, nil, err
	}
	h := *st.Header()
	e, err := collapse.Run(ctx, source, opt)
	if err != nil {
		return nil, nil, err
	}
	if len(e.Batches) < 3 {
		return nil, nil, fmt.Errorf("record has %d settings, expected at least 3 for error bars", e.Provenance.Settings)
	}
	r := &Report{Ensemble: h.Ensemble, Qubits: h.Qubits, Row: "vacuum", Settings: e.Provenance.Settings, Shots: e.Provenance.Shots,
		Determinants: e.Size(), Valid: true, Warnings: []Warning{}}
	if h.Occupied != nil {
		r.Row = map[string][]int{"occupied": h.Occupied}
	}
	norm := e.NewForm(nil)
	noise := e.Noise()
	kappa := kappaSquared(e, norm)
	r.Kappa, r.KappaError = root(kappa)
	r.EffectiveShots = float64(r.Shots) * r.Kappa * r.Kappa
	r.Variance = noise * float64(r.Shots) / float64(r.Determinants)
	signal := norm.Unbiased()
	r.Infidelity = 1
	if signal > 0 {
		r.Infidelity = noise / (noise + signal)
	}
	r.variance(&h, e)
	r.rejections(&h, e)
	r.declared(&h, e)
	r.warn(&h, noise, signal, kappa)
	if kappa.Value+2*kappa.Error < wrongReading {
		if err := r.readings(ctx, source, &h, opt, kappa); err != nil {
			return nil, nil, err
		}
	}
	return r, e, nil
}

// kappaSquared is the unbiased norm², in the reference row over |Ψ_r|².
func kappaSquared(e *amplitude.Estimate, norm *amplitude.Form) amplitude.Figure {
	reference := func(without int) float64 { return 1 }
	if e.Reference != nil {
		at := e.Up.Index(e.Reference[0])*e.Down.Len() + e.Down.Index(e.Reference[1])
		reference = func(without int) float64 {
			sum, all := 0.0, 0.0
			for b, batch := range e.Batches {
				if b != without {
					sum += e.Weights[b] * real(batch[at])
					all += e.Weights[b]
				}
			}
			return sum / all
		}
	}
	return amplitude.Jackknife(len(e.Batches), func(b int) float64 { return norm.Without(b) / reference(b) })
}

// root turns κ² into κ. Near zero the error of κ is that of a root: sqrt(δ).
func root(k amplitude.Figure) (value, err float64) {
	value = math.Sqrt(max(0, k.Value))
	return value, k.Error / math.Max(2*value, math.Sqrt(k.Error))
}

func (r *Report) warning(check, level string, figure float64, format string, args ...any) {
	r.Warnings = append(r.Warnings, Warning{check, level, fmt.Sprintf(format, args...), figure})
}

func (r *Report) warn(h *record.Header, noise, signal float64, kappa amplitude.Figure) {
	if r.Settings < fewSettings {
		r.warning("settings", "caution", float64(r.Settings), "%d settings: error bars need at least %d", r.Settings, fewSettings)
	}
	if x := noise / signal; !(x >= 0 && x <= noisyTrial) {
		r.warning("noise", "caution", x, "shot noise is %.2g of the norm of the amplitudes before projections, more than %g", x, noisyTrial)
	}
	if excess := (kappa.Value - 1) / kappa.Error; excess > manyDeviations {
		r.warning("norm", "caution", r.Kappa, "norm %.3f(%.3f) is above 1 by %.1f standard errors: not explained by noise", r.Kappa, r.KappaError, excess)
	}
	for _, f := range r.Rejected {
		switch {
		case f.Cause == causeParity && f.Fraction > oddParity:
			r.warning("parity", "note", f.Fraction, "%.1f %% of the shots have the wrong parity: device errors", 100*f.Fraction)
		case f.Cause == causeCoset && math.Abs(f.Fraction-f.Expected) > manyDeviations*f.Error:
			r.warning("coset", "note", f.Fraction, "%.1f %% of the shots miss the row's determinant, %.1f %% expected of a noiseless device", 100*f.Fraction, 100*f.Expected)
		}
	}
	if h.Twirl != record.TwirlFull {
		r.warning("twirl", "note", 0, "twirl is %q: device noise is one common factor only with the full twirl", h.Twirl)
	}
}

// CompareFingerprint compares the file that fixes the orbitals with the one the
// record names. It reports whether the record may be used without an override.
func (r *Report) CompareFingerprint(h *record.Header, fingerprint string) bool {
	switch {
	case h.HamiltonianSHA256 == record.UnknownHash:
		r.warning("orbitals", "caution", 0, "record does not say which orbitals it was measured in")
		return false
	case h.HamiltonianSHA256 != fingerprint:
		r.warning("orbitals", "stop", 0, "record was measured in the orbitals of %.12s…, the job's file is %.12s…", h.HamiltonianSHA256, fingerprint)
		return false
	}
	return true
}
