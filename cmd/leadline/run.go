package main

import (
	"context"
	"errors"
	"fmt"
	"io"
	"math"
	"path/filepath"
	"runtime"
	"slices"
	"strings"
	"time"

	"github.com/spf13/cobra"

	"leadline/afqmc"
	"leadline/cmd/leadline/job"
	"leadline/hamiltonian/linalg"
)

// runFlags are the flags of leadline run.
type runFlags struct {
	output         string
	overwrite      bool
	json           bool
	seed           int64
	seeded         bool // the seed was given
	cores          int
	quiet          bool
	exact          bool
	writeExpansion string // file for the trial, an expansion
}

func runCommand(stderr io.Writer) *cobra.Command {
	var f runFlags
	c := &cobra.Command{
		Use:   "run [JOB.toml]",
		Short: "Do a whole job: Hamiltonian, trial, projection, error analysis",
		Long: "Do a whole job: Hamiltonian, trial, projection, error analysis.\n" +
			"Without JOB.toml an embedded example runs, about a minute on two cores.",
		Args: arguments(0, 1),
		RunE: func(c *cobra.Command, args []string) error {
			name := ""
			if len(args) == 1 {
				name = args[0]
			}
			if c.Flags().Changed("seed") && f.seed < 0 {
				return usageError{fmt.Errorf("--seed is %d, expected zero or more", f.seed)}
			}
			if f.cores < 1 {
				return usageError{fmt.Errorf("--cores is %d, expected at least 1", f.cores)}
			}
			f.seeded = c.Flags().Changed("seed")
			return runJob(c.Context(), name, f, c.OutOrStdout(), stderr)
		},
	}
	flags := c.Flags()
	flags.StringVarP(&f.output, "output", "o", "", "directory for the results (default: named after the job)")
	flags.BoolVar(&f.overwrite, "overwrite", false, "replace results in the directory given by -o")
	flags.BoolVar(&f.json, "json", false, "print the summary as one JSON object")
	flags.Int64Var(&f.seed, "seed", 0, "random seed, in place of the job's")
	flags.IntVar(&f.cores, "cores", runtime.GOMAXPROCS(0), "processor cores to use; the result does not depend on it")
	flags.StringVar(&f.writeExpansion, "write-expansion", "", "also write the trial, a CI expansion in the orbitals of the job's file, to this file")
	flags.BoolVar(&f.exact, "exact", false, "add the exact energy (full CI), where it fits in memory")
	flags.BoolVar(&f.quiet, "quiet", false, "no progress on stderr")
	return c
}

// runJob does one job and prints its result.
func runJob(ctx context.Context, name string, f runFlags, stdout, stderr io.Writer) error {
	in, j, name, err := loadJob(name)
	if err != nil {
		return err
	}
	if f.seeded {
		if err := j.Set("projection.seed", f.seed); err != nil {
			return err
		}
	}
	r := &jobRun{in: in, job: j, flags: f, name: name, shown: display{out: stderr, quiet: f.quiet}}
	if err := checkDirectory(f.output, f.overwrite); err != nil {
		return err
	}
	if f.writeExpansion != "" {
		if err := mayWrite(f.writeExpansion, f.overwrite); err != nil {
			return err
		}
	}
	err = r.prepare(ctx)
	if err == nil {
		err = r.project(ctx)
	}
	if errors.Is(err, context.Canceled) && f.json && r.summary == nil {
		// One JSON object all the same.
		return errorsFirst(encode(stdout, &summary{Title: j.Title, Status: afqmc.StatusInterrupted, Inputs: in.hashes,
			Warnings: []afqmc.Warning{}, Version: version()}), exitError{exitInterrupted})
	}
	if err != nil {
		return err
	}
	if f.json {
		err = encode(stdout, r.summary)
	} else {
		err = r.print(stdout)
	}
	switch {
	case err != nil:
		return err
	case r.summary.Status == afqmc.StatusInterrupted:
		return exitError{exitInterrupted}
	case worst(r.summary.Warnings) == afqmc.Stop:
		return exitError{exitDoubtful}
	}
	return nil
}

// jobRun is one job on its way from file to result.
type jobRun struct {
	in    *inputs
	job   *job.Job
	flags runFlags
	name  string // of the job file
	shown display

	begun    time.Time
	system   *system
	guidance *guidance
	exact    *exactResult
	options  afqmc.Options
	dir      string
	summary  *summary
}

