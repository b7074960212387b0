package main

import (
	"context"
	"fmt"
	"io"
	"runtime"
	"strconv"
	"strings"

	"github.com/spf13/cobra"

	"leadline/cmd/leadline/job"
	occupations "leadline/hamiltonian/strings"
	"leadline/trial/expansion"
	"leadline/trial/measured/record"
	"leadline/trial/measured/simulate"
)

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
