package main

import (
	"context"
	"fmt"
	"math"
	"slices"

	"gonum.org/v1/gonum/mat"
	"gonum.org/v1/gonum/stat"

	"leadline/afqmc"
	"leadline/afqmc/statistics"
	"leadline/cmd/leadline/job"
	"leadline/hamiltonian"
	"leadline/trial"
	"leadline/trial/expansion"
	"leadline/trial/measured"
	"leadline/trial/measured/amplitude"
	"leadline/trial/measured/check"
	"leadline/trial/measured/record"
)

// measuredTrial is a collapsed record as the trial of a job, and what is needed
// to say what its shot noise does to the energy.
type measuredTrial struct {
	name     string
	estimate *amplitude.Estimate
	orbitals int        // of the Hamiltonian
	core     int        // orbitals below the measured window
	active   int        // measured orbitals
	columns  *mat.Dense // core and active orbitals first; nil where they are
	settings int64
}

// measure collapses the job's record and returns it as the trial.
func (g *guidance) measure(ctx context.Context, j *job.Job, in *inputs, s *system, progress progressFunc) (trial.Source, error) {
	if _, err := g.solveReference(ctx, j, in, s); err != nil {
		return nil, err
	}
	r, err := openRecord(in.path(j.Trial.Record))
	if err != nil {
		return nil, err
	}
	defer r.close()
	header, err := r.header()
	if err != nil {
		return nil, err
	}
	if header.Kind != record.Trial {
		return nil, fmt.Errorf("%s: a %s record, expected one of a trial state", r.name, header.Kind)
	}
	m := &measuredTrial{name: r.name, orbitals: s.hamiltonian.Orbitals}
	if err := m.place(header, j.Trial.Active, s.hamiltonian.Sector); err != nil {
		return nil, fmt.Errorf("%s: %w", r.name, err)
	}
	basis := header.HamiltonianSHA256
	if basis == record.UnknownHash && !j.Trial.ForeignBasis {
		return nil, fmt.Errorf("%s: does not say which orbitals it is for (hamiltonian_sha256 is all zeros); foreign_basis = true uses it all the same", r.name)
	}
	if err := g.checkBasis(r.name, basis, j.Trial.ForeignBasis, in, s); err != nil {
		return nil, err
	}
	estimate, hash, err := collapseRecord(ctx, r, 0, progress)
	if err != nil {
		return nil, err
	}
	in.hashes[j.Trial.Record] = hash
	if err := g.checkEnergy(m, header, s.hamiltonian, estimate); err != nil {
		return nil, fmt.Errorf("%s: %w", r.name, err)
	}
	if err := jobProjections(j.Trial).apply(estimate); err != nil {
		return nil, fmt.Errorf("%s: %w", r.name, err)
	}
	g.notes = append(g.notes, stepTexts(estimate)...)
	m.estimate, m.settings = estimate, estimate.Provenance.Settings
	g.measured = m
	g.expansion = m.expansion(measured.Expansion(estimate, m.orbitals, m.core))
	g.warnings = append(g.warnings, m.warnings()...)
	return expansion.New(g.expansion)
}

// enumerable is the size of the sectors in which a declared energy is looked at
// in every run; leadline measure check --job does so in all.
const enumerable = 20000

// checkEnergy warns of a record whose state does not have the energy that it
// declares: the second line of defence against other orbitals, signs and orders.
func (g *guidance) checkEnergy(m *measuredTrial, header *record.Header, h *hamiltonian.Hamiltonian, e *amplitude.Estimate) error {
	if header.TrialEnergy == nil || e.Size() > enumerable {
		return nil
	}
	report := &check.Report{DeclaredEnergy: header.TrialEnergy}
	if err := m.compareEnergy(h, report, e); err != nil {
		return err
	}
	for _, w := range report.Warnings {
		g.warnings = append(g.warnings, afqmc.Warning{Check: "record_" + w.Check, Level: afqmc.Stop, Text: w.Text, Figure: w.Figure})
	}
	return nil
}

