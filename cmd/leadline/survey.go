package main

import (
	"context"
	"encoding/csv"
	"fmt"
	"io"
	"math"
	"os"
	"path/filepath"
	"runtime"
	"strconv"
	"strings"
	"text/tabwriter"

	"github.com/spf13/cobra"

	"leadline/afqmc"
	"leadline/cmd/leadline/job"
	"leadline/hamiltonian"
	"leadline/trial"
)

const (
	surveyFile = "survey.json"
	tableFile  = "table.csv"
	plotFile   = "bias.svg"
)

// point is one row of a survey.
type point struct {
	Settings         []string        `json:"settings"`
	Directory        string          `json:"directory"`
	TrialEnergy      *float64        `json:"trial_energy"`
	TrialInfidelity  *float64        `json:"trial_infidelity"`
	Energy           *float64        `json:"energy"`
	Error            *float64        `json:"error"`
	ExactEnergy      *float64        `json:"exact_energy"`
	Deviation        *float64        `json:"deviation"`
	Unit             string          `json:"unit"`
	Status           afqmc.Status    `json:"status"`
	Failure          string          `json:"failure,omitempty"`
	Level            afqmc.Level     `json:"level"`
	Warnings         []afqmc.Warning `json:"warnings"`
	settings, values []string
}

func surveyCommand(stderr io.Writer) *cobra.Command {
	var f runFlags
	c := &cobra.Command{
		Use:   "survey SURVEY.toml",
		Short: "Run a job over varied settings into one table and a plot",
		Args:  arguments(1, 1),
		RunE: func(c *cobra.Command, args []string) error {
			if f.cores < 1 {
				return usageError{fmt.Errorf("--cores is %d, expected at least 1", f.cores)}
			}
			return runSurvey(c.Context(), args[0], f, c.OutOrStdout(), stderr)
		},
	}
	flags := c.Flags()
	flags.StringVarP(&f.output, "output", "o", "", "directory for the results (default: named after the survey)")
	flags.BoolVar(&f.json, "json", false, "print the table as one JSON object")
	flags.IntVar(&f.cores, "cores", runtime.GOMAXPROCS(0), "goroutines that propagate walkers")
	flags.BoolVar(&f.exact, "exact", false, "compare with the exact energy and state (full CI) of each Hamiltonian")
	flags.BoolVar(&f.quiet, "quiet", false, "no progress on stderr")
	return c
}

func runSurvey(ctx context.Context, name string, f runFlags, stdout, stderr io.Writer) error {
	in := newInputs(filepath.Dir(name))
	text, err := in.read(filepath.Base(name))
	if err != nil {
		return err
	}
	survey, err := job.ParseSurvey(text, name)
	if err != nil {
		return err
	}
	jobName := in.path(survey.Job)
	_, first, _, err := loadJob(jobName)
	if err != nil {
		return err
	}
	// Every point is checked before the first one runs.
	settings := survey.Points()
	jobs := make([]*job.Job, len(settings))
	for i := range settings {
		if jobs[i], err = first.Vary(settings[i]...); err != nil {
			return err
		}
	}
	dir, err := surveyDirectory(f.output, name)
	if err != nil {
		return err
	}
	var points []*point
	known := map[string]*exactResult{}
	for i, j := range jobs {
		p := &point{Directory: fmt.Sprintf("point-%03d", i+1)}
		var words []string
		for _, s := range settings[i] {
			words = append(words, s.String())
			p.settings, p.values = append(p.settings, s.Key), append(p.values, fmt.Sprint(s.Value))
		}
		p.Settings = words
		if !f.quiet {
			fmt.Fprintf(stderr, "point %d of %d: %s\n", i+1, len(jobs), strings.Join(words, ", "))
		}
		if err := p.run(ctx, j, jobName, dir, f, known, stderr); err != nil {
			if ctx.Err() != nil {
				return err
			}
			// The others may still succeed.
			p.Status, p.Failure = "failed", err.Error()
			fmt.Fprintf(stderr, "leadline: point %d (%s): %v\n", i+1, strings.Join(words, ", "), err)
		}
		points = append(points, p)
		if err := writeSurvey(dir, points); err != nil {
			return err
		}
		if p.Status == afqmc.StatusInterrupted {
			break
		}
	}
	if f.json {
		err = encode(stdout, map[string]any{"title": survey.Title, "points": points})
	} else {
		err = printSurvey(stdout, survey.Title, points, dir)
	}
	switch last := points[len(points)-1]; {
	case err != nil:
		return err
	case last.Status == afqmc.StatusInterrupted:
		return exitError{exitInterrupted}
	}
	code := exitDone
	for _, p := range points {
		switch {
		case p.Failure != "":
			return exitError{exitFailed}
		case p.Level == afqmc.Stop:
			code = exitDoubtful
		}
	}
	if code != exitDone {
		return exitError{code}
	}
	return nil
}

func surveyDirectory(explicit, name string) (string, error) {
	if explicit == "" {
		return resultDirectory("", name, false)
	}
	if _, err := os.Stat(filepath.Join(explicit, surveyFile)); err == nil {
		return "", fmt.Errorf("%s: holds a survey already; choose another directory", explicit)
	}
	return explicit, os.MkdirAll(explicit, 0o755)
}

