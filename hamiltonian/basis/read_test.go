package basis_test

import (
	"reflect"
	"strings"
	"testing"

	"leadline/hamiltonian/basis"
)

const interchange = `! a comment
****
H     0
S    3   1.00
      0.1873113696D+02       0.3349460434D-01
      0.2825394365D+01       0.2347269535D+00
      0.6401216923D+00       0.8137573261D+00
S    1   2.00
      0.1612777588D+00       1.0000000
****
-C 0
SP 1 1.00
      0.5 1.0 -2.0
D 1
 0.8 1
****
`

func TestRead(t *testing.T) {
	set, err := basis.Read(strings.NewReader(interchange), "mine")
	if err != nil {
		t.Fatal(err)
	}
	h, _ := set.Shells(1)
	want := []basis.Shell{
		{L: 0, Exponents: []float64{18.73113696, 2.825394365, 0.6401216923}, Coefficients: []float64{0.03349460434, 0.2347269535, 0.8137573261}},
		{L: 0, Exponents: []float64{4 * 0.1612777588}, Coefficients: []float64{1}},
	}
	if !reflect.DeepEqual(h, want) {
		t.Errorf("hydrogen is %v, expected %v", h, want)
	}
	c, _ := set.Shells(6)
	want = []basis.Shell{
		{L: 0, Exponents: []float64{0.5}, Coefficients: []float64{1}},
		{L: 1, Exponents: []float64{0.5}, Coefficients: []float64{-2}},
		{L: 2, Exponents: []float64{0.8}, Coefficients: []float64{1}},
	}
	if !reflect.DeepEqual(c, want) {
		t.Errorf("carbon is %v, expected %v", c, want)
	}
}

// Each bad text gives one sentence with the line and what was expected.
func TestReadErrors(t *testing.T) {
	for _, c := range []struct{ text, want string }{
		{"", "holds no element"},
		{"# nothing\n****\n", "holds no element"},
		{"S 3\n", `line 1: found "S 3", expected an element`},
		{"Qq 0\nS 1\n1 1\n", `line 1: "Qq" is no element`},
		{"H 0\n****\n", "line 2: element H has no shells"},
		{"H 0\nHe 0\nS 1\n1 1\n", "line 2: element H has no shells"},
		{"H 0\nS 1\n1 1\n****\nH 0\n", "line 5: element H is given twice"},
		{"H 0\nS 1\n-1.5 1\n", "line 3: exponent is -1.5, expected a positive number from 1e-09 to 1e+12"},
		{"H 0\nS 1\n0 1\n", "line 3: exponent is 0, expected a positive number"},
		{"H 0\nS 1\nNaN 1\n", `line 3: exponent: found "NaN", expected a finite number`},
		{"H 0\nS 1\n1e400 1\n", `line 3: exponent: found "1e400", expected a finite number`},
		{"H 0\nS 1\n1 x\n", `line 3: coefficient: found "x", expected a finite number`},
		{"H 0\nS 2\n1 1\n", "line 3: found 0 numbers, expected exponent and 1 coefficient(s)"},
		{"H 0\nS 2\n1 1\n****\n", "line 4: found 1 numbers, expected exponent and 1 coefficient(s)"},
		{"H 0\nSP 1\n1 1\n", "line 3: found 2 numbers, expected exponent and 2 coefficient(s)"},
		{"H 0\nS 1000000000\n1 1\n", `line 2: number of primitives is "1000000000", expected 1 to 1000`},
		{"H 0\nS 1 0\n1 1\n", "line 2: scale factor is 0, expected a positive number"},
		{"H 0\nX 1\n1 1\n", `line 2: found "X", expected a shell letter`},
		{"H 0\nS\n1 1\n", "line 2: shell line has 1 words"},
		{"H 0\nS 2\n1 1\n1 2\n", "line 4: exponent 1 appears twice"},
		{"H 0\nS 1\n1 0\n", "line 3: all coefficients of the shell are zero"},
		{"H 0\nS 1\n1e13 1\n", "line 3: exponent is 1e+13, expected a positive number from"},
		{"H 0\nS 1\n1 1e99\n", "line 3: coefficient is 1e+99, expected at most 1e+10"},
		{"H 0\nS 2\n1 1\n1.00001 -1\n", "line 4: the primitives of the shell cancel"},
		{"H 0\n" + strings.Repeat("x", 1<<17), "line 2: longer than 65536 characters"},
	} {
		_, err := basis.Read(strings.NewReader(c.text), "mine")
		if err == nil || !strings.Contains(err.Error(), c.want) || !strings.Contains(err.Error(), "mine") {
			t.Errorf("%.40q: error %v, expected %q", c.text, err, c.want)
		}
	}
}

func FuzzRead(f *testing.F) {
	f.Add(interchange)
	f.Add("element H\nS 1\n 1 1\n")
	f.Add("H 0\nSP 2 1.0\n1 2 3\n4 5 6\n****")
	f.Fuzz(func(t *testing.T, text string) {
		set, err := basis.Read(strings.NewReader(text), "fuzz")
		if err != nil {
			return
		}
		for z := 1; z <= 118; z++ {
			shells, err := set.Shells(z)
			if err != nil {
				continue
			}
			for _, s := range shells {
				if s.L < 0 || s.L > basis.MaxL || len(s.Exponents) == 0 || len(s.Exponents) != len(s.Coefficients) {
					t.Fatalf("accepted a shell of the wrong shape: %v", s)
				}
				for _, a := range s.Exponents {
					if !(a >= 1e-9 && a <= 1e12) {
						t.Fatalf("accepted exponent %v", a)
					}
				}
			}
		}
	})
}
