package main

import (
	"context"
	"fmt"
	"math"

	"gonum.org/v1/gonum/mat"

	"leadline/afqmc"
	"leadline/cmd/leadline/job"
	"leadline/hamiltonian"
	"leadline/hamiltonian/exact"
	"leadline/hamiltonian/meanfield"
	"leadline/trial"
	"leadline/trial/expansion"
)

// expand returns the CI expansion that the job describes as the trial.
func (g *guidance) expand(ctx context.Context, j *job.Job, in *inputs, s *system) (trial.Source, error) {
	reference, err := g.solveReference(ctx, j, in, s)
	if err != nil {
		return nil, err
	}
	var e *expansion.Expansion
	if j.Trial.File != "" {
		e, err = g.readExpansion(j.Trial.File, j.Trial.ForeignBasis, in, s)
	} else {
		var w *window
		if w, err = newWindow(ctx, j.Trial.Active, j.Trial.Window, s, reference); err == nil {
			e, err = w.solve(ctx, s)
		}
	}
	if err != nil {
		return nil, err
	}
	if e, err = alter(e, j); err != nil {
		return nil, err
	}
	g.expansion = e
	return expansion.New(e)
}

// alter truncates the expansion and adds noise as the job asks.
func alter(e *expansion.Expansion, j *job.Job) (*expansion.Expansion, error) {
	if j.Trial.Largest > 0 {
		e = e.Truncate(j.Trial.Largest)
	}
	if j.Trial.Noise > 0 {
		return e.AddNoise(j.Trial.Noise, uint64(j.Trial.NoiseSeed))
	}
	return e, nil
}

// readExpansion reads an expansion file and refuses one for other orbitals.
func (g *guidance) readExpansion(name string, foreign bool, in *inputs, s *system) (*expansion.Expansion, error) {
	file, _, err := in.open(name)
	if err != nil {
		return nil, err
	}
	defer file.Close()
	e, err := expansion.Read(file, in.path(name))
	if err != nil {
		return nil, err
	}
	if e.Sector() != s.hamiltonian.Sector {
		h, x := s.hamiltonian, e.Sector()
		return nil, fmt.Errorf("%s: expansion of %d orbitals, %d up and %d down electrons, expected %d, %d and %d",
			in.path(name), x.Orbitals, x.Up, x.Down, h.Orbitals, h.Up, h.Down)
	}
	return e, g.checkBasis(in.path(name), e.Basis, foreign, in, s)
}

// checkBasis compares the fingerprint of the orbitals that a trial was made for
// with that of the job's Hamiltonian.
func (g *guidance) checkBasis(name, basis string, foreign bool, in *inputs, s *system) error {
	own := s.fingerprint(in)
	switch {
	case basis == "":
		g.warnings = append(g.warnings, afqmc.Warning{Check: "orbital_basis", Level: afqmc.Note,
			Text: fmt.Sprintf("%s does not say which orbitals it is for; those of the job are taken", name)})
	case basis == own:
	case foreign:
		g.warnings = append(g.warnings, afqmc.Warning{Check: "orbital_basis", Level: afqmc.Caution,
			Text: fmt.Sprintf("%s was made for other orbitals (fingerprint %.12s…); used all the same, as foreign_basis asks", name, basis)})
	case own == "":
		return fmt.Errorf("%s is for the orbitals of a file with fingerprint %.12s…, but no file fixes those of this job; use that file as the hamiltonian (source integrals or prepared, frozen_core = 0)", name, basis)
	default:
		return fmt.Errorf("%s is for the orbitals of a file with fingerprint %.12s…, expected that of the job's %s, %.12s…; foreign_basis = true overrides this", name, basis, s.basisFile, own)
	}
	return nil
}

// window is a set of core and active orbitals.
type window struct {
	orbitals     *mat.Dense // M×M, columns: core, active, rest
	core, active int
	h            *hamiltonian.Hamiltonian // of the active electrons, core folded in
}

