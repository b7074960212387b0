package job

import (
	"fmt"
	"strings"
	"testing"

	"github.com/google/go-cmp/cmp"
)

// Every text ends in the file as named, line, key, what was found and expected.
func TestProblems(t *testing.T) {
	const hubbard = "[hamiltonian]\nsource = 'hubbard'\nsites = [4, 2]\nrepulsion = 4\nup = 4\ndown = 4\n"
	for _, c := range []struct{ name, text, want string }{
		{"empty", "", `
j:1: hamiltonian.source: missing, expected "molecule", "integrals", "prepared", "hubbard" or "pairing"`},
		{"every table at once", `walkers = 5
[hamiltonian]
source = "integrals"
fil = "n2.fcidump"
factor_tolerance = 0
frozen_core = -1
[trial]
kind = "expansions"
noise = -0.1
[projection]
time_step = -0.01
walkers = 1
length = inf
equilibration = nan
seed = -1
target_error = 0
[measurment]
row = 1
`, `
j:1: walkers: unknown key; did you mean projection.walkers?
j:2: hamiltonian.file: missing, expected a file name: source = "integrals" needs it
j:4: hamiltonian.fil: unknown key; did you mean hamiltonian.file?
j:5: hamiltonian.factor_tolerance: found 0, expected a number above 0 and at most 0.1
j:6: hamiltonian.frozen_core: found -1, expected "auto" or an integer at least 0 and at most 1000
j:8: trial.kind: found "expansions", expected "determinant", "expansion" or "measured"; did you mean "expansion"?
j:9: trial.noise: found -0.1, expected a number at least 0 and at most 10
j:11: projection.time_step: found -0.01, expected a number above 0 and at most 1
j:12: projection.walkers: found 1, expected an integer at least 2 and at most 10000000
j:13: projection.length: found +inf, expected a number above 0 and at most 10000000
j:14: projection.equilibration: found nan, expected a number at least 0 and at most 1000000
j:15: projection.seed: found -1, expected an integer at least 0
j:16: projection.target_error: found 0, expected a number above 0
j:17: measurment: unknown key; did you mean measurement?`},
		{"wrong types", molecule + `title = 3
trial.orbitals = ["uhf"]
projection.walkers = 400.0
projection.seed = "1"
projection.cap = "no"
projection.time_step = 2020-01-01
projection.length = {a = 1}
[[measurement]]
`, `
j:2: title: found 3, expected a text
j:3: trial.orbitals: found ["uhf"], expected "rhf", "rohf", "uhf" or "file"
j:4: projection.walkers: found 400.0, expected an integer at least 2 and at most 10000000
j:5: projection.seed: found "1", expected an integer at least 0
j:6: projection.cap: found "no", expected true or false
j:7: projection.time_step: found a date or time, expected a number above 0 and at most 1
j:8: projection.length: found a table, expected a number above 0 and at most 10000000
j:9: measurement: found a list of tables, expected a table [measurement]`},
		{"keys of another source or kind", `[hamiltonian]
source = "pairing"
levels = 4
coupling = 0.4
pairs = 5
sites = [2]
factor_tolerance = 1e-6
[trial]
active = [2, 2]
window = "natural"
orbitals_file = "o"
record = "r"
foreign_basis = true
`, `
j:5: hamiltonian.pairs: found 5 pairs, expected at most levels = 4
j:6: hamiltonian.sites: found with source = "pairing", expected only with source = "hubbard"
j:7: hamiltonian.factor_tolerance: found with source = "pairing", expected only with source = "molecule" or "integrals"
j:9: trial.active: found with kind = "determinant", expected only with kind = "expansion" or "measured"
j:10: trial.window: found with kind = "determinant", expected only with kind = "expansion"
j:11: trial.orbitals_file: found with orbitals = "uhf", expected only with orbitals = "file"
j:12: trial.record: found with kind = "determinant", expected only with kind = "measured"
j:13: trial.foreign_basis: found with kind = "determinant", expected only with kind = "expansion" or "measured"`},
		{"beside another key", molecule + "trial = {kind = 'expansion', file = 'x', window = 'natural', active = [2, 2]}\n[measurement]\nfrom = 1", `
j:2: trial.file: found both active and file, expected one of them
j:4: measurement.from: unknown key; expected one of ensemble, row, shots_per_setting, seed`},
		{"window without active", molecule + "trial = {kind = 'expansion', file = 'x', window = 'natural'}", `
j:2: trial.window: found with no active, expected only beside active`},
		{"override without a file", molecule + "trial = {kind = 'expansion', active = [2, 2], foreign_basis = true}", `
j:2: trial.foreign_basis: found with no file or record, expected only beside file or record`},
		{"needed by the kind", molecule + "[trial]\nkind = 'expansion'\norbitals = 'file'", `
j:2: trial.orbitals_file: missing, expected a file name: orbitals = "file" needs it
j:2: trial.active: missing, expected active or file`},
		{"needed by a record", molecule + "[trial]\nkind = 'measured'", `
j:2: trial.record: missing, expected a file name: kind = "measured" needs it`},
		{"atoms", `[hamiltonian]
source = "molecule"
xyz = "a.xyz"
atoms = [
  ["Be", 0, 0],
  ["H", 0, 0, "1"],
  [1, 0, 0, 1],
  ["Be9", 0, 0, 1],
  ["H", 0, nan, 1],
]
`, `
j:1: hamiltonian.basis: missing, expected the name of a basis set or basis_file
j:5: hamiltonian.atoms: found ["Be", 0, 0] as atom 1, expected ["element", x, y, z]
j:6: hamiltonian.atoms: found ["H", 0, 0, "1"] as atom 2, expected ["element", x, y, z]
j:7: hamiltonian.atoms: found [1, 0, 0, 1] as atom 3, expected ["element", x, y, z]
j:8: hamiltonian.atoms: found ["Be9", 0, 0, 1] as atom 4, expected ["element", x, y, z]
j:9: hamiltonian.atoms: found ["H", 0, nan, 1] as atom 5, expected ["element", x, y, z]`},
		{"no atoms", "hamiltonian = {source = 'molecule', basis = 'cc-pvdz', atoms = []}", `
j:1: hamiltonian.atoms: found [], expected a list of 1 to 1000 rows ["element", x, y, z]`},
		{"no geometry", "hamiltonian = {source = 'molecule', basis = 'cc-pvdz'}", `
j:1: hamiltonian.atoms: missing, expected atoms or xyz`},
		{"both geometries", "hamiltonian = {source = 'molecule', basis = 'cc-pvdz', xyz = 'a', atoms = [['H', 0, 0, 0]]}", `
j:1: hamiltonian.xyz: found both atoms and xyz, expected one of them`},
		{"close atoms", "[hamiltonian]\nsource = 'molecule'\nbasis = 'b'\nunit = 'angstrom'\natoms = [['H', 0, 0, 0],\n['H', 0, 0, 0.053],\n['H', 0, 0, 0.1]]", `
j:7: hamiltonian.atoms: found atoms 2 and 3 at a distance of 0.047 angstrom, expected at least 0.0529`},
		{"atoms all in one place", "hamiltonian = {source = 'molecule', basis = 'b', atoms = [['H', 0, 0, 0], ['H', 0, 0, 0], ['H', 0, 0, 0]]}", `
j:1: hamiltonian.atoms: found atoms 1 and 2 at a distance of 0 bohr, expected at least 0.1
j:1: hamiltonian.atoms: found atoms 1 and 3 at a distance of 0 bohr, expected at least 0.1`},
		{"unit of an xyz file", "hamiltonian = {source = 'molecule', basis = 'b', xyz = 'a.xyz', unit = 'bohr'}", `
j:1: hamiltonian.unit: found "bohr" with xyz, expected no unit: xyz files are always in angstrom`},
		{"core of a file", "hamiltonian = {source = 'integrals', file = 'f', frozen_core = 'auto'}", `
j:1: hamiltonian.frozen_core: found "auto" with source = "integrals", expected an integer: the file does not name the elements`},
		{"core misspelt", "hamiltonian = {source = 'integrals', file = 'f', frozen_core = 'Auto'}", `
j:1: hamiltonian.frozen_core: found "Auto", expected "auto" or an integer at least 0 and at most 1000`},
		{"lattice", "[hamiltonian]\nsource = 'hubbard'\nsites = [2, 2]\nperiodic = [true]\nhopping = 0\nrepulsion = 4\nup = 5\ndown = 6", `
j:4: hamiltonian.periodic: found 1 axes, expected 2, as sites has
j:5: hamiltonian.hopping: found 0.0, expected a number other than zero
j:7: hamiltonian.up: found 5, expected at most the 4 sites
j:8: hamiltonian.down: found 6, expected at most the 4 sites`},
		{"an infinite number", "hamiltonian = {source = 'pairing', levels = 4, pairs = 2, coupling = -inf, spacing = inf}", `
j:1: hamiltonian.spacing: found +inf, expected a number above 0
j:1: hamiltonian.coupling: found -inf, expected a number`},
		{"huge lattice", "hamiltonian = {source = 'hubbard', sites = [9999, 9999, 9999, 9999, 9999, 9999, 9999, 9999], repulsion = 4, up = 5, down = 6}", `
j:1: hamiltonian.sites: found [9999, 9999, 9999, 9999, 9999, 9999, ..., expected from 2 to 10000 sites in all`},
		{"sites", "hamiltonian = {source = 'hubbard', sites = [4, 0], repulsion = 4, up = 5, down = 6}", `
j:1: hamiltonian.sites: found [4, 0], expected a list of 1 to 8 integers at least 1 and at most 10000`},
		{"active space odd", hubbard + "[trial]\nkind = 'expansion'\nactive = [3, 4]", `
j:9: trial.active: found 3 electrons with 0 unpaired, expected an even number`},
		{"active space beyond the model", hubbard + "[trial]\nkind = 'expansion'\nactive = [4, 9]", `
j:9: trial.active: found 4 electrons in 9 orbitals, expected at most the 8 in 8 of the model`},
		{"active space overfull", hubbard + "[trial]\nkind = 'expansion'\nactive = [5, 2]", `
j:9: trial.active: found [5, 2], expected [electrons, orbitals], at least 1 of each and at most two electrons to an orbital`},
		{"active space too large", molecule + "trial = {kind = 'expansion', active = [30, 30]}", `
j:2: trial.active: found 30 electrons in 30 orbitals, 2.4e+16 determinants, expected at most 1e+09`},
		{"active space of too many orbitals", molecule + "trial = {kind = 'measured', record = 'r', active = [2, 65]}", `
j:2: trial.active: found 65 orbitals, expected at most 64`},
		{"unpaired electrons", `[hamiltonian]
source = "molecule"
atoms = [["N", 0, 0, 0]]
basis = "6-31g"
unpaired = 3
[trial]
kind = "measured"
record = "r"
orbitals = "rhf"
active = [1, 4]
spin = 1
`, `
j:9: trial.orbitals: found "rhf" with 3 unpaired, expected "rohf", "uhf" or "file"
j:10: trial.active: found 1 electrons, expected at least the 3 unpaired ones
j:11: trial.spin: found 1.0 with 3 unpaired, expected 1.5 or an integer more`},
		{"spin", molecule + "trial = {kind = 'measured', record = 'r', spin = 0.3}", `
j:2: trial.spin: found 0.3, expected a multiple of 0.5`},
		{"times", molecule + "projection = {time_step = 0.1, length = 0.05, equilibration = 0.01}", `
j:2: projection.length: found 0.05, expected at least one time step of 0.1
j:2: projection.equilibration: found 0.01, expected at least one time step of 0.1`},
		{"steps", molecule + "projection = {time_step = 1e-6, length = 1e6}", `
j:2: projection.length: found 1.0e+12 steps in all, expected at most 1e+08`},
		{"walkers and steps", molecule + "projection = {walkers = 10_000_000, length = 1e4}", `
j:2: projection.length: found 2.0e+06 steps of 10000000 walkers, expected at most 1e+12 steps of one walker`},
		{"release", molecule + "projection.constraint = 'released'", `
j:2: projection.constraint: found "released", expected "phaseless": this version cannot release the constraint`},
		{"title in a table", "[hamiltonian]\nsource = 'integrals'\nfile = 'f'\ntitle = 'x'", `
j:4: hamiltonian.title: unknown key; title stands before the first table`},
		{"a key in quotes", molecule + "'projection.walkers' = 3", `
j:2: projection.walkers: found in quotes, expected without them`},
		{"a table in a table", molecule + "[projection.walkers]\nx = 1\n[trial.seed]", `
j:2: projection.walkers: found a table, expected an integer at least 2 and at most 10000000
j:4: trial.seed: unknown key; did you mean projection.seed?`},
		{"part of a key", molecule + "projection.step = 1\nprojection.TimeStep = 2\ntrial.nosie = 1\ntrial.kin = 1", `
j:2: projection.step: unknown key; did you mean projection.time_step?
j:3: projection.TimeStep: unknown key; did you mean projection.time_step?
j:4: trial.nosie: unknown key; did you mean trial.noise?
j:5: trial.kin: unknown key; did you mean trial.kind?`},
		{"nothing near", "[hamiltonian]\nsource = 'integrals'\nfile = 'f'\n[quux]\nx = 1", `
j:4: quux: unknown key; expected title or one of the tables hamiltonian, trial, projection, measurement`},
		{"control characters", "title = \"\\u001b[2J\\u202e\"\n\"\\u001b\" = 1\nhamiltonian = {source = 'integrals', file = ''}", `
j:1: title: found "�[2J�", expected a text without control characters
j:2: �: unknown key; expected title or one of the tables hamiltonian, trial, projection, measurement
j:3: hamiltonian.file: found an empty text, expected a file name`},
		{"a long text", "title = '" + strings.Repeat("x", 5000) + "'\nhamiltonian = {source = 'integrals', file = 'f'}", `
j:1: title: found a text of 5000 bytes, expected at most 4096`},
		{"no TOML", "title = 'x'\nhamiltonian = [", `
j:2: found text that is not TOML: unexpected EOF; expected value`},
		{"binary", "\x7fELF\x02\x01\x01\x00", `
j:1: found text that is not TOML: TOML files cannot contain control characters: '0x7f'`},
		{"a number beyond all bounds", "[projection]\nseed = 99999999999999999999", `
j:2: found text that is not TOML: 99999999999999999999 is out of range for int64`},
		{"a key twice", "title = 'x'\ntitle = 'y'", `
j:2: found text that is not TOML: Key 'title' has already been defined.`},
		{"nested lists", "title = 1\nx = " + strings.Repeat("[", 100000), `
j:2: found more than 12 values in one another, expected fewer`},
		{"nested tables", "\nx = " + strings.Repeat("{a = ", 40000), `
j:2: found more than 12 values in one another, expected fewer`},
		{"a key of many parts", "[a]\n" + strings.Repeat("b.", 100000) + "c = 1", `
j:2: found a key of more than 12 parts, expected fewer`},
		{"a long key", strings.Repeat("k", 100) + " = 1\n" + molecule, "j:1: " + strings.Repeat("k", 77) +
			"...: unknown key; expected title or one of the tables hamiltonian, trial, projection, measurement"},
		{"a large file", strings.Repeat("# nothing\n", 30000), `
j: found 300000 bytes, expected at most 262144`},
	} {
		t.Run(c.name, func(t *testing.T) {
			j, err := Parse([]byte(c.text), "j")
			if err == nil {
				t.Fatalf("accepted: %+v", j)
			}
			if diff := cmp.Diff(strings.TrimSpace(c.want), err.Error()); diff != "" {
				t.Error(diff)
			}
		})
	}
}

