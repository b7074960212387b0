package job

import (
	"math"
	"math/bits"
)

// Bounds beyond which a job is a slip of the pen: at a hundred thousand walkers
// and steps a second the second is four months.
const (
	stepLimit       = 1e8
	walkerStepLimit = 1e12
	siteLimit       = 10000
	determinantsMax = 1e9 // 16 GB for one vector of complex coefficients
)

// check reports what single values do not show.
func (j *Job) check(r *report) {
	j.Hamiltonian.check(r)
	j.checkReference(r)
	j.checkTrial(r)
	j.Projection.check(r)
}

func (h *Hamiltonian) check(r *report) {
	const table = "hamiltonian."
	if !r.fine(table + "source") {
		return
	}
	switch h.Source {
	case "molecule":
		h.checkMolecule(r)
	case "integrals", "prepared":
		if h.FrozenCore == AutoCore {
			r.add(table+"frozen_core", `found "auto" with source = %q, expected an integer: the file does not name the elements`, h.Source)
		}
	case "hubbard":
		h.checkHubbard(r)
	case "pairing":
		if r.fine(table+"levels", table+"pairs") && h.Pairs > h.Levels {
			r.add(table+"pairs", "found %d pairs, expected at most levels = %d", h.Pairs, h.Levels)
		}
	}
}

func (h *Hamiltonian) checkMolecule(r *report) {
	const table = "hamiltonian."
	switch atoms := len(h.Atoms) > 0; {
	case !r.fine(table+"atoms", table+"xyz", table+"unit"):
	case atoms && h.XYZ != "":
		r.add(table+"xyz", "found both atoms and xyz, expected one of them")
	case atoms:
		h.distances(table+"atoms", r)
	case h.XYZ == "":
		r.add(table+"atoms", "missing, expected atoms or xyz")
	case h.Unit == "bohr":
		r.add(table+"unit", `found "bohr" with xyz, expected no unit: xyz files are always in angstrom`)
	}
	if h.Basis == "" && h.BasisFile == "" && r.fine(table+"basis", table+"basis_file") {
		r.add(table+"basis", "missing, expected the name of a basis set or basis_file")
	}
}

func (h *Hamiltonian) checkHubbard(r *report) {
	const table = "hamiltonian."
	if h.Hopping == 0 && r.fine(table+"hopping") {
		r.add(table+"hopping", "found 0.0, expected a number other than zero")
	}
	if !r.fine(table+"sites") || len(h.Sites) == 0 {
		return
	}
	if len(h.Periodic) != len(h.Sites) && r.fine(table+"periodic") {
		r.add(table+"periodic", "found %d axes, expected %d, as sites has", len(h.Periodic), len(h.Sites))
	}
	total := 1
	for _, n := range h.Sites {
		if total *= n; total > siteLimit {
			break
		}
	}
	if total < 2 || total > siteLimit {
		r.add(table+"sites", "found %s, expected from 2 to %d sites in all", show(lookup(table+"sites").raw(&Job{Hamiltonian: *h})), siteLimit)
		return
	}
	if h.Up > total && r.fine(table+"up") {
		r.add(table+"up", "found %d, expected at most the %d sites", h.Up, total)
	}
	if h.Down > total && r.fine(table+"down") {
		r.add(table+"down", "found %d, expected at most the %d sites", h.Down, total)
	}
}

// unpaired returns N_up - N_down where the job alone tells it.
func (h *Hamiltonian) unpaired(r *report) (n int, known bool) {
	const table = "hamiltonian."
	known = r.fine(table+"source", table+"unpaired", table+"up", table+"down")
	switch h.Source {
	case "molecule":
		return h.Unpaired, known
	case "hubbard":
		return h.Up - h.Down, known
	case "pairing":
		return 0, known
	}
	return 0, false
}

func (j *Job) checkReference(r *report) {
	n, known := j.Hamiltonian.unpaired(r)
	if known && n != 0 && j.Trial.Orbitals == "rhf" && r.fine("trial.orbitals") {
		r.add("trial.orbitals", `found "rhf" with %d unpaired, expected "rohf", "uhf" or "file"`, max(n, -n))
	}
	if s := j.Trial.Spin; s != nil && r.fine("trial.spin") {
		switch twice := 2 * *s; {
		case twice != math.Trunc(twice):
			r.add("trial.spin", "found %s, expected a multiple of 0.5", show(*s))
		case known && (twice < math.Abs(float64(n)) || math.Mod(twice-float64(n), 2) != 0):
			r.add("trial.spin", "found %s with %d unpaired, expected %s or an integer more", show(*s), max(n, -n), show(math.Abs(float64(n))/2))
		}
	}
}

