package job

import (
	"fmt"
	"math"
	"os"
	"slices"
	"strings"
	"testing"

	"github.com/google/go-cmp/cmp"
	"github.com/google/go-cmp/cmp/cmpopts"
)

// molecule is the least text that makes a job of a molecule.
const molecule = `hamiltonian = {source = "molecule", atoms = [["H", 0, 0, 0], ["H", 0, 0, 1.4]], basis = "sto-3g"}
`

var public = cmpopts.IgnoreUnexported(Job{})

func parse(t *testing.T, text string) *Job {
	t.Helper()
	j, err := Parse([]byte(text), "h2.toml")
	if err != nil {
		t.Fatal(err)
	}
	return j
}

func pointer[T any](x T) *T { return &x }

func TestDefaults(t *testing.T) {
	projection := Projection{TimeStep: 0.005, Walkers: 400, Equilibration: 5, Length: 50,
		Constraint: "phaseless", Precision: "double", Seed: 1}
	measurement := Measurement{Ensemble: "matching", Row: "vacuum", ShotsPerSetting: 1, Seed: 1}
	uhf := Trial{Kind: "determinant", Orbitals: "uhf"}
	for _, c := range []struct {
		text string
		want Job
	}{
		{molecule, Job{Hamiltonian: Hamiltonian{Source: "molecule", Unit: "bohr", Basis: "sto-3g", FactorTolerance: 1e-9,
			Atoms: []Atom{{"H", [3]float64{}}, {"H", [3]float64{0, 0, 1.4}}}}, Trial: uhf}},
		{"[hamiltonian]\nsource = 'molecule'\nxyz = 'a.xyz'\nbasis_file = 'b.gbs'\nfrozen_core = 'auto'\n",
			Job{Hamiltonian: Hamiltonian{Source: "molecule", Unit: "angstrom", XYZ: "a.xyz", BasisFile: "b.gbs",
				FrozenCore: AutoCore, FactorTolerance: 1e-9}, Trial: uhf}},
		{"title = 'N2'\n[hamiltonian]\nsource = 'integrals'\nfile = 'n2.fcidump'\n[projection]\ncap = false\ntarget_error = 1e-3",
			Job{Title: "N2", Hamiltonian: Hamiltonian{Source: "integrals", File: "n2.fcidump", FactorTolerance: 1e-9}, Trial: uhf}},
		{"[hamiltonian]\nsource = 'prepared'\nfile = 'n2'\n[trial]\nkind = 'measured'\nrecord = 'r'\nspin = 0\nforeign_basis = true",
			Job{Hamiltonian: Hamiltonian{Source: "prepared", File: "n2"},
				Trial: Trial{Kind: "measured", Orbitals: "uhf", Record: "r", Spin: pointer(0.0), ForeignBasis: true}}},
		{"[hamiltonian]\nsource = 'hubbard'\nsites = [2, 3]\nrepulsion = 4\nup = 3\ndown = 2\n[trial]\nkind = 'expansion'\nactive = [5, 6]",
			Job{Hamiltonian: Hamiltonian{Source: "hubbard", Sites: []int{2, 3}, Periodic: []bool{true, true}, Hopping: 1,
				Repulsion: 4, Up: 3, Down: 2, Decomposition: "spin"},
				Trial: Trial{Kind: "expansion", Orbitals: "uhf", Active: Space{5, 6}, Window: "natural", NoiseSeed: 1}}},
		{"[hamiltonian]\nsource = 'hubbard'\nsites = [6]\nperiodic = [false]\nrepulsion = -4\nup = 3\ndown = 3\n[trial]\nkind = 'expansion'\nfile = 'x'",
			Job{Hamiltonian: Hamiltonian{Source: "hubbard", Sites: []int{6}, Periodic: []bool{false}, Hopping: 1,
				Repulsion: -4, Up: 3, Down: 3, Decomposition: "charge"},
				Trial: Trial{Kind: "expansion", Orbitals: "uhf", File: "x", NoiseSeed: 1}}},
		{"[hamiltonian]\nsource = 'pairing'\nlevels = 6\ncoupling = 0.4\npairs = 3\n[trial]\norbitals = 'file'\norbitals_file = 'o'",
			Job{Hamiltonian: Hamiltonian{Source: "pairing", Levels: 6, Spacing: 1, Coupling: 0.4, Pairs: 3},
				Trial: Trial{Kind: "determinant", Orbitals: "file", OrbitalsFile: "o"}}},
	} {
		c.want.Projection, c.want.Measurement = projection, measurement
		if strings.Contains(c.text, "cap") {
			c.want.Projection.Cap, c.want.Projection.TargetError = pointer(false), 1e-3
		}
		if diff := cmp.Diff(&c.want, parse(t, c.text), public); diff != "" {
			t.Errorf("%s\n%s", c.text, diff)
		}
	}
}