func (r *jobRun) say(format string, args ...any) {
	if !r.flags.quiet {
		fmt.Fprintf(r.shown.out, format+"\n", args...)
	}
}

// prepare does all that comes before the walk.
func (r *jobRun) prepare(ctx context.Context) (err error) {
	r.begun = time.Now()
	r.say("%s", r.job.Title)
	if r.system, err = newSystem(ctx, r.job, r.in, r.shown.stage); err != nil {
		return err
	}
	s, h := r.system, r.system.hamiltonian
	r.say("%d orbitals, %d up and %d down electrons, %d factors (largest integral error %.1e), %d frozen orbitals",
		h.Orbitals, h.Up, h.Down, h.Factors.Count(), s.residual, s.frozen+s.frozenBefore)
	if r.guidance, err = newGuidance(ctx, r.job, r.in, s, r.shown.stage); err != nil {
		return err
	}
	g := r.guidance
	r.say("mean field (%s) %s %s; walkers start from %v with <S^2> = %.4f, kept by the projection", g.reference,
		quoted(g.meanField, 0), symbol(s.unit), s.start.kind, s.start.spinSquared)
	for _, note := range g.notes {
		r.say("note: %s", note)
	}
	r.options = projection(r.job, r.flags.cores)
	cost := afqmc.EstimateCost(h, g.guide.Support(), h.SpinFree() && g.start.Equal(), r.options)
	r.say("the walk: about %s of memory and %s, %.2g flops in %.2g walker-steps", bytesText(cost.Bytes),
		estimatedTime(cost.Flops, h.Orbitals, r.options.Cores), cost.Flops, float64(cost.Steps))
	if err := checkMemory(cost.Bytes, "the walk"); err != nil {
		return err
	}
	if r.flags.writeExpansion != "" {
		if err := r.writeExpansion(); err != nil {
			return err
		}
	}
	if r.flags.exact {
		r.exact, err = s.exact(ctx, 1, nil, true, r.shown)
	}
	return err
}

// writeExpansion writes the trial, if it is an expansion in the orbitals that a
// file fixes.
func (r *jobRun) writeExpansion() error {
	e := r.guidance.expansion
	switch {
	case e == nil:
		return fmt.Errorf("--write-expansion needs a trial that is a CI expansion, found kind %q", r.job.Trial.Kind)
	case e.Columns != nil:
		return fmt.Errorf("--write-expansion: the expansion is in orbitals of its own window; fix them first with leadline prepare --expansion")
	}
	named := *e
	named.Basis = r.system.fingerprint(r.in)
	return writeFile(r.flags.writeExpansion, named.Write)
}

// project makes the result directory, runs the walk and writes what came out.
func (r *jobRun) project(ctx context.Context) (err error) {
	if r.dir, err = resultDirectory(r.flags.output, r.name, r.flags.overwrite); err != nil {
		return err
	}
	if err := writeJob(r.dir, r.in, r.job); err != nil {
		return err
	}
	total := r.options.Equilibration + r.options.Length
	update := r.shown.open("projecting", int64(1000*total))
	rows, err := newSeries(r.dir, func(row afqmc.Row) {
		state := "equilibrating"
		if row.Sampled {
			state = fmt.Sprintf("energy %.4f", row.Energy)
		}
		update(int64(1000*row.Time), state)
	})
	if err != nil {
		return err
	}
	if m := r.guidance.measured; m != nil {
		rows.watch = m.watch(int(r.options.Length / afqmc.MeasureInterval))
	}
	result, err := afqmc.Run(ctx, r.guidance.guide, r.guidance.start, r.options, rows)
	if closed := rows.close(); err == nil {
		err = closed
	}
	out := r.known()
	r.summary = out
	if err != nil {
		out.Status, out.Failure = "failed", err.Error()
		writeSummary(r.dir, out)
		return err
	}
	out.add(result)
	out.Warnings = slices.Concat([]afqmc.Warning{}, r.system.warnings, r.guidance.warnings, out.Warnings)
	if w, ok := exactDeviation(out); ok {
		out.Warnings = append(out.Warnings, w)
	}
	if err := writeSummary(r.dir, out); err != nil || r.guidance.measured == nil || !result.Sampled || result.Status == afqmc.StatusInterrupted {
		return err
	}
	if err := r.guidance.measured.report(ctx, r, rows.watch); err != nil {
		return err
	}
	out.WallSeconds = time.Since(r.begun).Seconds()
	return writeSummary(r.dir, out)
}

