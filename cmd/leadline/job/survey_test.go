package job

import (
	"fmt"
	"strings"
	"testing"

	"github.com/google/go-cmp/cmp"
)

func TestSurvey(t *testing.T) {
	for _, c := range []struct {
		text string
		want Survey
		// labels of the points
		points string
	}{
		{"job = 'a.toml'\n[vary]\n'trial.noise' = [0, 0.1]\nprojection.time_step = [0.01]\n\"hamiltonian.frozen_core\" = ['auto', 1]",
			Survey{Job: "a.toml", Combine: "grid", Vary: []Variation{{"trial.noise", []any{0.0, 0.1}},
				{"projection.time_step", []any{0.01}}, {"hamiltonian.frozen_core", []any{"auto", int64(1)}}}},
			`[[trial.noise = 0.0 projection.time_step = 0.01 hamiltonian.frozen_core = "auto"] [trial.noise = 0.0 projection.time_step = 0.01 hamiltonian.frozen_core = 1] [trial.noise = 0.1 projection.time_step = 0.01 hamiltonian.frozen_core = "auto"] [trial.noise = 0.1 projection.time_step = 0.01 hamiltonian.frozen_core = 1]]`},
		{"title = 't'\ncombine = 'zip'\njob = 'b'\n[vary]\n[vary.trial]\nactive = [[2, 2], [4, 4]]\nkind = ['expansion', 'expansion']\n[vary.hamiltonian]\natoms = [[['H', 0, 0, 0]], [['H', 0, 0, 1]]]",
			Survey{Title: "t", Job: "b", Combine: "zip", Vary: []Variation{
				{"trial.active", []any{[]any{int64(2), int64(2)}, []any{int64(4), int64(4)}}},
				{"trial.kind", []any{"expansion", "expansion"}},
				{"hamiltonian.atoms", []any{[]any{[]any{"H", 0.0, 0.0, 0.0}}, []any{[]any{"H", 0.0, 0.0, 1.0}}}}}},
			`[[trial.active = [2, 2] trial.kind = "expansion" hamiltonian.atoms = [["H", 0.0, 0.0, 0.0]]] [trial.active = [4, 4] trial.kind = "expansion" hamiltonian.atoms = [["H", 0.0, 0.0, 1.0]]]]`},
	} {
		s, err := ParseSurvey([]byte(c.text), "s.toml")
		if err != nil {
			t.Fatal(err)
		}
		if diff := cmp.Diff(&c.want, s); diff != "" {
			t.Error(diff)
		}
		if got := fmt.Sprint(s.Points()); got != c.points {
			t.Error(got)
		}
	}
}

func TestSurveyProblems(t *testing.T) {
	for _, c := range []struct{ name, text, want string }{
		{"empty", "", `
s:1: job: missing, expected the name of a job file`},
		{"nothing varied", "job = 'a'\n[vary]", `
s:2: vary: missing, expected a table of job keys and lists, such as "trial.noise" = [0, 0.1]`},
		{"every fault", `jobb = "a"
job = 3
combine = "gird"
trial.noise = [1]
projection.seed = [1]
[vary]
"trial.noise" = [
  0,
  "x",
  -1,
]
projection.timestep = [1]
projection.walkers = 10
projection.length = []
walkers = [10]
quux.x = [1]
trial = 1
`, `
s:1: jobb: unknown key; did you mean job?
s:2: job: found 3, expected a text
s:3: combine: found "gird", expected "grid" or "zip"; did you mean "grid"?
s:4: trial: unknown key; keys of the job go into [vary], as "table.key" = [values]
s:5: projection: unknown key; keys of the job go into [vary], as "table.key" = [values]
s:9: vary.trial.noise: value 2: found "x", expected a number at least 0 and at most 10
s:10: vary.trial.noise: value 3: found -1, expected a number at least 0 and at most 10
s:12: vary.projection.timestep: unknown key; did you mean projection.time_step?
s:13: vary.projection.walkers: found 10, expected a list of values
s:14: vary.projection.length: found [], expected a list of values
s:15: vary.walkers: unknown key; did you mean projection.walkers?
s:16: vary.quux.x: unknown key; expected title or one of the tables hamiltonian, trial, projection, measurement
s:17: vary.trial: unknown key; it is a table, expected one of its keys, such as kind`},
		{"no table", "job = 'a'\nvary = [1]", `
s:2: vary: found [1], expected a table of job keys and lists`},
		{"uneven", "job = 'a'\ncombine = 'zip'\n[vary]\ntrial.noise = [0, 0.1]\nprojection.seed = [1]", `
s:5: vary.projection.seed: found 1 values, expected 2, as trial.noise has: combine is "zip"`},
		{"twice", "job = 'a'\n[vary]\ntrial.noise = [0, 0.0]", `
s:2: vary: found points 1 and 2 alike, [trial.noise = 0.0], expected each once`},
		{"too many", "job = 'a'\n[vary]\nprojection.seed = [" + numbers(101) + "]\nprojection.walkers = [" + numbers(100) + "]", `
s:2: vary: found more than 10000 points, expected fewer`},
		{"no TOML", "job = 'a'\n[vary", `
s:2: found text that is not TOML: expected '.' or ']' to end table name, but got the end of the file instead`},
	} {
		t.Run(c.name, func(t *testing.T) {
			s, err := ParseSurvey([]byte(c.text), "s")
			if err == nil {
				t.Fatalf("accepted: %+v", s)
			}
			if diff := cmp.Diff(strings.TrimSpace(c.want), err.Error()); diff != "" {
				t.Error(diff)
			}
		})
	}
}

func numbers(n int) string {
	var b strings.Builder
	for i := range n {
		fmt.Fprintf(&b, "%d, ", i+2)
	}
	return b.String()
}
