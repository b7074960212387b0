package job

import (
	"fmt"
	"sync"
	"testing"

	"github.com/google/go-cmp/cmp"
)

const expansion = molecule + `
[trial]
kind = "expansion"
active = [2, 2]
noise = 0.1
`

func TestSet(t *testing.T) {
	type named string
	j := parse(t, molecule)
	for _, s := range []Setting{
		{"title", named("x")}, {"projection.walkers", uint8(7)}, {"projection.seed", 9}, {"projection.time_step", float32(0.25)},
		{"projection.cap", true}, {"hamiltonian.frozen_core", "auto"}, {"projection.length", 3},
		{"hamiltonian.atoms", [][]any{{"He", 0, 0, 0.5}}},
	} {
		if err := j.Set(s.Key, s.Value); err != nil {
			t.Fatal(s, err)
		}
	}
	want := parse(t, molecule)
	want.Title, want.Hamiltonian.FrozenCore = "x", AutoCore
	want.Hamiltonian.Atoms = []Atom{{"He", [3]float64{0, 0, 0.5}}}
	want.Projection.Walkers, want.Projection.Seed, want.Projection.TimeStep = 7, 9, 0.25
	want.Projection.Length, want.Projection.Cap = 3, pointer(true)
	if diff := cmp.Diff(want, j, public); diff != "" {
		t.Error(diff)
	}
	if err := j.Set("projection.cap", nil); err != nil || j.Projection.Cap != nil {
		t.Error("default not restored", err)
	}
}

func TestSetProblems(t *testing.T) {
	for _, c := range []struct {
		base     string
		settings []Setting
		want     string
	}{
		{molecule, []Setting{{"projection.walker", 3}}, "h2.toml: projection.walker: unknown key; did you mean projection.walkers?"},
		{molecule, []Setting{{"walkers", 3}}, "h2.toml: walkers: unknown key; did you mean projection.walkers?"},
		{molecule, []Setting{{"", 3}}, "h2.toml: unknown key; expected title or one of the tables hamiltonian, trial, projection, measurement"},
		{molecule, []Setting{{"trial", "x"}}, "h2.toml: trial: unknown key; it is a table, expected one of its keys, such as kind"},
		{molecule, []Setting{{"projection.walkers", -3}, {"projection.seed", struct{}{}}},
			"h2.toml: projection.walkers: found -3, expected an integer at least 2 and at most 10000000\n" +
				"h2.toml: projection.seed: found a struct {}, expected an integer at least 0"},
		{molecule, []Setting{{"trial.noise", 0.1}}, `h2.toml: trial.noise: found with kind = "determinant", expected only with kind = "expansion"`},
		{molecule, []Setting{{"trial.kind", "expansion"}}, "h2.toml: trial.active: missing, expected active or file"},
		{molecule, []Setting{{"projection.length", 1e-4}}, "h2.toml: projection.length: found 0.0001, expected at least one time step of 0.005"},
		{molecule, []Setting{{"hamiltonian.atoms", [][]any{{"H", 0, 0, 0}, {"H", 0, 0}}}},
			`h2.toml: hamiltonian.atoms: found ["H", 0, 0] as atom 2, expected ["element", x, y, z]`},
		// A key of the file that stands against what was set keeps its line.
		{"\n" + expansion, []Setting{{"hamiltonian.unpaired", 1}},
			"h2.toml:6: trial.active: found 2 electrons with 1 unpaired, expected an odd number"},
	} {
		j := parse(t, c.base)
		before := written(t, j)
		_, err := j.With(c.settings...)
		if err == nil {
			t.Errorf("%v accepted", c.settings)
			continue
		}
		if diff := cmp.Diff(c.want, err.Error()); diff != "" {
			t.Error(diff)
		}
		if err := j.Set(c.settings[0].Key, c.settings[0].Value); err == nil || written(t, j) != before {
			t.Errorf("%v changed the job, error %v", c.settings[0], err)
		}
	}
}