// newWindow places [electrons, orbitals] in natural orbitals of the reference, or
// in canonical ones of the spin-pure mean field.
func newWindow(ctx context.Context, space job.Space, kind string, s *system, reference trial.Orbitals) (w *window, err error) {
	h := s.hamiltonian
	w = &window{active: space.Orbitals}
	outside := h.Up + h.Down - space.Electrons
	if outside < 0 {
		return nil, fmt.Errorf("trial.active: %d electrons in the window, expected at most %d", space.Electrons, h.Up+h.Down)
	}
	if outside%2 != 0 {
		return nil, fmt.Errorf("trial.active: %d electrons in the window leave %d of %d outside, expected an even number of them", space.Electrons, outside, h.Up+h.Down)
	}
	w.core = outside / 2
	switch {
	case w.core > min(h.Up, h.Down):
		return nil, fmt.Errorf("trial.active: %d electrons are too few for %d unpaired ones", space.Electrons, abs(h.Up-h.Down))
	case w.core+w.active > h.Orbitals:
		return nil, fmt.Errorf("trial.active: %d core and %d active orbitals, expected at most %d in all", w.core, w.active, h.Orbitals)
	case h.Up-w.core > w.active:
		return nil, fmt.Errorf("trial.active: %d active orbitals do not hold %d up electrons", w.active, h.Up-w.core)
	}
	if w.core == 0 && w.active == h.Orbitals {
		// The whole space: its own orbitals are as good as any, and cheaper.
		w.orbitals, w.h = nil, h
		return w, nil
	}
	if kind == "natural" {
		if w.orbitals, err = s.naturalOrbitals(reference); err != nil {
			return nil, err
		}
	} else if w.orbitals, err = s.canonicalOrbitals(ctx); err != nil {
		return nil, err
	}
	folded, err := h.Rotate(w.orbitals).FreezeCore(w.core)
	if err != nil {
		return nil, fmt.Errorf("trial.active: %w", err)
	}
	keep := mat.NewDense(folded.Orbitals, w.active, nil)
	for p := range w.active {
		keep.Set(p, p, 1)
	}
	w.h = folded.Rotate(keep)
	return w, ctx.Err()
}

// canonicalOrbitals returns all orbitals of the start by energy.
func (s *system) canonicalOrbitals(ctx context.Context) (*mat.Dense, error) {
	if s.start.orbitals == nil {
		solution, err := meanfield.Solve(ctx, s.spinFree, s.start.kind, meanfield.Options{})
		if err != nil {
			return nil, err
		}
		s.start.orbitals = solution.Orbitals[hamiltonian.Up]
	}
	return s.start.orbitals, nil
}

// naturalOrbitals returns those of a reference's density, most occupied first.
func (s *system) naturalOrbitals(reference trial.Orbitals) (*mat.Dense, error) {
	if !reference.Real() {
		return nil, fmt.Errorf("trial.window: natural orbitals need real reference orbitals")
	}
	solution := &meanfield.Solution{Kind: meanfield.UHF, Sector: s.hamiltonian.Sector}
	for spin := range 2 {
		n := reference.Columns(spin)
		solution.Orbitals[spin] = mat.NewDense(s.hamiltonian.Orbitals, s.hamiltonian.Orbitals, nil)
		for j := range n {
			for p := range s.hamiltonian.Orbitals {
				solution.Orbitals[spin].Set(p, j, reference.Re[spin].At(p, j))
			}
		}
	}
	orbitals, _ := meanfield.NaturalOrbitals(solution, s.spinFree)
	return orbitals, nil
}

func abs(n int) int {
	if n < 0 {
		return -n
	}
	return n
}

// windowTolerance is the residual left in the state of a window, small enough for
// amplitudes that are equal by symmetry to tie when the largest are kept.
const windowTolerance = 1e-8

// solve returns the lowest state in the window with the spin of the start.
func (w *window) solve(ctx context.Context, s *system) (*expansion.Expansion, error) {
	determinants, bytes := exact.Estimate(w.h.Sector, 1)
	if err := checkMemory(bytes, fmt.Sprintf("the window of %d determinants", determinants)); err != nil {
		return nil, fmt.Errorf("trial.active: %w", err)
	}
	result, err := exact.Solve(ctx, w.h, exact.Options{MemoryLimit: math.MaxInt64, Spin: keptSpin(w.h), Tolerance: windowTolerance})
	if err != nil {
		return nil, fmt.Errorf("trial.active: %w", err)
	}
	state := result.States[0]
	e := expansion.FromMatrix(s.hamiltonian.Orbitals, w.core, result.Space.Up, result.Space.Down, state.Coefficients, nil)
	e.Columns = w.orbitals
	e.Origin = fmt.Sprintf("full CI of %d electrons in %d orbitals", w.h.Up+w.h.Down, w.active)
	if symmetric, ok := e.ExchangeSymmetric(1e-6); ok {
		columns := e.Columns
		e = symmetric
		e.Columns = columns
	}
	return e, nil
}