// place finds the measured window among the orbitals of the Hamiltonian.
func (m *measuredTrial) place(h *record.Header, active job.Space, sector hamiltonian.Sector) error {
	measuredOrbitals := h.Modes() / 2
	if active != (job.Space{}) && (active.Electrons != h.Up+h.Down || active.Orbitals != measuredOrbitals) {
		return fmt.Errorf("%d electrons in %d orbitals were measured, trial.active says [%d, %d]", h.Up+h.Down, measuredOrbitals, active.Electrons, active.Orbitals)
	}
	m.core, m.active = sector.Up-h.Up, measuredOrbitals
	if m.core < 0 || sector.Down-h.Down != m.core || m.core+measuredOrbitals > sector.Orbitals {
		return fmt.Errorf("%d up and %d down electrons in %d orbitals were measured; the hamiltonian has %d, %d and %d, which leaves no closed core below",
			h.Up, h.Down, measuredOrbitals, sector.Up, sector.Down, sector.Orbitals)
	}
	core, window, err := h.SpatialWindow()
	if err != nil || window == nil {
		return err
	}
	if len(core) != m.core || len(window) != measuredOrbitals {
		return fmt.Errorf("active names %d core and %d active orbitals, expected %d and %d", len(core), len(window), m.core, measuredOrbitals)
	}
	order := slices.Concat(core, window)
	if !slices.IsSorted(order) || order[len(order)-1] != len(order)-1 {
		m.columns = mat.NewDense(sector.Orbitals, len(order), nil)
		for k, p := range order {
			if p >= sector.Orbitals {
				return fmt.Errorf("active names orbital %d, the hamiltonian has %d", p+1, sector.Orbitals)
			}
			m.columns.Set(p, k, 1)
		}
	}
	return nil
}

func (m *measuredTrial) expansion(e *expansion.Expansion) *expansion.Expansion {
	e.Columns = m.columns
	return e
}

// fewSettings is the number of measurement bases below which the noise between
// bases is not sampled well.
const fewSettings = 100

// Above these a result of a measured trial needs a warning: noise over norm² of
// its amplitudes, weight of walkers below three standard errors.
const (
	mostlyNoise = 0.3
	unreliable  = 0.01
)

func (m *measuredTrial) warnings() (out []afqmc.Warning) {
	if m.settings < fewSettings {
		out = append(out, afqmc.Warning{Check: "record_settings", Level: afqmc.Caution, Figure: float64(m.settings),
			Text: fmt.Sprintf("the record holds %d settings, at least %d are needed for its errors", m.settings, fewSettings)})
	}
	if x := m.noiseRatio(); !(x >= 0 && x <= mostlyNoise) {
		out = append(out, afqmc.Warning{Check: "record_noise", Level: afqmc.Stop, Figure: x,
			Text: fmt.Sprintf("shot noise carries %.2g times the weight of the measured state, at most %g is usable; take more shots or project (real, spin)", x, mostlyNoise)})
	}
	return out
}

// noiseRatio is the weight of the noise in the amplitudes over that of the state;
// negative or infinite where the state does not show.
func (m *measuredTrial) noiseRatio() float64 {
	return m.estimate.Noise() / m.estimate.NewForm(nil).Unbiased()
}

// walkerSNR says how well the measured trial knows the walkers' overlaps and, as
// the median of its standard error in hartree, their local energies.
type walkerSNR struct {
	Mean        float64  `json:"mean"`
	P01         float64  `json:"p01"`
	Below3      float64  `json:"below3"`
	LocalEnergy *float64 `json:"local_energy_error"`
}

// noiseWatch collects signal-to-noise ratios and a few sets of walkers along a run.
type noiseWatch struct {
	signal *measured.Signal
	every  int // rows between two sets of walkers
	seen   int
	ratios []float64
	batch  []float64
	weight []float64
	kept   []measured.Population
}

const keptPopulations = 6

func (m *measuredTrial) watch(rows int) *noiseWatch {
	return &noiseWatch{signal: measured.NewSignal(m.estimate, m.core), every: max(1, rows/keptPopulations)}
}

func (n *noiseWatch) observe(w *afqmc.Walk) {
	walkers := w.Walkers()
	n.batch = trial.Grow(n.batch, walkers.Count)
	n.signal.Ratios(n.batch, w.State.Overlap, walkers)
	for i, r := range n.batch {
		if w.State.Weight[i] > 0 {
			n.ratios = append(n.ratios, r)
			n.weight = append(n.weight, w.State.Weight[i])
		}
	}
	if n.seen%n.every == n.every/2 && len(n.kept) < keptPopulations {
		copied := walkers
		copied.Data = slices.Clone(walkers.Data)
		n.kept = append(n.kept, measured.Population{Walkers: copied, Weights: slices.Clone(w.State.Weight)})
	}
	n.seen++
}

// snr returns the weighted figures.
func (n *noiseWatch) snr() *walkerSNR {
	if len(n.ratios) == 0 {
		return nil
	}
	out := &walkerSNR{Mean: stat.Mean(n.ratios, n.weight)}
	stat.SortWeighted(n.ratios, n.weight)
	out.P01 = stat.Quantile(0.01, stat.Empirical, n.ratios, n.weight)
	total, below := 0.0, 0.0
	for i, r := range n.ratios {
		total += n.weight[i]
		if r < 3 {
			below += n.weight[i]
		}
	}
	out.Below3 = below / total
	return out
}

// halfRecords is what a run with either half of the record gives.
type halfRecords struct {
	energies   [2]float64
	difference float64
	// error is the standard error of the difference from paired rows: both runs
	// use the same random numbers.
	error float64
}

