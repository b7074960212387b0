package main

import (
	"context"
	"fmt"
	"io"
	"math"
	"path/filepath"
	"runtime"
	"strconv"
	"strings"

	"github.com/spf13/cobra"
	"gonum.org/v1/gonum/mat"

	"leadline/cmd/leadline/job"
	"leadline/hamiltonian"
	"leadline/hamiltonian/exact"
	occupations "leadline/hamiltonian/strings"
	"leadline/trial/expansion"
	"leadline/trial/measured"
	"leadline/trial/measured/amplitude"
	"leadline/trial/measured/check"
	"leadline/trial/measured/collapse"
	"leadline/trial/measured/record"
	"leadline/trial/measured/simulate"
)

func measureCommand(stderr io.Writer) *cobra.Command {
	c := &cobra.Command{
		Use:   "measure",
		Short: "Records of randomized measurements: simulate, check, collapse",
		Args: func(cmd *cobra.Command, args []string) error {
			if len(args) > 0 {
				return unknownCommand(cmd, args[0])
			}
			return nil
		},
		RunE: func(cmd *cobra.Command, _ []string) error { return cmd.Help() },
	}
	c.AddCommand(simulateCommand(stderr), checkCommand(stderr), collapseCommand(stderr))
	return c
}

func simulateCommand(stderr io.Writer) *cobra.Command {
	var snapshots int
	var output, noise string
	var packed, calibration, overwrite, quiet bool
	c := &cobra.Command{
		Use:   "simulate JOB.toml --snapshots N -o RECORD",
		Short: "Write a record of the job's trial as a device would return it",
		Args:  arguments(1, 1),
		RunE: func(c *cobra.Command, args []string) error {
			if output == "" || snapshots < 1 {
				return usageError{fmt.Errorf("--snapshots N (at least 1) and -o RECORD are needed")}
			}
			if err := mayWrite(output, overwrite); err != nil {
				return err
			}
			in, j, _, err := loadJob(args[0])
			if err != nil {
				return err
			}
			o, err := simulation(j, snapshots)
			if err != nil {
				return err
			}
			o.Calibration = calibration
			if err := readNoise(noise, &o); err != nil {
				return err
			}
			return simulateRecord(c.Context(), j, in, o, output, packed, c.OutOrStdout(), display{out: stderr, quiet: quiet})
		},
	}
	f := c.Flags()
	f.IntVar(&snapshots, "snapshots", 0, "total number of shots")
	f.StringVarP(&output, "output", "o", "", "record to write")
	f.StringVar(&noise, "noise", "", "device noise: readout=P (each bit flips), flip0=P, flip1=P, depolarizing=P, comma-separated")
	f.BoolVar(&packed, "packed", false, "write the packed form, not text")
	f.BoolVar(&calibration, "calibration", false, "measure the vacuum: a calibration record")
	f.BoolVar(&overwrite, "overwrite", false, "replace a file that exists")
	f.BoolVar(&quiet, "quiet", false, "no progress on stderr")
	return c
}

// simulation turns the job's [measurement] into options.
func simulation(j *job.Job, snapshots int) (simulate.Options, error) {
	m := j.Measurement
	if snapshots%m.ShotsPerSetting != 0 {
		return simulate.Options{}, fmt.Errorf("--snapshots is %d, expected a multiple of measurement.shots_per_setting = %d", snapshots, m.ShotsPerSetting)
	}
	return simulate.Options{
		Ensemble: record.Ensemble(m.Ensemble), Settings: snapshots / m.ShotsPerSetting, ShotsPerSetting: m.ShotsPerSetting,
		Seed: uint64(m.Seed), Workers: runtime.GOMAXPROCS(0),
	}, nil
}