// exactDeviation warns where an energy lies further from the exact one than its
// statistical error explains: the bias of constraint and time step.
func exactDeviation(out *summary) (afqmc.Warning, bool) {
	if out.ExactEnergy == nil || out.Energy == nil || out.Error == nil {
		return afqmc.Warning{}, false
	}
	d := *out.Energy - *out.ExactEnergy
	if math.Abs(d) <= 3**out.Error+1e-6 {
		return afqmc.Warning{}, false
	}
	return afqmc.Warning{Check: "exact_deviation", Level: afqmc.Caution, Figure: d,
		Text: fmt.Sprintf("the energy lies %s from the exact one: more than its statistical error, so it is bias", quoted(d, *out.Error))}, true
}

// projection returns the options of the walk.
func projection(j *job.Job, cores int) afqmc.Options {
	p := j.Projection
	o := afqmc.Options{
		TimeStep:      p.TimeStep,
		Walkers:       p.Walkers,
		Equilibration: p.Equilibration,
		Length:        p.Length,
		Seed:          uint64(p.Seed),
		TargetError:   p.TargetError,
		Single:        p.Precision == "single",
		Cores:         cores,
	}
	if p.Cap != nil {
		o.Cap = afqmc.CapOff
		if *p.Cap {
			o.Cap = afqmc.CapOn
		}
	}
	return o
}

// known returns the summary without the result of the walk.
func (r *jobRun) known() *summary {
	s, j, g := r.system, r.job, r.guidance
	h := s.hamiltonian
	out := &summary{
		Title:           j.Title,
		Unit:            s.unit,
		MeanFieldEnergy: number(g.meanField),
		ConstantEnergy:  s.constant,
		Orbitals:        h.Orbitals,
		Up:              h.Up,
		Down:            h.Down,
		Factors:         h.Factors.Count(),
		FactorResidual:  s.residual,
		Walkers:         j.Projection.Walkers,
		TimeStep:        j.Projection.TimeStep,
		Seed:            j.Projection.Seed,
		Kernel:          linalg.Kernel(),
		Inputs:          r.in.hashes,
		Warnings:        []afqmc.Warning{},
		WallSeconds:     time.Since(r.begun).Seconds(),
		Version:         version(),
	}
	if r.exact != nil {
		out.ExactEnergy = &r.exact.ExactEnergy
	}
	if e, ok := g.guide.Expectations(); ok {
		out.TrialEnergy, out.TrialSpinSquared = number(e.Energy(h)), number(e.SpinSquared())
	}
	return out
}

// add fills in the result of the walk.
func (out *summary) add(r *afqmc.Result) {
	out.Status, out.Warnings = r.Status, r.Warnings
	if !r.Sampled {
		return
	}
	out.Energy, out.Error = number(r.Energy.Mean), number(r.Energy.Error)
	out.ImaginaryTime = math.Round(r.Time*1e9) / 1e9
	out.AutocorrelationTime = number(r.Autocorrelation)
	out.Figures = figuresOf(r.Figures)
}

