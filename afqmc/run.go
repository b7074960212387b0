package afqmc

import (
	"context"
	"errors"
	"math"

	"leadline/trial"
)

var (
	errExtinct  = errors.New("no walker is left alive: the constraint killed all of them; check the trial and the time step")
	errOverflow = errors.New("the weights overflowed: check the trial and the time step")
)

// Row is one energy measurement.
type Row struct {
	Time      float64 // imaginary time since the start
	Weight    float64 // ΣW
	Numerator float64 // ΣW Re E_L
	Energy    float64 // Numerator/Weight
	Growth    float64 // growth energy since the last row
	Effective float64 // (ΣW)²/ΣW²
	Capped    int64   // walker-steps with bounded hybrid energy since the last row, and bounded local energies
	Killed    int64   // walkers killed since the last row
	Imaginary float64 // ΣW Im E_L / Weight
	Sampled   bool    // false while equilibrating: the row is not used
}

// Recorder receives every row as it is measured; an error ends the run.
type Recorder interface {
	Record(Row) error
}

// Run projects the start determinant under the guide's constraint until the
// sampled length, the target error or the end of ctx is reached. When ctx ends
// the rows so far are analysed and the status says so. rec may be nil.
func Run(ctx context.Context, g *trial.Guide, start trial.Orbitals, o Options, rec Recorder) (*Result, error) {
	w, err := NewWalk(g, start, o)
	if err != nil {
		return nil, err
	}
	defer w.Close()
	return w.Run(ctx, rec)
}

// Run continues the walk from its state.
func (w *Walk) Run(ctx context.Context, rec Recorder) (*Result, error) {
	o := w.Options
	measureEvery, controlEvery := o.every(MeasureInterval), o.every(controlInterval)
	equilibration, sampling := o.steps()
	samples := newSamples(o.Walkers, sampling/measureEvery)
	status := StatusComplete
	for w.State.Step < equilibration+sampling {
		if ctx.Err() != nil {
			status = StatusInterrupted
			break
		}
		next := w.State.Step + 1
		measure, control := next%measureEvery == 0, next%controlEvery == 0
		if err := w.Step(control, measure); err != nil {
			return nil, err
		}
		if measure {
			row, err := w.measure()
			if err != nil {
				return nil, err
			}
			if next == equilibration {
				w.State.Total = Counters{} // diagnostics are about the sampled part
			}
			row.Sampled = next > equilibration
			if row.Sampled {
				samples.add(row, w)
				if o, ok := rec.(Observer); ok {
					o.Observe(w)
				}
			}
			if rec != nil {
				if err := rec.Record(row); err != nil {
					return nil, err
				}
			}
		}
		if control {
			if err := w.Control(); err != nil {
				return nil, err
			}
			if next%(checkEvery*controlEvery) == 0 {
				w.checkOverlaps()
			}
		}
		if measure && o.TargetError > 0 && samples.reached(o.TargetError) {
			status = StatusTarget
			break
		}
	}
	return w.analyse(samples, status), nil
}

// checkEvery is the number of population controls between two comparisons of
// all stored overlaps with recomputed ones.
const checkEvery = 10

// measure sums the local energies of the last step into a row, in walker order,
// and moves the reference energy.
func (w *Walk) measure() (Row, error) {
	s := w.State
	bound := math.Inf(1)
	if w.cap {
		bound = math.Sqrt(2 / w.Options.TimeStep)
	}
	row := Row{Time: float64(s.Step) * w.Options.TimeStep, Capped: s.Interval.Capped, Killed: s.Interval.Killed}
	square, imaginary := 0.0, 0.0
	for i, weight := range s.Weight {
		if weight == 0 {
			continue
		}
		e := real(w.energy[i])
		if math.Abs(e-s.ReferenceEnergy) > bound {
			e = min(max(e, s.ReferenceEnergy-bound), s.ReferenceEnergy+bound)
			row.Capped++
		}
		row.Weight += weight
		row.Numerator += weight * e
		imaginary += weight * imag(w.energy[i])
		square += weight * weight
	}
	if row.Weight == 0 {
		return row, errExtinct
	}
	row.Energy = row.Numerator / row.Weight
	row.Imaginary = imaginary / row.Weight
	row.Effective = row.Weight * row.Weight / square
	logNorm := s.logNorm()
	interval := w.Options.TimeStep * float64(w.Options.every(MeasureInterval))
	row.Growth = (s.GrowthTime - (logNorm - s.GrowthReference)) / interval
	s.GrowthReference, s.GrowthTime = logNorm, 0
	s.ReferenceEnergy += smoothing * (row.Energy - s.ReferenceEnergy)
	s.Total.add(s.Interval)
	s.Interval = Counters{}
	return row, nil
}

// smoothing is the share of a new measurement in the running energy.
const smoothing = 0.1
