package afqmc

import (
	"fmt"
	"math"

	"leadline/trial"
	"leadline/trial/determinant"
)

// Walk is a projection in progress.
type Walk struct {
	Options    Options
	Guide      *trial.Guide
	Propagator *Propagator
	State      *State

	walkers trial.Walkers // aliases State.Columns
	cap     bool
	// startSpinSquared is ⟨S²⟩ of the start, which the projection keeps.
	startSpinSquared float64
	importance       []complex128 // ln I of the last step, one per walker
	phase            []float64    // arg R of the last step, one per walker
	events           []event      // of the last step, one per walker
	energy           []complex128 // local energies where last measured
	deviation        []float64    // |O_stored/O − 1| of the last re-orthogonalisation
	copies           []int        // of each walker in population control
	tiles            [][2]int
	crew             *crew
	stream           *stream
	// deviates overrides the random deviates in tests.
	deviates func(step, walker int, y []float64)
	// What the next call of work does to a tile; see Step.
	orthogonalise, measuring bool
	work                     func(ws *workspace, tile int)
}

// event flags what happened to a walker in a step.
type event uint8

const (
	eventBounded event = 1 << iota
	eventCapped
	eventKilled
	eventBroken
)

// NewWalk places all walkers on the start determinant and prepares the
// operands. Where start has the same columns for both spins and the Hamiltonian
// is spin-free the walkers stay paired for ever, so only one spin is propagated.
// Call Close when done.
func NewWalk(g *trial.Guide, start trial.Orbitals, o Options) (*Walk, error) {
	o = o.withDefaults()
	if err := o.validate(); err != nil {
		return nil, err
	}
	h := g.Hamiltonian
	paired := h.SpinFree() && h.Up == h.Down && start.Equal()
	n := o.Walkers
	w := &Walk{
		Options:    o,
		Guide:      g,
		walkers:    trial.NewWalkers(h.Sector, paired, n),
		importance: make([]complex128, n),
		phase:      make([]float64, n),
		events:     make([]event, n),
		energy:     make([]complex128, n),
		deviation:  make([]float64, n),
		copies:     make([]int, n),
	}
	reference, err := determinant.New(h.Orbitals, start)
	if err != nil {
		return nil, fmt.Errorf("start determinant: %w", err)
	}
	w.startSpinSquared = reference.SpinSquared()
	w.walkers.Fill(start)
	w.cap = o.Cap == CapOn
	if o.Cap == CapAutomatic {
		w.cap = true
		for _, s := range h.Factors.Sign {
			w.cap = w.cap && s > 0
		}
	}
	w.State = &State{
		Columns: w.walkers.Data,
		Weight:  make([]float64, n),
		Overlap: make([]trial.Overlap, n),
		Fields:  make([]float64, 2*n*h.Factors.Count()),
	}
	for i := range w.State.Weight {
		w.State.Weight[i] = 1
	}
	shift := g.Shift(w.walkers)
	if w.Propagator, err = NewPropagator(h, o.TimeStep, shift, o.Single); err != nil {
		return nil, err
	}
	w.tiles = tiles(n)
	w.work, w.stream = w.advance, newStream()
	w.crew = newCrew(min(o.Cores, len(w.tiles)), func() *workspace {
		size := (n + len(w.tiles) - 1) / len(w.tiles)
		return &workspace{
			area:   w.Propagator.newArea(size, w.walkers.Columns()),
			mixed:  g.NewMixed(size),
			old:    make([]trial.Overlap, size),
			before: make([]trial.Overlap, size),
			logR:   make([]float64, size),
			gram:   newGram(h.Orbitals, max(h.Up, h.Down)),
			stream: newStream(),
		}
	})
	w.crew.run(len(w.tiles), func(ws *workspace, t int) { w.evaluate(ws, w.tiles[t], true) })
	if w.State.Overlap[0].Zero() || w.State.Overlap[0].Log < math.Log(minimalOverlap) {
		w.Close()
		return nil, fmt.Errorf("the start determinant and the trial have overlap %.2g, expected more than %g: choose a trial of the start's symmetry", math.Exp(w.State.Overlap[0].Log), minimalOverlap)
	}
	w.State.TrialEnergy = real(w.energy[0])
	w.State.ReferenceEnergy = w.State.TrialEnergy
	return w, nil
}