// readNoise reads the --noise flag; readout errors are set for every qubit later.
func readNoise(text string, o *simulate.Options) error {
	if text == "" {
		return nil
	}
	var flip simulate.Flip
	for _, part := range strings.Split(text, ",") {
		key, value, _ := strings.Cut(part, "=")
		p, err := strconv.ParseFloat(value, 64)
		if err != nil || !(p >= 0 && p <= 1) {
			return usageError{fmt.Errorf("--noise: %q, expected NAME=P with a probability P", part)}
		}
		switch key {
		case "readout":
			flip = simulate.Flip{Zero: p, One: p}
		case "flip0":
			flip.Zero = p
		case "flip1":
			flip.One = p
		case "depolarizing":
			o.Depolarizing = p
		default:
			return usageError{fmt.Errorf("--noise: %q, expected readout, flip0, flip1 or depolarizing", key)}
		}
	}
	if flip != (simulate.Flip{}) {
		o.Readout = []simulate.Flip{flip}
	}
	return nil
}

// simulateRecord builds the job's trial and measures it.
func simulateRecord(ctx context.Context, j *job.Job, in *inputs, o simulate.Options, output string, packed bool, stdout io.Writer, shown display) error {
	s, err := newSystem(ctx, j, in, shown.stage)
	if err != nil {
		return err
	}
	g, err := newGuidance(ctx, j, in, s, shown.stage)
	if err != nil {
		return err
	}
	e := g.expansion
	switch {
	case e == nil:
		return fmt.Errorf("trial.kind is %q, expected an expansion: its window is what is measured", j.Trial.Kind)
	case e.Columns != nil:
		return fmt.Errorf("the window's orbitals are not those of a file: fix them first with leadline prepare JOB.toml -o FILE --expansion FILE, then use source = \"prepared\" and trial.file")
	}
	state, best := measuredState(e)
	if j.Measurement.Row == "reference" {
		o.Reference = best
	}
	if fingerprint := s.fingerprint(in); fingerprint != "" {
		o.HamiltonianSHA256, o.OrbitalsSHA256 = fingerprint, fingerprint
	}
	o.Trial = e.Origin
	o.Active = spinOrbitals(e)
	if x, ok := g.guide.Expectations(); ok {
		energy := x.Energy(s.hamiltonian)
		o.TrialEnergy = &energy
	}
	if len(o.Readout) == 1 {
		probe := o
		probe.Readout = nil
		header, err := simulate.NewHeader(state, &probe)
		if err != nil {
			return err
		}
		flip := o.Readout[0]
		o.Readout = make([]simulate.Flip, header.Qubits)
		for q := range o.Readout {
			o.Readout[q] = flip
		}
	}
	header, err := simulate.NewHeader(state, &o)
	if err != nil {
		return err
	}
	err = writeFile(output, func(w io.Writer) error {
		open := record.NewTextWriter
		if packed {
			open = record.NewPackedWriter
		}
		out, err := open(w, header)
		if err != nil {
			return err
		}
		var tell func(int64)
		err = simulate.Run(ctx, state, o, out.Write, func(done, total int64) {
			if tell == nil {
				tell = shown.stage("measuring", total)
			}
			tell(done)
		})
		if err != nil {
			return err
		}
		return out.Close()
	})
	if err != nil {
		return err
	}
	_, err = fmt.Fprintf(stdout, "%s: %d qubits, %s, %d settings of %d shots\nnow: leadline measure check %s\n",
		output, header.Qubits, header.Ensemble, o.Settings, o.ShotsPerSetting, output)
	return err
}

// measuredState returns the window's state and its largest determinant.
func measuredState(e *expansion.Expansion) (*simulate.State, *[2]uint64) {
	up, down := occupations.New(e.Active, e.Up), occupations.New(e.Active, e.Down)
	s := &simulate.State{Orbitals: e.Active, Up: e.Up, Down: e.Down, Amplitudes: make([]complex128, up.Len()*down.Len())}
	best, largest := &[2]uint64{}, -1.0
	for _, d := range e.Determinants {
		s.Amplitudes[up.Index(d.Up)*down.Len()+down.Index(d.Down)] = d.Amplitude
		if a := real(d.Amplitude)*real(d.Amplitude) + imag(d.Amplitude)*imag(d.Amplitude); a > largest {
			*best, largest = [2]uint64{d.Up, d.Down}, a
		}
	}
	return s, best
}

