package main

import (
	"fmt"
	"io"
	"math"
	"strconv"
	"strings"

	"github.com/spf13/cobra"

	"leadline/trial/measured"
	"leadline/trial/measured/collapse"
	"leadline/trial/measured/record"
)

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