// run does one point; exact states are kept in known, one for each Hamiltonian.
func (p *point) run(ctx context.Context, j *job.Job, jobName, dir string, f runFlags, known map[string]*exactResult, stderr io.Writer) error {
	f.output = filepath.Join(dir, p.Directory)
	wantExact := f.exact
	f.exact = false
	r := &jobRun{
		in:  newInputs(filepath.Dir(jobName)),
		job: j, flags: f, name: jobName, shown: display{out: stderr, quiet: f.quiet},
	}
	if err := r.prepare(ctx); err != nil {
		return err
	}
	if wantExact {
		key := fmt.Sprintf("%+v", j.Hamiltonian)
		if known[key] == nil {
			result, err := r.system.exact(ctx, 1, nil, true, r.shown)
			if err != nil {
				return err
			}
			clear(known) // one exact state at a time
			known[key] = result
		}
		r.exact = known[key]
		p.TrialInfidelity = number(infidelity(r.guidance.guide.Source, r.exact))
	}
	if err := r.project(ctx); err != nil {
		return err
	}
	s := r.summary
	p.TrialEnergy, p.Energy, p.Error, p.ExactEnergy = s.TrialEnergy, s.Energy, s.Error, s.ExactEnergy
	p.Unit = s.Unit
	p.Status, p.Level, p.Warnings = s.Status, worst(s.Warnings), s.Warnings
	if p.Energy != nil && p.ExactEnergy != nil {
		p.Deviation = number(*p.Energy - *p.ExactEnergy)
	}
	return nil
}

// infidelity returns 1 − |⟨Ψ_T|Ψ_0⟩|²/(⟨Ψ_T|Ψ_T⟩⟨Ψ_0|Ψ_0⟩), from the trial's
// overlap with every determinant of the exact state's space.
func infidelity(source trial.Source, e *exactResult) float64 {
	up, down := e.space.Up, e.space.Down
	overlaps := make([]trial.Overlap, down.Len())
	batch := trial.NewWalkers(source.Sector(), false, down.Len())
	place := func(i, spin int, mask uint64) {
		column := 0
		for p := range source.Sector().Orbitals {
			if mask>>p&1 == 1 {
				batch.Set(i, spin, p, column, 1)
				column++
			}
		}
	}
	var product complex128
	var trialNorm, exactNorm float64
	for a, upMask := range up.Masks() {
		clear(batch.Data)
		for b, downMask := range down.Masks() {
			place(b, hamiltonian.Up, upMask)
			place(b, hamiltonian.Down, downMask)
		}
		source.Overlaps(overlaps, batch)
		for b, o := range overlaps {
			c := e.ground.Coefficients[a*down.Len()+b]
			exactNorm += c * c
			if o.Zero() {
				continue
			}
			v := o.Value()
			product += v * complex(c, 0)
			trialNorm += real(v)*real(v) + imag(v)*imag(v)
		}
	}
	square := real(product)*real(product) + imag(product)*imag(product)
	return math.Max(0, 1-square/(trialNorm*exactNorm))
}

func writeSurvey(dir string, points []*point) error {
	err := writeFile(filepath.Join(dir, surveyFile), func(w io.Writer) error {
		return encode(w, map[string]any{"points": points})
	})
	if err != nil {
		return err
	}
	err = writeFile(filepath.Join(dir, tableFile), func(w io.Writer) error {
		table := csv.NewWriter(w)
		table.Write(append(append([]string{}, points[0].settings...), "trial_energy", "trial_infidelity", "energy", "error", "exact_energy", "deviation", "unit", "status", "level", "directory"))
		for _, p := range points {
			row := append([]string{}, p.values...)
			for _, v := range []*float64{p.TrialEnergy, p.TrialInfidelity, p.Energy, p.Error, p.ExactEnergy, p.Deviation} {
				field := ""
				if v != nil {
					field = strconv.FormatFloat(*v, 'g', -1, 64)
				}
				row = append(row, field)
			}
			table.Write(append(row, p.Unit, string(p.Status), string(p.Level), p.Directory))
		}
		table.Flush()
		return table.Error()
	})
	if err != nil {
		return err
	}
	return plotSurvey(filepath.Join(dir, plotFile), points)
}

func printSurvey(w io.Writer, title string, points []*point, dir string) error {
	if title != "" {
		fmt.Fprintf(w, "%s\n\n", title)
	}
	table := tabwriter.NewWriter(w, 2, 0, 2, ' ', 0)
	fmt.Fprintf(table, "  %s\ttrial energy\tinfidelity\tenergy\tdeviation\twarnings\n", strings.Join(points[0].settings, "\t"))
	for _, p := range points {
		text := func(v *float64, format string) string {
			if v == nil {
				return "-"
			}
			return minus(fmt.Sprintf(format, *v))
		}
		energy, deviation := "-", "-"
		if p.Energy != nil && p.Error != nil {
			energy = quoted(*p.Energy, *p.Error)
			if p.Deviation != nil {
				deviation = quoted(*p.Deviation, *p.Error)
			}
		}
		level := string(p.Level)
		switch {
		case p.Failure != "":
			level = "failed"
		case level == "":
			level = "none"
		}
		fmt.Fprintf(table, "  %s\t%s\t%s\t%s\t%s\t%s\n", strings.Join(p.values, "\t"), text(p.TrialEnergy, "%.6f"),
			text(p.TrialInfidelity, "%.2e"), energy, deviation, level)
	}
	if err := table.Flush(); err != nil {
		return err
	}
	for _, p := range points {
		if p.Unit != "" {
			fmt.Fprintf(w, "\n  energies in %s, one standard error in the last digits\n", symbol(p.Unit))
			break
		}
	}
	_, err := fmt.Fprintf(w, "\n  table, plot and the results of each point in %s\n", filepath.ToSlash(dir))
	return err
}