// spinOrbitals names core and active spin orbitals in blocked order.
func spinOrbitals(e *expansion.Expansion) *record.Window {
	w := &record.Window{Core: []int{}, Active: []int{}}
	for spin := range 2 {
		for p := range e.Core {
			w.Core = append(w.Core, spin*e.Orbitals+p)
		}
		for p := range e.Active {
			w.Active = append(w.Active, spin*e.Orbitals+e.Core+p)
		}
	}
	return w
}

func checkCommand(stderr io.Writer) *cobra.Command {
	var jobName string
	var asJSON, quiet bool
	c := &cobra.Command{
		Use:   "check RECORD",
		Short: "Validate a record and print its figures of merit",
		Args:  arguments(1, 1),
		RunE: func(c *cobra.Command, args []string) error {
			return checkRecord(c.Context(), args[0], jobName, asJSON, c.OutOrStdout(), stderr, display{out: stderr, quiet: quiet})
		},
	}
	c.Flags().StringVar(&jobName, "job", "", "job whose Hamiltonian the record must belong to")
	c.Flags().BoolVar(&asJSON, "json", false, "print one JSON object")
	c.Flags().BoolVar(&quiet, "quiet", false, "no progress on stderr")
	return c
}

func checkRecord(ctx context.Context, name, jobName string, asJSON bool, stdout, stderr io.Writer, shown display) error {
	r, err := openRecord(name)
	if err != nil {
		return err
	}
	defer r.close()
	report, estimate, err := check.Run(ctx, r.source, onThisMachine(collapse.Options{}, "reading "+filepath.Base(name), shown.stage))
	if code := record.CodeOf(err); code != "" {
		fmt.Fprintln(stderr, err) // begins with its code
		return exitError{exitFailed}
	}
	if err != nil {
		return err
	}
	if jobName != "" {
		if err := compareJob(ctx, r, jobName, report, estimate, shown); err != nil {
			return err
		}
	}
	if asJSON {
		err = encode(stdout, report)
	} else {
		err = printReport(stdout, name, report)
	}
	if err == nil && !report.Valid {
		return exitError{exitFailed}
	}
	return err
}

// compareJob compares fingerprint and energy of the record with a job.
func compareJob(ctx context.Context, r *recordFile, jobName string, report *check.Report, estimate *amplitude.Estimate, shown display) error {
	in, j, _, err := loadJob(jobName)
	if err != nil {
		return err
	}
	s, err := newSystem(ctx, j, in, shown.stage)
	if err != nil {
		return err
	}
	header, err := r.header()
	if err != nil {
		return err
	}
	if !report.CompareFingerprint(header, s.fingerprint(in)) {
		report.Valid = false
	}
	m := &measuredTrial{name: r.name, orbitals: s.hamiltonian.Orbitals}
	if err := m.place(header, j.Trial.Active, s.hamiltonian.Sector); err != nil {
		return fmt.Errorf("%s: %w", r.name, err)
	}
	return m.compareEnergy(s.hamiltonian, report, estimate)
}

// compareEnergy compares the energy of an estimate that nothing was done to with
// the one that its record declares.
func (m *measuredTrial) compareEnergy(h *hamiltonian.Hamiltonian, report *check.Report, estimate *amplitude.Estimate) error {
	window, err := windowHamiltonian(h, m)
	if err != nil {
		return err
	}
	operator, err := exact.NewOperator(window)
	if err != nil {
		return err
	}
	report.CompareEnergy(estimate, func(dst, src []complex128) { applyComplex(operator, dst, src) })
	return nil
}

// windowHamiltonian folds the core in and keeps the measured orbitals.
func windowHamiltonian(h *hamiltonian.Hamiltonian, m *measuredTrial) (*hamiltonian.Hamiltonian, error) {
	keep := mat.NewDense(h.Orbitals, m.core+m.active, nil)
	for p := range m.core + m.active {
		keep.Set(p, p, 1)
	}
	if m.columns != nil {
		keep = m.columns
	}
	return h.Rotate(keep).FreezeCore(m.core)
}