// Settings that take the place of others, or leave others without a part to play.
func TestWith(t *testing.T) {
	const hubbard = "hamiltonian = {source = 'hubbard', up = 3, down = 3, "
	for _, c := range []struct {
		name, base string
		settings   []Setting
		want       string // the same job in one piece
	}{
		{"kind", expansion, []Setting{{"trial.kind", "determinant"}}, molecule},
		{"kind and file", expansion, []Setting{{"trial.kind", "measured"}, {"trial.record", "r"}},
			molecule + "trial = {kind = 'measured', record = 'r', active = [2, 2]}"},
		{"file for active", expansion, []Setting{{"trial.file", "f"}}, molecule + "trial = {kind = 'expansion', file = 'f', noise = 0.1}"},
		{"active for file", molecule + "trial = {kind = 'expansion', file = 'f', foreign_basis = true}", []Setting{{"trial.active", []int{2, 2}}},
			molecule + "trial = {kind = 'expansion', active = [2, 2]}"},
		{"reference", molecule + "trial = {orbitals = 'file', orbitals_file = 'f'}", []Setting{{"trial.orbitals", "rhf"}}, molecule + "trial.orbitals = 'rhf'"},
		{"xyz for atoms", molecule, []Setting{{"hamiltonian.xyz", "a.xyz"}}, "hamiltonian = {source = 'molecule', xyz = 'a.xyz', basis = 'sto-3g'}"},
		{"atoms for xyz", "hamiltonian = {source = 'molecule', xyz = 'a.xyz', unit = 'angstrom', basis = 'sto-3g'}",
			[]Setting{{"hamiltonian.atoms", [][]any{{"H", 0, 0, 0}, {"H", 0, 0, 1.4}}}}, molecule},
		{"source", molecule, []Setting{{"hamiltonian.source", "integrals"}, {"hamiltonian.file", "f"}}, "hamiltonian = {source = 'integrals', file = 'f'}"},
		{"sign of the repulsion", hubbard + "sites = [6], repulsion = 4}", []Setting{{"hamiltonian.repulsion", -4}},
			hubbard + "sites = [6], repulsion = -4, decomposition = 'charge'}"},
		{"decomposition asked for", hubbard + "sites = [6], repulsion = 4, decomposition = 'spin'}", []Setting{{"hamiltonian.repulsion", -4}},
			hubbard + "sites = [6], repulsion = -4, decomposition = 'spin'}"},
		{"sites", hubbard + "sites = [6], repulsion = 4}", []Setting{{"hamiltonian.sites", []int{3, 2}}},
			hubbard + "sites = [3, 2], repulsion = 4}"},
	} {
		base := parse(t, c.base)
		got, err := base.With(c.settings...)
		if err != nil {
			t.Errorf("%s: %v", c.name, err)
			continue
		}
		if diff := cmp.Diff(parse(t, c.want), got, public); diff != "" {
			t.Errorf("%s: %s", c.name, diff)
		}
		if diff := cmp.Diff(parse(t, c.base), base, public); diff != "" {
			t.Errorf("%s changed the job it started from: %s", c.name, diff)
		}
	}
}

func TestFiles(t *testing.T) {
	j := parse(t, `hamiltonian = {source = "molecule", xyz = "a.xyz", basis = "b", basis_file = "c.gbs"}
trial = {kind = "measured", orbitals = "file", orbitals_file = "o", record = "r"}`)
	const want = `[hamiltonian.basis_file = "c.gbs" hamiltonian.xyz = "a.xyz" trial.orbitals_file = "o" trial.record = "r"]`
	if got := fmt.Sprint(j.Files()); got != want {
		t.Error(got)
	}
	if got := parse(t, expansion).Files(); got != nil {
		t.Error(got)
	}
}

func TestWhere(t *testing.T) {
	j := parse(t, "title = 'x'\n[hamiltonian]\nsource = 'molecule'\natoms = [\n['H', 0, 0, 0],\n['H', 0, 0, 1.4]]\nbasis = 'b'\n")
	for key, want := range map[string]string{
		"title": "h2.toml:1", "hamiltonian.atoms": "h2.toml:4", "hamiltonian.atoms[1]": "h2.toml:6",
		"hamiltonian.unit": "h2.toml:2", "projection.seed": "h2.toml:1", "hamiltonian.basis": "h2.toml:7",
	} {
		if got := j.Where(key); got != want {
			t.Errorf("%s at %s, want %s", key, got, want)
		}
	}
	if err := j.Set("hamiltonian.atoms", [][]any{{"H", 0, 0, 0}}); err != nil {
		t.Fatal(err)
	}
	if got := j.Where("hamiltonian.atoms[0]"); got != "h2.toml" {
		t.Errorf("atoms that were set at %s", got)
	}
	if got := new(Job).Where("title"); got != "job" {
		t.Error(got)
	}
}

// A job may be used by several goroutines (run with -race).
func TestConcurrentWith(t *testing.T) {
	j := parse(t, expansion)
	var wait sync.WaitGroup
	for seed := range 8 {
		wait.Go(func() {
			if k, err := j.With(Setting{"projection.seed", seed}); err != nil || k.Projection.Seed != int64(seed) {
				t.Error(err)
			}
			if j.Where("trial.active") != "h2.toml:5" {
				t.Error(j.Where("trial.active"))
			}
		})
	}
	wait.Wait()
}