// minimalOverlap is the smallest overlap of start and trial that is taken for
// one that is not zero by symmetry.
const minimalOverlap = 1e-8

// Close ends the goroutines of the walk.
func (w *Walk) Close() { w.crew.close() }

// Walkers returns the walkers, aliasing the state.
func (w *Walk) Walkers() trial.Walkers { return w.walkers }

// tiles cuts n walkers into pieces of nearly equal size, at most tileSize, their
// number a multiple of eight where there are enough walkers, so that 2, 4 or 8
// cores get equal shares. It does not depend on the number of cores.
func tiles(n int) [][2]int {
	count := (n + tileSize - 1) / tileSize
	if n >= 16 {
		count = (count + 7) / 8 * 8
	}
	out := make([][2]int, count)
	for t := range out {
		out[t] = [2]int{t * n / count, (t + 1) * n / count}
	}
	return out
}

// tileSize bounds the walkers of a tile: 2·32 rows keep the product kernel busy
// while the tile's packed exponents, 16·M(M+1)/2 bytes each, stay near the cache.
const tileSize = 32

// workspace is the scratch of one goroutine.
type workspace struct {
	area   *area
	mixed  *trial.Mixed
	old    []trial.Overlap // before the step
	before []trial.Overlap // after the step, before re-orthogonalisation
	logR   []float64
	gram   *gram
	stream *stream
}

// Step advances all walkers by one time step: propagation, constraint and
// weights; re-orthogonalisation where orthogonalise is set, local energies where
// measure is set.
func (w *Walk) Step(orthogonalise, measure bool) error {
	w.orthogonalise, w.measuring = orthogonalise, measure
	w.crew.run(len(w.tiles), w.work)
	s := w.State
	s.Step++
	s.GrowthTime += s.TrialEnergy * w.Options.TimeStep
	for i, e := range w.events {
		if s.Weight[i] == 0 && e&eventKilled == 0 {
			continue // dead since an earlier step
		}
		if e&eventBroken != 0 {
			return fmt.Errorf("walker %d broke down at imaginary time %g: its columns are no longer finite or independent; a smaller time step may help",
				i+1, float64(s.Step)*w.Options.TimeStep)
		}
		s.Interval.Steps++
		if e&eventBounded != 0 {
			s.Interval.Bounded++
		}
		if e&eventCapped != 0 {
			s.Interval.Capped++
		}
		if e&eventKilled != 0 {
			s.Interval.Killed++
		}
		s.Interval.Phase += w.phase[i] * w.phase[i]
		if orthogonalise {
			s.Checks.OverlapDeviation = max(s.Checks.OverlapDeviation, w.deviation[i])
		}
	}
	return nil
}

// advance does one step of one tile.
func (w *Walk) advance(ws *workspace, t int) {
	tile := w.tiles[t]
	w.propagate(ws, tile)
	w.evaluateMoved(ws, tile, w.orthogonalise)
	w.reweight(tile)
	if w.measuring {
		w.localEnergies(ws, tile)
	}
}

// draw fills the deviates of one walker for the next step.
func (w *Walk) draw(ws *workspace, walker int) {
	if w.deviates != nil {
		w.deviates(w.State.Step, walker, ws.area.deviates)
		return
	}
	ws.stream.key(w.Options.Seed, uint64(w.State.Step), uint64(walker)+1)
	ws.stream.normal(ws.area.deviates)
}

// propagate draws the fields of a tile and moves its columns.
func (w *Walk) propagate(ws *workspace, tile [2]int) {
	p, ng := w.Propagator, len(w.Propagator.Shift)
	for i := tile[0]; i < tile[1]; i++ {
		w.draw(ws, i)
		fields := w.State.Fields[2*i*ng : 2*(i+1)*ng]
		number, importance, bounded := p.draw(ws.area, i-tile[0], fields[:ng], fields[ng:])
		w.importance[i] = importance - number
		w.phase[i] = -imag(number)
		w.events[i] = 0
		if bounded {
			w.events[i] = eventBounded
		}
	}
	part := w.walkers.Slice(tile[0], tile[1])
	down := part.Down
	if part.Paired {
		down = 0
	}
	p.advance(ws.area, part.Data, part.Count, part.Up, down)
}