// applyComplex applies a real operator to real and imaginary parts.
func applyComplex(o *exact.Operator, dst, src []complex128) {
	part, image := make([]float64, len(src)), make([]float64, len(src))
	for plane := range 2 {
		for i, v := range src {
			if part[i] = real(v); plane == 1 {
				part[i] = imag(v)
			}
		}
		o.Apply(image, part)
		for i, v := range image {
			if plane == 0 {
				dst[i] = complex(v, 0)
			} else {
				dst[i] += complex(0, v)
			}
		}
	}
}

func printReport(w io.Writer, name string, r *check.Report) error {
	var b strings.Builder
	row := r.Row
	if reference, ok := row.(map[string][]int); ok {
		row = fmt.Sprintf("of the determinant %v", reference["occupied"])
	}
	fmt.Fprintf(&b, "%s: record of %d qubits, ensemble %s, row %v\n\n", name, r.Qubits, r.Ensemble, row)
	fmt.Fprintf(&b, "  settings            %d\n  shots               %d\n", r.Settings, r.Shots)
	fmt.Fprintf(&b, "  determinants        %d\n", r.Determinants)
	fmt.Fprintf(&b, "  kappa               %s (1 without noise)\n", quoted(r.Kappa, r.KappaError))
	fmt.Fprintf(&b, "  effective shots     %.4g\n", r.EffectiveShots)
	fmt.Fprintf(&b, "  variance per shot   %.4g, expected %s", r.Variance, quoted(r.VarianceExpected, r.VarianceExpectedError))
	if r.Shots > r.Settings {
		fmt.Fprintf(&b, " with one shot per setting, %.3g here", float64(r.Shots)/float64(r.Settings))
	}
	fmt.Fprintln(&b)
	fmt.Fprintf(&b, "  infidelity          %.3g, before any projection\n", r.Infidelity)
	for _, x := range r.Rejected {
		fmt.Fprintf(&b, "  no contribution     %s of the shots (%s), noiseless %.4g\n", quoted(x.Fraction, x.Error), x.Cause, x.Expected)
	}
	for _, x := range r.Readings {
		fmt.Fprintf(&b, "  read as %-11s kappa %s\n", x.Name, quoted(x.Kappa, x.KappaError))
	}
	if r.TopOverlap != nil {
		fmt.Fprintf(&b, "  with declared       overlap %s\n", quoted(r.TopOverlap.Value, r.TopOverlap.Error))
	}
	if r.Energy != nil {
		fmt.Fprintf(&b, "  energy of the state %s E_h, noise removed", quoted(r.Energy.Value, r.Energy.Error))
		if r.DeclaredEnergy != nil {
			fmt.Fprintf(&b, "; declared %s", quoted(*r.DeclaredEnergy, 0))
		}
		fmt.Fprintln(&b)
	}
	if len(r.Warnings) > 0 {
		fmt.Fprintf(&b, "\n  warnings\n")
		for _, x := range r.Warnings {
			fmt.Fprintf(&b, "    %-8s %s: %s\n", x.Level, x.Check, x.Text)
		}
	}
	if r.Valid {
		fmt.Fprintf(&b, "\n  valid\n")
	} else {
		fmt.Fprintf(&b, "\n  not valid for use\n")
	}
	_, err := io.WriteString(w, b.String())
	return err
}

