package main

import (
	"encoding/csv"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"math"
	"os"
	"path/filepath"
	"strconv"
	"strings"

	"leadline/afqmc"
	"leadline/cmd/leadline/job"
)

const (
	summaryFile = "summary.json"
	seriesFile  = "series.csv"
	jobFile     = "job.toml"
)

// summary is the content of summary.json and of --json; null where a thing was
// not computed.
type summary struct {
	Title               string              `json:"title"`
	Status              afqmc.Status        `json:"status"`
	Energy              *float64            `json:"energy"`
	Error               *float64            `json:"error"`
	Unit                string              `json:"unit"`
	MeanFieldEnergy     *float64            `json:"mean_field_energy"`
	TrialEnergy         *float64            `json:"trial_energy"`
	TrialSpinSquared    *float64            `json:"trial_spin_squared"`
	ExactEnergy         *float64            `json:"exact_energy"`
	ConstantEnergy      float64             `json:"constant_energy"`
	Orbitals            int                 `json:"orbitals"`
	Up                  int                 `json:"up"`
	Down                int                 `json:"down"`
	Factors             int                 `json:"factors"`
	FactorResidual      float64             `json:"factor_residual"`
	Walkers             int                 `json:"walkers"`
	TimeStep            float64             `json:"time_step"`
	ImaginaryTime       float64             `json:"imaginary_time"`
	AutocorrelationTime *float64            `json:"autocorrelation_time"`
	Seed                int64               `json:"seed"`
	Kernel              string              `json:"kernel"`
	Inputs              map[string]string   `json:"inputs"`
	Warnings            []afqmc.Warning     `json:"warnings"`
	Figures             map[string]*float64 `json:"figures"`
	// What the shot noise of a measured trial does; absent for computed trials.
	MeasurementError    *float64   `json:"measurement_error,omitempty"`
	EnergyHalfRecords   []float64  `json:"energy_half_records,omitempty"`
	HalfDifference      *float64   `json:"half_difference,omitempty"`
	HalfDifferenceError *float64   `json:"half_difference_error,omitempty"`
	WalkerSNR           *walkerSNR `json:"walker_snr,omitempty"`
	Failure             string     `json:"failure,omitempty"`
	WallSeconds         float64    `json:"wall_seconds"`
	Version             string     `json:"version"`
}

// number returns a pointer to v, nil where it is not finite.
func number(v float64) *float64 {
	if math.IsNaN(v) || math.IsInf(v, 0) {
		return nil
	}
	return &v
}

// figuresOf returns the numbers behind the diagnostics by name.
func figuresOf(f afqmc.Figures) map[string]*float64 {
	return map[string]*float64{
		"stored_overlap":    number(f.OverlapDeviation),
		"capped_steps":      number(f.Capped),
		"force_bias":        number(f.Bounded),
		"killed_walkers":    number(f.Killed),
		"effective_walkers": number(f.Efficiency),
		"phase_diffusion":   number(f.PhaseDiffusion),
		"energy_deviation":  number(f.Local.Deviation),
		"energy_spread":     number(f.Local.Ratio),
		"energy_tail":       number(f.Local.Hill),
		"largest_energy":    number(f.Local.Largest),
		"drift":             number(f.Drift),
		"imaginary_energy":  number(f.Imaginary),
		"growth_energy":     number(f.Growth),
	}
}

// worst returns the highest level among the warnings.
func worst(warnings []afqmc.Warning) afqmc.Level {
	var level afqmc.Level
	for _, w := range warnings {
		switch {
		case w.Level == afqmc.Stop:
			return afqmc.Stop
		case w.Level == afqmc.Caution || level == "":
			level = w.Level
		}
	}
	return level
}

// resultDirectory makes the directory for a job's results. Without an explicit
// name it is named after the job, with a number added where one exists; an
// explicit one that holds results is refused unless they may be overwritten.
func resultDirectory(explicit, jobName string, overwrite bool) (string, error) {
	if explicit == "" {
		base := baseName(jobName)
		for n := 1; ; n++ {
			name := base + ".results"
			if n > 1 {
				name = fmt.Sprintf("%s.results-%d", base, n)
			}
			err := os.Mkdir(name, 0o755)
			if err == nil || !errors.Is(err, os.ErrExist) {
				return name, err
			}
		}
	}
	if err := refuseResults(explicit, overwrite); err != nil {
		return "", err
	}
	for _, name := range resultFiles {
		if err := os.Remove(filepath.Join(explicit, name)); err != nil && !errors.Is(err, os.ErrNotExist) {
			return "", err
		}
	}
	return explicit, os.MkdirAll(explicit, 0o755)
}