// halves runs the walk with either half of the record.
func (m *measuredTrial) halves(ctx context.Context, r *jobRun) (*halfRecords, error) {
	first, second := measured.HalfExpansions(m.estimate, m.orbitals, m.core)
	var runs [2]rowKeeper
	for k, e := range []*expansion.Expansion{first, second} {
		source, err := expansion.New(m.expansion(e))
		if err != nil {
			return nil, fmt.Errorf("half record: %w", err)
		}
		bind := trial.NewGuide
		if r.options.Single {
			bind = trial.NewSingleGuide
		}
		guide, err := bind(r.system.hamiltonian, source, afqmc.ExchangeMemory)
		if err != nil {
			return nil, err
		}
		total := r.options.Equilibration + r.options.Length
		update := r.shown.open(fmt.Sprintf("half record %d of 2", k+1), int64(1000*total))
		runs[k].show = func(row afqmc.Row) { update(int64(1000*row.Time), "") }
		options := r.options
		options.TargetError = 0
		result, err := afqmc.Run(ctx, guide, r.guidance.start, options, &runs[k])
		if err != nil {
			return nil, fmt.Errorf("half record: %w", err)
		}
		if result.Status == afqmc.StatusInterrupted {
			return nil, context.Canceled
		}
	}
	out := &halfRecords{}
	n := min(len(runs[0].numerator), len(runs[1].numerator))
	difference := make([]float64, n)
	for k := range runs {
		num, den := runs[k].numerator[:n], runs[k].weight[:n]
		out.energies[k] = statistics.Ratio(num, den).Mean
		mean := stat.Mean(den, nil)
		for i := range difference {
			difference[i] += float64(1-2*k) * (num[i] - out.energies[k]*den[i]) / mean
		}
	}
	out.difference = out.energies[0] - out.energies[1]
	out.error = statistics.Mean(difference).Error
	return out, nil
}

// rowKeeper keeps the sampled rows of a run.
type rowKeeper struct {
	numerator, weight []float64
	show              func(afqmc.Row)
}

func (k *rowKeeper) Record(r afqmc.Row) error {
	k.show(r)
	if r.Sampled {
		k.numerator = append(k.numerator, r.Numerator)
		k.weight = append(k.weight, r.Weight)
	}
	return nil
}

// report adds to a summary what shot noise does to the energy. Interrupted on its
// way it leaves out what is not known yet and says so.
func (m *measuredTrial) report(ctx context.Context, r *jobRun, n *noiseWatch) error {
	err := m.noise(ctx, r, n)
	if err != nil && ctx.Err() != nil {
		r.summary.Status = afqmc.StatusInterrupted
		r.summary.Warnings = append(r.summary.Warnings, afqmc.Warning{Check: "record_halves", Level: afqmc.Caution,
			Text: "interrupted after the walk: its energy is complete, the effect of shot noise is not known in full"})
		return nil
	}
	return err
}

func (m *measuredTrial) noise(ctx context.Context, r *jobRun, n *noiseWatch) error {
	out, h := r.summary, r.system.hamiltonian
	x := m.noiseRatio()
	out.Figures["record_shots"] = number(float64(m.estimate.Provenance.Shots))
	out.Figures["record_infidelity"] = number(x / (1 + x))
	if m.estimate.Reference == nil {
		// Damping by κ costs shots: S κ².
		out.Figures["record_effective_shots"] = number(float64(m.estimate.Provenance.Shots) * math.Max(0, m.estimate.NewForm(nil).Unbiased()))
	}
	if out.WalkerSNR = n.snr(); out.WalkerSNR == nil {
		return nil
	}
	if out.WalkerSNR.Below3 > unreliable {
		out.Warnings = append(out.Warnings, afqmc.Warning{Check: "walker_signal", Level: afqmc.Caution, Figure: out.WalkerSNR.Below3,
			Text: fmt.Sprintf("%.2g of the weight sits on walkers whose overlap is below three standard errors of the record: their phases are unreliable", out.WalkerSNR.Below3)})
	}
	place := func(e *amplitude.Estimate) *expansion.Expansion {
		return m.expansion(measured.Expansion(e, m.orbitals, m.core))
	}
	errors, err := measured.Energies(ctx, h, m.estimate, place, n.kept, afqmc.ExchangeMemory)
	if err != nil {
		return err
	}
	out.MeasurementError, out.WalkerSNR.LocalEnergy = number(errors.Mixed), number(errors.Local)
	halves, err := m.halves(ctx, r)
	if err != nil {
		return err
	}
	out.EnergyHalfRecords = halves.energies[:]
	out.HalfDifference = number(halves.difference)
	out.HalfDifferenceError = number(halves.error)
	return nil
}