func collapseCommand(stderr io.Writer) *cobra.Command {
	var output, calibration, irreps string
	var p projections
	var spin float64
	var batches, orbitals, core, irrep int
	var refine, overwrite, quiet bool
	c := &cobra.Command{
		Use:   "collapse RECORD -o EXPANSION",
		Short: "Compress a record into estimated amplitudes with their errors",
		Long: "Compress a record into estimated amplitudes with their errors. Without further\n" +
			"flags only the numbers of electrons are imposed; every projection is opt-in and\n" +
			"reports what it removed.",
		Args: arguments(1, 1),
		RunE: func(c *cobra.Command, args []string) error {
			if output == "" {
				return usageError{fmt.Errorf("-o EXPANSION is needed")}
			}
			if batches < 2 {
				return usageError{fmt.Errorf("--batches is %d, expected at least 2", batches)}
			}
			if err := mayWrite(output, overwrite); err != nil {
				return err
			}
			if c.Flags().Changed("spin") {
				if spin < 0 || spin*2 != math.Trunc(spin*2) {
					return usageError{fmt.Errorf("--spin is %g, expected a multiple of one half", spin)}
				}
				p.spin = &spin
			}
			r, err := openRecord(args[0])
			if err != nil {
				return err
			}
			defer r.close()
			shown := display{out: stderr, quiet: quiet}
			channel, err := readCalibration(calibration)
			if err != nil {
				return err
			}
			options := collapse.Options{Batches: batches, Calibration: channel}
			e, err := runCollapse(c.Context(), r, options, shown.stage)
			if err == nil && refine {
				e, err = collapse.Refine(c.Context(), r.source, e, onThisMachine(options, "refining", shown.stage))
			}
			if err != nil {
				if record.CodeOf(err) != "" {
					fmt.Fprintln(stderr, err)
					return exitError{exitFailed}
				}
				return err
			}
			if irreps != "" {
				labels, err := readLabels(irreps, e.Up.Orbitals())
				if err != nil {
					return err
				}
				e.KeepIrrep(labels, irrep)
			}
			if err := p.apply(e); err != nil {
				return err
			}
			header, err := r.header()
			if err != nil {
				return err
			}
			m := &measuredTrial{core: core, orbitals: orbitals}
			if m.orbitals == 0 {
				m.orbitals = core + e.Up.Orbitals()
			}
			x := measured.Expansion(e, m.orbitals, m.core)
			if header.HamiltonianSHA256 != record.UnknownHash {
				x.Basis = header.HamiltonianSHA256
			}
			if err := writeFile(output, x.Write); err != nil {
				return err
			}
			noise := e.Noise()
			fmt.Fprintf(c.OutOrStdout(), "%s: %d determinants, norm %.6g, of it shot noise %.3g\n", output, len(x.Determinants), x.Norm(), math.Sqrt(noise))
			for _, text := range stepTexts(e) {
				fmt.Fprintf(c.OutOrStdout(), "  %s\n", text)
			}
			return nil
		},
	}
	f := c.Flags()
	f.StringVarP(&output, "output", "o", "", "expansion to write")
	f.IntVar(&batches, "batches", 32, "batches of settings for the jackknife")
	f.IntVar(&core, "core", 0, "doubly occupied orbitals below the measured ones")
	f.IntVar(&orbitals, "orbitals", 0, "orbitals of the Hamiltonian (default: core and measured ones)")
	f.StringVar(&calibration, "calibration", "", "calibration record of the same device and circuits")
	f.BoolVar(&p.real, "real", false, "remove the global phase and imaginary parts")
	f.Float64Var(&spin, "spin", 0, "keep this total spin S only")
	f.StringVar(&irreps, "irreps", "", "comma-separated irrep of each measured orbital (product = exclusive or), to keep --irrep only")
	f.IntVar(&irrep, "irrep", 0, "irrep of the state")
	f.Float64Var(&p.significance, "significance", 0, "drop amplitudes below so many standard errors (biases)")
	f.BoolVar(&refine, "refine", false, "one step towards the dominant eigenvector of the mean snapshot (not linear)")
	f.BoolVar(&overwrite, "overwrite", false, "replace a file that exists")
	f.BoolVar(&quiet, "quiet", false, "no progress on stderr")
	return c
}

func readLabels(text string, orbitals int) ([]int, error) {
	parts := strings.Split(text, ",")
	if len(parts) != orbitals {
		return nil, fmt.Errorf("--irreps names %d orbitals, the record has %d", len(parts), orbitals)
	}
	out := make([]int, len(parts))
	for i, part := range parts {
		n, err := strconv.Atoi(strings.TrimSpace(part))
		if err != nil || n < 0 || n > 7 {
			return nil, fmt.Errorf("--irreps: %q, expected a number from 0 to 7", part)
		}
		out[i] = n
	}
	return out, nil
}