// resultFiles are what makes a directory one that holds results.
var resultFiles = []string{summaryFile, seriesFile}

// refuseResults refuses a directory that holds results unless they may be
// overwritten.
func refuseResults(dir string, overwrite bool) error {
	for _, name := range resultFiles {
		if _, err := os.Stat(filepath.Join(dir, name)); err == nil && !overwrite {
			return fmt.Errorf("%s: holds results already; choose another directory or add --overwrite", dir)
		}
	}
	return nil
}

// baseName returns the name of a file without directory and extension.
func baseName(name string) string {
	return strings.TrimSuffix(filepath.Base(name), filepath.Ext(name))
}

// checkDirectory refuses an explicit directory that cannot take results, before
// any work is done. It leaves nothing behind.
func checkDirectory(explicit string, overwrite bool) error {
	if explicit == "" {
		return nil
	}
	if err := refuseResults(explicit, overwrite); err != nil {
		return err
	}
	var made []string // innermost first
	for dir := filepath.Clean(explicit); ; dir = filepath.Dir(dir) {
		if _, err := os.Stat(dir); !errors.Is(err, os.ErrNotExist) {
			break
		}
		made = append(made, dir)
	}
	if err := os.MkdirAll(explicit, 0o755); err != nil {
		return err
	}
	probe, err := os.CreateTemp(explicit, ".leadline-*")
	if err != nil {
		return err
	}
	err = errorsFirst(probe.Close(), os.Remove(probe.Name()))
	for _, dir := range made {
		err = errorsFirst(err, os.Remove(dir))
	}
	return err
}

// series writes series.csv row by row; it implements afqmc.Recorder.
type series struct {
	file   *os.File
	writer *csv.Writer
	show   func(afqmc.Row)
	watch  *noiseWatch // nil for computed trials
}

// Observe implements afqmc.Observer.
func (s *series) Observe(w *afqmc.Walk) {
	if s.watch != nil {
		s.watch.observe(w)
	}
}

func newSeries(dir string, show func(afqmc.Row)) (*series, error) {
	file, err := os.Create(filepath.Join(dir, seriesFile))
	if err != nil {
		return nil, err
	}
	s := &series{file: file, writer: csv.NewWriter(file), show: show}
	return s, s.writer.Write([]string{"time", "weight", "numerator", "energy", "growth_energy",
		"effective_walkers", "capped", "killed", "imaginary", "sampled"})
}

// Record writes one row.
func (s *series) Record(r afqmc.Row) error {
	real := func(v float64) string { return strconv.FormatFloat(v, 'g', -1, 64) }
	sampled := "0"
	if r.Sampled {
		sampled = "1"
	}
	s.show(r)
	return s.writer.Write([]string{strconv.FormatFloat(r.Time, 'g', 12, 64), real(r.Weight), real(r.Numerator), real(r.Energy),
		real(r.Growth), real(r.Effective), strconv.FormatInt(r.Capped, 10), strconv.FormatInt(r.Killed, 10),
		real(r.Imaginary), sampled})
}

func (s *series) close() error {
	s.writer.Flush()
	return errorsFirst(s.writer.Error(), s.file.Close())
}

// writeJob writes the job as resolved, with names of files that lead to them
// from the result directory; the embedded example's own files are copied there.
func writeJob(dir string, in *inputs, j *job.Job) error {
	var moved []job.Setting
	for _, file := range j.Files() {
		name := file.Value.(string)
		if in.inside != nil {
			content, err := in.read(name)
			if err != nil {
				return err
			}
			err = writeFile(filepath.Join(dir, name), func(w io.Writer) error {
				_, err := w.Write(content)
				return err
			})
			if err != nil {
				return err
			}
			continue
		}
		if filepath.IsAbs(name) {
			continue
		}
		from, err := filepath.Abs(dir)
		if err != nil {
			return err
		}
		to, err := filepath.Abs(in.path(name))
		if err != nil {
			return err
		}
		if relative, err := filepath.Rel(from, to); err == nil {
			to = filepath.ToSlash(relative)
		}
		moved = append(moved, job.Setting{Key: file.Key, Value: to})
	}
	there, err := j.With(moved...)
	if err != nil {
		return err
	}
	return writeFile(filepath.Join(dir, jobFile), there.Write)
}

func writeSummary(dir string, s *summary) error {
	return writeFile(filepath.Join(dir, summaryFile), func(w io.Writer) error { return encode(w, s) })
}

func encode(w io.Writer, v any) error {
	e := json.NewEncoder(w)
	e.SetIndent("", "  ")
	return e.Encode(v)
}