func TestProblemLimit(t *testing.T) {
	var text strings.Builder
	for i := range 200 {
		fmt.Fprintf(&text, "k%d = 1\n", i)
	}
	_, err := Parse([]byte(text.String()+molecule), "j")
	lines := strings.Split(err.Error(), "\n")
	if len(lines) != problemLimit+1 || lines[problemLimit] != "j: and 150 more" {
		t.Errorf("%d lines, last %q", len(lines), lines[len(lines)-1])
	}
}

func TestNearest(t *testing.T) {
	for _, c := range []struct{ word, want string }{
		{"lenght", "length"}, {"Length", "length"}, {"len", "length"}, {"walkrs", "walkers"}, {"zzz", ""},
		{"number_of_walkers", "walkers"}, {strings.Repeat("walkers", 20), ""},
	} {
		if got := nearest(c.word, []string{"walkers", "length", "seed"}); got != c.want {
			t.Errorf("%s: %q, want %q", c.word, got, c.want)
		}
	}
	for _, c := range []struct {
		a, b string
		want int
	}{{"", "abc", 3}, {"abc", "", 3}, {"kitten", "sitting", 3}, {"abcd", "abdc", 1}, {"ca", "abc", 3}} {
		if got := distance(c.a, c.b); got != c.want {
			t.Errorf("%q to %q: %d, want %d", c.a, c.b, got, c.want)
		}
	}
}