// evaluateMoved evaluates the moved tile and completes ln I and arg R with the
// overlap ratio; re-orthogonalisation changes stored columns and overlap by the
// same factor, so the ratio is taken with the factor put back.
func (w *Walk) evaluateMoved(ws *workspace, tile [2]int, orthogonalise bool) {
	count := tile[1] - tile[0]
	part := w.walkers.Slice(tile[0], tile[1])
	copy(ws.old, w.State.Overlap[tile[0]:tile[1]])
	clear(ws.logR[:count])
	if orthogonalise {
		ws.mixed.Overlap = ws.before
		w.Guide.Overlaps(ws.mixed, part)
		for i := range count {
			logR, err := orthonormalise(part, i, ws.gram)
			if err != nil {
				w.events[tile[0]+i] |= eventBroken
			}
			ws.logR[i] = logR
		}
	}
	w.evaluate(ws, tile, false)
	for i := range count {
		k := tile[0] + i
		now := w.State.Overlap[k]
		if orthogonalise {
			w.deviation[k] = deviation(now.Times(trial.Overlap{Log: ws.logR[i], Phase: 1}), ws.before[i])
		}
		if math.IsNaN(now.Log) {
			w.events[k] |= eventBroken
		}
		if now.Zero() || ws.old[i].Zero() {
			w.importance[k] = complex(math.Inf(-1), 0)
			w.phase[k] = math.Pi
			continue
		}
		ratio := now.Phase * complex(real(ws.old[i].Phase), -imag(ws.old[i].Phase))
		turn := math.Atan2(imag(ratio), real(ratio))
		w.phase[k] = math.Remainder(w.phase[k]+turn, 2*math.Pi)
		w.importance[k] += complex(now.Log+ws.logR[i]-ws.old[i].Log, turn)
	}
}

// deviation returns |a/b − 1|, zero where b vanishes.
func deviation(a, b trial.Overlap) float64 {
	if b.Zero() {
		return 0
	}
	ratio := a.Over(b)
	return math.Hypot(real(ratio)-1, imag(ratio))
}

// evaluate sets overlaps and field expectations of a tile, and local energies on
// request.
func (w *Walk) evaluate(ws *workspace, tile [2]int, energies bool) {
	ng := len(w.Propagator.Shift)
	m := ws.mixed
	m.Overlap = w.State.Overlap[tile[0]:tile[1]]
	m.Fields = w.State.Fields[2*tile[0]*ng : 2*tile[1]*ng]
	w.Guide.Evaluate(m, w.walkers.Slice(tile[0], tile[1]))
	if energies {
		w.localEnergies(ws, tile)
	}
}

// localEnergies sets the local energies of the tile last evaluated.
func (w *Walk) localEnergies(ws *workspace, tile [2]int) {
	ws.mixed.Energy = w.energy[tile[0]:tile[1]]
	w.Guide.LocalEnergies(ws.mixed, w.walkers.Slice(tile[0], tile[1]))
}

// reweight applies the hybrid weight, its cap and the phaseless constraint.
func (w *Walk) reweight(tile [2]int) {
	s, tau := w.State, w.Options.TimeStep
	bound := math.Sqrt(2 / tau)
	for i := tile[0]; i < tile[1]; i++ {
		if s.Weight[i] == 0 {
			continue
		}
		cosine := math.Cos(w.phase[i])
		hybrid := w.Propagator.Constant - real(w.importance[i])/tau
		if cosine <= 0 || math.IsInf(hybrid, 1) || math.IsNaN(hybrid) {
			if math.IsNaN(hybrid) {
				w.events[i] |= eventBroken
			}
			s.Weight[i] = 0
			w.events[i] |= eventKilled
			continue
		}
		if w.cap && math.Abs(hybrid-s.ReferenceEnergy) > bound {
			hybrid = min(max(hybrid, s.ReferenceEnergy-bound), s.ReferenceEnergy+bound)
			w.events[i] |= eventCapped
		}
		s.Weight[i] *= math.Exp(-tau*(hybrid-s.TrialEnergy)) * cosine
	}
}

// ImportanceSpread returns the standard deviation over walkers of ln|I| in the
// last step, the figure that tells a working force bias: it grows like τ.
func (w *Walk) ImportanceSpread() float64 {
	n := float64(len(w.importance))
	var sum, square float64
	for _, v := range w.importance {
		sum += real(v)
		square += real(v) * real(v)
	}
	return math.Sqrt(max(0, square/n-sum*sum/(n*n)))
}