// print writes the result for a person, ready to quote.
func (r *jobRun) print(w io.Writer) error {
	var b strings.Builder
	out, s := r.summary, r.system
	unit := symbol(out.Unit)
	fmt.Fprintf(&b, "%s\n\n", out.Title)
	switch {
	case out.Energy == nil:
		fmt.Fprintf(&b, "  no energy: the run was interrupted while still equilibrating\n")
	case out.Error == nil:
		fmt.Fprintf(&b, "  energy       %s %s, error unknown\n", quoted(*out.Energy, 0), unit)
	default:
		fmt.Fprintf(&b, "  energy       %s %s\n", quoted(*out.Energy, *out.Error), unit)
		fmt.Fprintf(&b, "               one standard error, statistics only; not in it: time step,\n")
		fmt.Fprintf(&b, "               population, bias of the phaseless constraint\n")
	}
	if out.MeasurementError != nil {
		fmt.Fprintf(&b, "  measurement  ±%.2g %s from the shot noise of the record, beside the error above\n", *out.MeasurementError, unit)
	}
	if len(out.EnergyHalfRecords) == 2 && out.HalfDifference != nil && out.HalfDifferenceError != nil {
		fmt.Fprintf(&b, "  half records %s and %s, difference %s\n", minus(fmt.Sprintf("%.5f", out.EnergyHalfRecords[0])),
			minus(fmt.Sprintf("%.5f", out.EnergyHalfRecords[1])), quoted(*out.HalfDifference, *out.HalfDifferenceError))
	}
	if out.WalkerSNR != nil {
		fmt.Fprintf(&b, "  walkers      signal to shot noise %.3g on average, %.3g at the first percentile, %.2g of the weight below 3\n",
			out.WalkerSNR.Mean, out.WalkerSNR.P01, out.WalkerSNR.Below3)
		if e := out.WalkerSNR.LocalEnergy; e != nil {
			fmt.Fprintf(&b, "               median error of a local energy from shot noise %.2g %s\n", *e, unit)
		}
	}
	if out.MeanFieldEnergy != nil {
		fmt.Fprintf(&b, "  mean field   %s %s (%s)\n", quoted(*out.MeanFieldEnergy, 0), unit, r.guidance.reference)
	}
	if out.TrialEnergy != nil {
		fmt.Fprintf(&b, "  trial        %s %s, <S^2> = %.4f\n", quoted(*out.TrialEnergy, 0), unit, math.Abs(*out.TrialSpinSquared))
	}
	if out.Energy != nil && out.MeanFieldEnergy != nil && out.Unit == "hartree" {
		fmt.Fprintf(&b, "  correlation  %s\n", differenceText(*out.Energy-*out.MeanFieldEnergy, out.Error))
	}
	if out.ExactEnergy != nil {
		fmt.Fprintf(&b, "  exact        %s %s (full CI)\n", quoted(*out.ExactEnergy, 0), unit)
		if out.Energy != nil && out.Error != nil {
			fmt.Fprintf(&b, "  deviation    %s %s\n", quoted(*out.Energy-*out.ExactEnergy, *out.Error), unit)
		}
	}
	fmt.Fprintf(&b, "\n  phaseless AFQMC, %d walkers, time step %g, %.4g of imaginary time sampled", out.Walkers, out.TimeStep, out.ImaginaryTime)
	if out.AutocorrelationTime != nil {
		fmt.Fprintf(&b, "\n  (autocorrelation time %.2g)", *out.AutocorrelationTime)
	}
	fmt.Fprintf(&b, "\n  %d orbitals, %d up and %d down electrons, %d frozen orbitals, %d factors\n",
		out.Orbitals, out.Up, out.Down, s.frozen+s.frozenBefore, out.Factors)
	fmt.Fprintf(&b, "  walkers keep the spin of their %v start, <S^2> = %.4f\n", s.start.kind, s.start.spinSquared)
	fmt.Fprintf(&b, "  seed %d, kernel %s, version %s, %.0f s; status: %s\n", out.Seed, out.Kernel, out.Version, out.WallSeconds, out.Status)
	if len(out.Warnings) > 0 {
		fmt.Fprintf(&b, "\n  warnings\n")
		for _, w := range out.Warnings {
			fmt.Fprintf(&b, "    %-8s %s: %s\n", w.Level, w.Check, w.Text)
		}
		if worst(out.Warnings) == afqmc.Stop {
			fmt.Fprintf(&b, "  a warning of the level stop: do not quote this number\n")
		}
	}
	fmt.Fprintf(&b, "\n  results in %s\n", filepath.ToSlash(r.dir))
	_, err := io.WriteString(w, b.String())
	return err
}

// Units of energy differences: CODATA 2018 (Tiesinga et al., Rev. Mod. Phys. 93,
// 025010 (2021)); the calorie is the thermochemical one, 4.184 J.
const (
	hartreeInElectronvolt = 27.211386245988
	hartreeInKilocalorie  = 627.5094740631 // per mole
)

// differenceText writes an energy difference in hartree, eV and kcal/mol.
func differenceText(d float64, err *float64) string {
	e := 0.0
	if err != nil {
		e = *err
	}
	return fmt.Sprintf("%s E_h = %s eV = %s kcal/mol", quoted(d, e), quoted(d*hartreeInElectronvolt, e*hartreeInElectronvolt),
		quoted(d*hartreeInKilocalorie, e*hartreeInKilocalorie))
}