// The job file of the format page.
func TestFormatExample(t *testing.T) {
	page, err := os.ReadFile("FORMAT.md")
	if err != nil {
		t.Fatal(err)
	}
	blocks := strings.Split(string(page), "```")
	if len(blocks) != 5 {
		t.Fatalf("found %d code blocks", len(blocks)/2)
	}
	j := parse(t, strings.TrimPrefix(blocks[1], "toml\n"))
	s, err := ParseSurvey([]byte(strings.TrimPrefix(blocks[3], "toml\n")), "survey.toml")
	if err != nil {
		t.Fatal(err)
	}
	for _, point := range s.Points() {
		if _, err := j.With(point...); err != nil {
			t.Error(err)
		}
	}
}

// The table of keys of the format page is written from the schema.
func TestFormatTable(t *testing.T) {
	var b strings.Builder
	for i := range schema {
		f := &schema[i]
		def := ""
		switch {
		case f.need:
			def = "needed"
		case f.def != nil:
			def = "`" + literal(f.def) + "`"
		}
		var when []string
		for _, c := range f.when {
			if c.values != nil {
				when = append(when, fmt.Sprintf("%s %s", bare(c.keys)[0], or(c.values)))
			} else {
				when = append(when, "with "+or(bare(c.keys)))
			}
		}
		fmt.Fprintf(&b, "| `%s` | %s | %s | %s | %s |\n", f.key, f.expected(), def, strings.Join(when, ", "), f.doc)
	}
	page, err := os.ReadFile("FORMAT.md")
	if err != nil {
		t.Fatal(err)
	}
	if !strings.Contains(string(page), b.String()) {
		t.Errorf("FORMAT.md should hold\n%s", b.String())
	}
}

func TestStarter(t *testing.T) {
	plain := parse(t, string(Starter("")))
	if plain.Title != "Be + H2, on the way in" {
		t.Errorf("title %q", plain.Title)
	}
	for _, name := range []string{"beh2", `a "b" \c`, "tab\tand\nline", "\xff", strings.Repeat("é", 5000)} {
		j := parse(t, string(Starter(name)))
		j.Title = plain.Title
		if diff := cmp.Diff(plain, j, public); diff != "" {
			t.Errorf("%q: %s", name, diff)
		}
	}
	// What a comment offers as `key = value` exists.
	for line := range strings.Lines(starter) {
		text, comment := strings.CutPrefix(line, "#")
		name, _, setting := strings.Cut(text, "=")
		if !comment || !setting {
			continue
		}
		name = strings.TrimSpace(name)
		if !slices.ContainsFunc(schema, func(f field) bool { return f.name == name }) {
			t.Errorf("no key %s", name)
		}
	}
}

// Integers and floats of a job keep every bit through its text.
func TestRoundTripOfNumbers(t *testing.T) {
	for _, x := range []float64{1e-300, 0.1, 1.0 / 3, 5e-324, 0.005000000000000001, 1e-6, 1} {
		j := parse(t, molecule)
		if err := j.Set("projection.target_error", x); err != nil {
			t.Fatal(err)
		}
		if err := j.Set("projection.seed", int64(math.MaxInt64)); err != nil {
			t.Fatal(err)
		}
		again := parse(t, written(t, j))
		if diff := cmp.Diff(j, again, public); diff != "" {
			t.Error(diff)
		}
	}
}

func written(t *testing.T, j *Job) string {
	t.Helper()
	var b strings.Builder
	if err := j.Write(&b); err != nil {
		t.Fatal(err)
	}
	return b.String()
}

func TestWrite(t *testing.T) {
	const want = `title = "ring"

[hamiltonian]
source        = "hubbard"
sites         = [6]        # along each axis
periodic      = [true]     # along each axis
hopping       = 1.0
repulsion     = 4.0        # U; attractive where negative
up            = 3
down          = 3
decomposition = "spin"     # what the auxiliary fields couple to

[trial]
kind     = "determinant"
orbitals = "uhf"          # the reference

[projection]
time_step     = 0.01         # imaginary time
walkers       = 400
equilibration = 5.0          # imaginary time
length        = 50.0         # imaginary time sampled after it
constraint    = "phaseless"
precision     = "double"     # of the propagation
seed          = 7
`
	text := "title='ring'\nhamiltonian={source='hubbard', sites=[6], repulsion=4, up=3, down=3}\nprojection={time_step=0.01, seed=7}"
	if got := written(t, parse(t, text)); got != want {
		t.Error(cmp.Diff(want, got))
	}
	if got := written(t, parse(t, text+"\nmeasurement.row = 'reference'")); !strings.HasPrefix(got, want+"\n[measurement]\n") {
		t.Error("table of the measurement left out:\n" + got)
	}
}

// A job that was changed by hand into one that would be refused is not written.
func TestWriteRefuses(t *testing.T) {
	j := parse(t, molecule)
	j.Projection.Walkers, j.Hamiltonian.Atoms = 0, nil
	var b strings.Builder
	err := j.Write(&b)
	if problems, ok := err.(Problems); !ok || len(problems) != 2 || b.Len() > 0 {
		t.Errorf("wrote %q, error %v", b.String(), err)
	}
	if err := new(Job).Write(&b); err == nil {
		t.Error("empty job written")
	}
}
