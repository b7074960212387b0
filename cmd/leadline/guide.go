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
	// measured is the record behind it, if it was measured.
	measured *measuredTrial
}

// newGuidance builds the trial that a job asks for.
func newGuidance(ctx context.Context, j *job.Job, in *inputs, s *system, progress progressFunc) (*guidance, error) {
	g := &guidance{start: s.start.occupied, reference: j.Trial.Orbitals}
	var source trial.Source
	var err error
	switch j.Trial.Kind {
	case "determinant":
		source, err = g.determinant(ctx, j, in, s)
	case "expansion":
		source, err = g.expand(ctx, j, in, s)
	case "measured":
		source, err = g.measure(ctx, j, in, s, progress)
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
	reference, err := g.solveReference(ctx, j, in, s)
	if err != nil {
		return nil, err
	}
	return determinant.New(s.hamiltonian.Orbitals, reference)
}

// solveReference returns the occupied orbitals of the mean field that the job
// names.
func (g *guidance) solveReference(ctx context.Context, j *job.Job, in *inputs, s *system) (trial.Orbitals, error) {
	name := j.Trial.Orbitals
	if name == "file" {
		set, err := readOrbitals(j, in, s.hamiltonian)
		if err != nil {
			return trial.Orbitals{}, err
		}
		g.notes = append(g.notes, set.Notes...)
		o := orbitalsOf(set)
		reference, err := determinant.New(s.hamiltonian.Orbitals, o)
		if err != nil {
			return trial.Orbitals{}, fmt.Errorf("%s: %w", in.path(j.Trial.OrbitalsFile), err)
		}
		g.meanField = reference.Energy(s.hamiltonian)
		return o, nil
	}
	if name == s.start.kind.String() || (name == "rohf" && s.start.kind == meanfield.RHF) {
		g.meanField = s.start.energy
		if j.Trial.Kind == "determinant" {
			if err := g.judge(ctx, name, s); err != nil {
				return trial.Orbitals{}, err
			}
		}
		return s.start.occupied, nil
	}
	kind, h := meanfield.UHF, s.hamiltonian
	if name != "uhf" {
		kind, h = meanfield.ROHF, s.spinFree
		if name == "rhf" {
			kind = meanfield.RHF
		}
	}
	solution, err := meanfield.Solve(ctx, h, kind, meanfield.Options{})
	if err != nil {
		return trial.Orbitals{}, fmt.Errorf("%s: %w", name, err)
	}
	g.meanField = solution.Energy
	g.notes = append(g.notes, solution.Notes...)
	return occupied(solution), nil
}

// Curvature towards UHF, in the Hamiltonian's unit, below which a restricted
// trial is doubtful, and below which its runs were wrong by tens of millihartree
// on molecules with known energies (stretched hydrogen rings, half-filled lattices).
const (
	unstableCaution = -0.05
	unstableStop    = -0.3
)

// judge warns of a restricted trial that is unstable towards UHF: it misses the
// state's leading correlation and may have nodes where the state has none, which
// no figure of the walk need show.
func (g *guidance) judge(ctx context.Context, name string, s *system) error {
	if !s.spinFree.SpinFree() {
		return nil
	}
	if s.start.external == 0 {
		density := [2]*mat.SymDense{}
		for spin := range density {
			density[spin] = mat.NewSymDense(s.hamiltonian.Orbitals, nil)
			if c := s.start.occupied.Re[spin]; c != nil && !c.IsEmpty() {
				density[spin].SymOuterK(1, c)
			}
		}
		solution, err := meanfield.Solve(ctx, s.spinFree, s.start.kind, meanfield.Options{Guess: density, Starts: -1})
		if err != nil {
			return err
		}
		s.start.external = solution.External
	}
	level := afqmc.Level("")
	switch e := s.start.external; {
	case e < unstableStop:
		level = afqmc.Stop
	case e < unstableCaution:
		level = afqmc.Caution
	default:
		return nil
	}
	g.warnings = append(g.warnings, afqmc.Warning{Check: "trial_stability", Level: level, Figure: s.start.external,
		Text: fmt.Sprintf("the %s trial is unstable towards different orbitals for up and down electrons (curvature %.2g): a lower uhf determinant exists; use it or an expansion", name, s.start.external)})
	return nil
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
		return nil, fmt.Errorf("trial.orbitals_file: %w", err)
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