func (j *Job) checkTrial(r *report) {
	t := &j.Trial
	given := t.Active != (Space{})
	if !r.fine("trial.kind", "trial.active", "trial.file") {
		return
	}
	if t.Kind == "expansion" {
		switch {
		case given && t.File != "":
			r.add("trial.file", "found both active and file, expected one of them")
		case !given && t.File == "":
			r.add("trial.active", "missing, expected active or file")
		}
	}
	if given {
		j.checkActive(r)
	}
}

// checkActive holds the active space against the electrons of the job.
func (j *Job) checkActive(r *report) {
	const key = "trial.active"
	a, h := j.Trial.Active, &j.Hamiltonian
	n, known := h.unpaired(r)
	n = max(n, -n)
	switch {
	case !known:
		n = a.Electrons % 2
	case (a.Electrons-n)%2 != 0:
		r.add(key, "found %d electrons with %d unpaired, expected an %s number", a.Electrons, n, [2]string{"even", "odd"}[n%2])
		return
	case a.Electrons < n:
		r.add(key, "found %d electrons, expected at least the %d unpaired ones", a.Electrons, n)
		return
	}
	if electrons, orbitals, ok := h.size(r); ok && (a.Electrons > electrons || a.Orbitals > orbitals) {
		r.add(key, "found %d electrons in %d orbitals, expected at most the %d in %d of the model", a.Electrons, a.Orbitals, electrons, orbitals)
		return
	}
	up := (a.Electrons + n) / 2
	switch {
	case up > a.Orbitals:
		r.add(key, "found %d orbitals, expected room for %d electrons of one spin", a.Orbitals, up)
	case a.Orbitals > bits.UintSize:
		r.add(key, "found %d orbitals, expected at most %d", a.Orbitals, bits.UintSize)
	case j.Trial.Kind == "expansion":
		if d := choose(a.Orbitals, up) * choose(a.Orbitals, a.Electrons-up); d > determinantsMax {
			r.add(key, "found %d electrons in %d orbitals, %.1e determinants, expected at most %.0e", a.Electrons, a.Orbitals, d, determinantsMax)
		}
	}
}

// size returns the electrons and orbitals of a model.
func (h *Hamiltonian) size(r *report) (electrons, orbitals int, ok bool) {
	const table = "hamiltonian."
	switch h.Source {
	case "hubbard":
		orbitals = 1
		for _, n := range h.Sites {
			orbitals *= n
		}
		return h.Up + h.Down, orbitals, r.fine(table+"sites", table+"up", table+"down") && len(h.Sites) > 0
	case "pairing":
		return 2 * h.Pairs, h.Levels, r.fine(table+"levels", table+"pairs")
	}
	return 0, 0, false
}

// choose is the binomial coefficient.
func choose(n, k int) float64 {
	c := 1.0
	for i := range k {
		c *= float64(n-i) / float64(i+1)
	}
	return c
}

func (p *Projection) check(r *report) {
	const table = "projection."
	if p.Constraint == "released" {
		r.add(table+"constraint", `found "released", expected "phaseless": this version cannot release the constraint`)
	}
	if !r.fine(table+"time_step", table+"length", table+"equilibration") {
		return
	}
	short := func(name string, time float64) {
		r.add(table+name, "found %s, expected at least one time step of %s", show(time), show(p.TimeStep))
	}
	if p.Length < p.TimeStep {
		short("length", p.Length)
	}
	if p.Equilibration > 0 && p.Equilibration < p.TimeStep {
		short("equilibration", p.Equilibration)
	}
	steps := (p.Equilibration + p.Length) / p.TimeStep
	switch {
	case steps > stepLimit:
		r.add(table+"length", "found %.1e steps in all, expected at most %.0e", steps, stepLimit)
	case steps*float64(p.Walkers) > walkerStepLimit && r.fine(table+"walkers"):
		r.add(table+"length", "found %.1e steps of %d walkers, expected at most %.0e steps of one walker", steps, p.Walkers, walkerStepLimit)
	}
}
