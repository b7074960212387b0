package main

import (
	"context"
	"fmt"

	"gonum.org/v1/gonum/mat"

	"leadline/afqmc"
	"leadline/cmd/leadline/job"
	"leadline/hamiltonian"
	"leadline/hamiltonian/meanfield"
	"leadline/trial"
	"leadline/trial/determinant"
	"leadline/trial/expansion"
)

// guidance is the trial of a job, bound to its Hamiltonian.
type guidance struct {
	guide *trial.Guide
	start trial.Orbitals
	// meanField is the energy of the reference that the job names.
	meanField float64
	reference string // rhf, rohf, uhf or file
	notes     []string
	warnings  []afqmc.Warning
	// expansion is the trial where it is one.
	expansion *expansion.Expansion
}

// newGuidance builds the trial that a job asks for.
func newGuidance(ctx context.Context, j *job.Job, in *inputs, s *system) (*guidance, error) {
	g := &guidance{start: occupied(s.start), reference: j.Trial.Orbitals}
	var source trial.Source
	var err error
	switch j.Trial.Kind {
	case "determinant":
		source, err = g.determinant(ctx, j, in, s)
	case "expansion":
		source, err = g.expand(ctx, j, in, s)
	default:
		err = fmt.Errorf("trial kind %q is not available in this version", j.Trial.Kind)
	}
	if err != nil {
		return nil, err
	}
	bind := trial.NewGuide
	if j.Projection.Precision == "single" {
		bind = trial.NewSingleGuide
	}
	if g.guide, err = bind(s.hamiltonian, source, afqmc.ExchangeMemory); err != nil {
		return nil, err
	}
	return g, afqmc.CheckTrial(g.guide)
}

// determinant returns the reference determinant itself as the trial.
func (g *guidance) determinant(ctx context.Context, j *job.Job, in *inputs, s *system) (trial.Source, error) {
	if j.Trial.Orbitals == "file" {
		set, err := readOrbitals(j, in, s.hamiltonian)
		if err != nil {
			return nil, err
		}
		g.notes = append(g.notes, set.Notes...)
		source, err := determinant.New(s.hamiltonian.Orbitals, orbitalsOf(set))
		if err != nil {
			return nil, fmt.Errorf("%s: %w", in.path(j.Trial.OrbitalsFile), err)
		}
		g.meanField = source.Energy(s.hamiltonian)
		return source, nil
	}
	reference, err := g.solveReference(ctx, j, s)
	if err != nil {
		return nil, err
	}
	return determinant.New(s.hamiltonian.Orbitals, occupied(reference))
}

// solveReference solves the mean field that the job names.
func (g *guidance) solveReference(ctx context.Context, j *job.Job, s *system) (*meanfield.Solution, error) {
	reference, err := s.reference(ctx, j.Trial.Orbitals)
	if err != nil {
		return nil, err
	}
	g.meanField = reference.Energy
	g.notes = append(g.notes, reference.Notes...)
	return reference, nil
}

// reference solves the mean field of the given name.
func (s *system) reference(ctx context.Context, name string) (*meanfield.Solution, error) {
	kind := map[string]meanfield.Kind{"rhf": meanfield.RHF, "rohf": meanfield.ROHF, "uhf": meanfield.UHF}[name]
	h := s.hamiltonian
	if kind != meanfield.UHF {
		if kind == s.start.Kind || (kind == meanfield.ROHF && h.Up == h.Down) {
			return s.start, nil
		}
		h = s.spinFree
	}
	solution, err := meanfield.Solve(ctx, h, kind, meanfield.Options{})
	if err != nil {
		return nil, fmt.Errorf("%s: %w", name, err)
	}
	return solution, nil
}

// occupied returns the occupied orbitals of a solution; restricted ones of a
// closed shell share one matrix.
func occupied(s *meanfield.Solution) trial.Orbitals {
	up := s.Occupied(hamiltonian.Up)
	if s.Kind != meanfield.UHF && s.Sector.Up == s.Sector.Down {
		return trial.RealOrbitals(up, up)
	}
	return trial.RealOrbitals(up, s.Occupied(hamiltonian.Down))
}

// readOrbitals reads the job's orbital file and checks it against the sector.
func readOrbitals(j *job.Job, in *inputs, h *hamiltonian.Hamiltonian) (*meanfield.OrbitalSet, error) {
	name := j.Trial.OrbitalsFile
	file, _, err := in.open(name)
	if err != nil {
		return nil, err
	}
	defer file.Close()
	set, err := meanfield.ReadOrbitals(file, in.path(name))
	if err != nil {
		return nil, err
	}
	if set.Basis != h.Orbitals || set.Electrons(hamiltonian.Up) != h.Up || set.Electrons(hamiltonian.Down) != h.Down {
		return nil, fmt.Errorf("%s: orbitals for %d basis orbitals, %d up and %d down electrons, expected %d, %d and %d",
			in.path(name), set.Basis, set.Electrons(hamiltonian.Up), set.Electrons(hamiltonian.Down), h.Orbitals, h.Up, h.Down)
	}
	return set, nil
}

// orbitalsOf splits complex orbitals into planes; real ones have no second.
func orbitalsOf(set *meanfield.OrbitalSet) trial.Orbitals {
	if columns, exact := set.Real(); exact {
		return trial.RealOrbitals(columns[0], columns[1])
	}
	var o trial.Orbitals
	for spin, c := range set.Occupied {
		rows, n := c.Dims()
		if n == 0 {
			continue
		}
		o.Re[spin], o.Im[spin] = mat.NewDense(rows, n, nil), mat.NewDense(rows, n, nil)
		for p := range rows {
			for i := range n {
				o.Re[spin].Set(p, i, real(c.At(p, i)))
				o.Im[spin].Set(p, i, imag(c.At(p, i)))
			}
		}
	}
	return o
}
