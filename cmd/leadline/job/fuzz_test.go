package job

import (
	"regexp"
	"strings"
	"testing"

	"github.com/BurntSushi/toml"
	"github.com/google/go-cmp/cmp"
)

var seeds = []string{
	"", molecule, expansion, "title = '''\nx'''\n" + molecule, "\ufeff" + molecule,
	"hamiltonian = {source = 'hubbard', sites = [4, 4], repulsion = -1, up = 3, down = 0, periodic = [true, false]}",
	"[hamiltonian]\r\nsource = \"pairing\"\r\nlevels = 6 # six\r\ncoupling = 0.4\r\npairs = 3\r\n",
	"[hamiltonian]\nsource = 'prepared'\nfile = 'a'\n[trial]\nkind = 'measured'\nrecord = 'r'\nspin = 0.5\nreal = true\nsignificance = 2\nforeign_basis = true\n[projection]\ncap = false\ntarget_error = 0x1",
	"[[hamiltonian]]\n[hamiltonian.x]\n", "a.b.\"c\\u0064\" = [[{x = [1,\n2], y.z = nan}], # ]\n1979-05-27 07:32:00]\n",
	"x = \"\"\"a\\\n \\\" \"\" b\"\"\"\"\"\ny = '''' ''''''\nz = \"\\\\\"", "[vary]\ntrial.noise = [0]\n\"projection.seed\" = [1, 2]\n",
	"job = 'a'\nvary = {trial.noise = [0, 0.1], projection.seed = [1, 2]}\ncombine = 'zip'", "walkers = inf", "projection.length = 1e300",
}

// sound checks an error: not empty, every violation with the name and with a
// line of the file, nothing that a terminal obeys.
func sound(t *testing.T, err error, text string) {
	t.Helper()
	problems, ok := err.(Problems)
	if !ok || len(problems) == 0 {
		t.Fatalf("error %#v", err)
	}
	for _, p := range problems {
		message := p.Error()
		if !strings.HasPrefix(message, "f.toml:") || p.Text == "" || printable(message) != message {
			t.Errorf("message %q", message)
		}
		if p.Line < 0 || p.Line > 1+strings.Count(text, "\n") || p.Line == 0 && len(text) <= sizeLimit {
			t.Errorf("line %d: %s", p.Line, message)
		}
	}
}

func FuzzParse(f *testing.F) {
	for _, s := range seeds {
		f.Add(s)
	}
	f.Fuzz(func(t *testing.T, text string) {
		j, err := Parse([]byte(text), "f.toml")
		if err != nil {
			sound(t, err, text)
			return
		}
		first := written(t, j)
		again, err := Parse([]byte(first), "f.toml")
		if err != nil {
			t.Fatalf("%v\n%s", err, first)
		}
		if diff := cmp.Diff(j, again, public); diff != "" {
			t.Error(diff)
		}
		if diff := cmp.Diff(first, written(t, again)); diff != "" {
			t.Error(diff)
		}
	})
}

func FuzzParseSurvey(f *testing.F) {
	for _, s := range seeds {
		f.Add(s)
	}
	base, err := Parse([]byte(expansion), "f.toml")
	if err != nil {
		f.Fatal(err)
	}
	f.Fuzz(func(t *testing.T, text string) {
		s, err := ParseSurvey([]byte(text), "f.toml")
		if err != nil {
			sound(t, err, text)
			return
		}
		points := s.Points()
		if len(points) == 0 || len(points) > pointLimit {
			t.Errorf("%d points", len(points))
		}
		for _, p := range points[:min(len(points), 20)] {
			if j, err := base.With(p...); err == nil {
				written(t, j)
			}
		}
	})
}

func FuzzSet(f *testing.F) {
	for i := range schema {
		f.Add(schema[i].key, "1")
		f.Add(schema[i].key, "'x'")
		f.Add(schema[i].key, "[1, 2.5, true]")
	}
	f.Fuzz(func(t *testing.T, key, value string) {
		var v map[string]any
		if _, err := toml.Decode("v = "+value, &v); err != nil || strings.Contains(value, "\n") || len(value) > 1000 {
			return
		}
		for _, base := range []string{molecule, expansion, seeds[5]} {
			j, err := Parse([]byte(base), "f.toml")
			if err != nil {
				t.Fatal(err)
			}
			if err := j.Set(key, v["v"]); err != nil {
				if !strings.HasPrefix(err.Error(), "f.toml") {
					t.Errorf("message %q", err)
				}
			}
			if _, err := Parse([]byte(written(t, j)), "f.toml"); err != nil {
				t.Error(err)
			}
		}
	})
}

var index = regexp.MustCompile(`\[\d+\]`)

// The locator finds a line for every key that the TOML library finds, in the
// same order.
func FuzzLocate(f *testing.F) {
	for _, s := range seeds {
		f.Add(s)
	}
	f.Fuzz(func(t *testing.T, text string) {
		lines, _, err := locate(text)
		if err != nil || len(text) > sizeLimit {
			return
		}
		meta, err := toml.Decode(text, new(map[string]any))
		if err != nil {
			return
		}
		found := make(map[string]int)
		for key, line := range lines {
			found[index.ReplaceAllString(key, "")] = line
		}
		for _, key := range meta.Keys() {
			name := strings.Join(key, ".")
			if found[index.ReplaceAllString(name, "")] == 0 && !strings.ContainsAny(text, `\`) {
				t.Errorf("no line for %q", name)
			}
		}
	})
}

// Lines of keys and list elements in every form that TOML has.
func TestLocate(t *testing.T) {
	const text = "# a comment = 1\n" +
		"a = '''\n[x]\n''' # b = 1\n" + // 2 to 4
		"\"b c\" . 'd' = [ # [\n 1, [2,\n 3], # ]\n \"\\\"]\", '\\'\n]\n" + // 5 to 9
		"[ t . \"u\\u0062\" ]\n" + // 10
		"v = {w = {x = 1, y.z = [\n{q = 1},\n{q = 2}]}, last = \"\"\"\\\"\"\"\"\"\n}\r\n" + // 11 to 14
		"[[s]]\nk = 1979-05-27 07:32:00\n[[s]]\nl = +inf" // 15 to 18
	if _, err := toml.Decode(text, new(map[string]any)); err != nil {
		t.Fatal(err)
	}
	want := map[string]int{"": 1, "a": 2, "b c": 5, "b c.d": 5, "b c.d[0]": 6, "b c.d[1]": 6, "b c.d[1][0]": 6,
		"b c.d[1][1]": 7, "b c.d[2]": 8, "b c.d[3]": 8, "t": 10, "t.ub": 10, "t.ub.v": 11, "t.ub.v.w": 11,
		"t.ub.v.w.x": 11, "t.ub.v.w.y": 11, "t.ub.v.w.y.z": 11, "t.ub.v.w.y.z[0]": 12, "t.ub.v.w.y.z[1]": 13,
		"t.ub.v.w.y.z[0].q": 12, "t.ub.v.w.y.z[1].q": 13, "t.ub.v.last": 13, "s": 15, "s.k": 16, "s.l": 18}
	lines, last, err := locate(text)
	if err != nil || last != 18 {
		t.Errorf("last line %d, error %v", last, err)
	}
	if diff := cmp.Diff(want, lines); diff != "" {
		t.Error(diff)
	}
}
