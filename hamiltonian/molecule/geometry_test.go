package molecule_test

import (
	"math"
	"strings"
	"testing"

	"leadline/hamiltonian/molecule"
)

const water = `3
water
O 0.0 0.0  0.1173
8 0.0 5e0 -0.4692  what follows is ignored
h 0.0 -0.7572 -0.4692

`

func TestReadXYZ(t *testing.T) {
	g, err := molecule.ReadXYZ(strings.NewReader(water), "water.xyz")
	if err != nil {
		t.Fatal(err)
	}
	want := molecule.Geometry{
		{Z: 8, Position: [3]float64{0, 0, 0.1173 / 0.529177210903}},
		{Z: 8, Position: [3]float64{0, 5 / 0.529177210903, -0.4692 / 0.529177210903}},
		{Z: 1, Position: [3]float64{0, -0.7572 / 0.529177210903, -0.4692 / 0.529177210903}},
	}
	for i := range want {
		if g[i].Z != want[i].Z {
			t.Errorf("atom %d is %d, expected %d", i, g[i].Z, want[i].Z)
		}
		for axis := range 3 {
			if math.Abs(g[i].Position[axis]-want[i].Position[axis]) > 1e-14 {
				t.Errorf("atom %d is at %v, expected %v", i, g[i].Position, want[i].Position)
			}
		}
	}
}

// Each bad file gives one sentence with the line and what was expected.
func TestReadXYZErrors(t *testing.T) {
	for _, c := range []struct{ text, want string }{
		{"", "bad.xyz, line 1: file ends, expected the number of atoms"},
		{"x\n", `bad.xyz, line 1: number of atoms is "x", expected 1 to 100000`},
		{"-1\n", `line 1: number of atoms is "-1", expected 1 to 100000`},
		{"999999999999\n", `line 1: number of atoms is "999999999999"`},
		{"2\n", "line 2: file ends, expected a comment and 2 atoms"},
		{"2\n\nH 0 0 0\n", "line 4: file ends after 1 atoms, expected 2"},
		{"1\n\nH 0 0\n", "line 3: found 3 words, expected element and three coordinates"},
		{"1\n\nXx 0 0 0\n", `line 3: "Xx" is no element`},
		{"1\n\n0 0 0 0\n", `line 3: "?" is no element`},
		{"1\n\nH 0 zero 0\n", `line 3: coordinate 2 is "zero", expected a number`},
		{"1\n\nH 0 0 NaN\n", "line 3: coordinate 3 of H is NaN bohr, expected a number within ±1e+06"},
		{"1\n\nH 0 1e300 0\n", "line 3: coordinate 2 of H is"},
		{"1\n\nH 0 0 0\nH 0 0 1\n", "line 4: found text after the last of 1 atoms, expected the end"},
		{"1\n" + strings.Repeat("x", 1<<17), "line 2: longer than 65536 characters"},
	} {
		_, err := molecule.ReadXYZ(strings.NewReader(c.text), "bad.xyz")
		if err == nil || !strings.Contains(err.Error(), c.want) {
			t.Errorf("%.40q: error %v, expected %q", c.text, err, c.want)
		}
	}
}

func FuzzReadXYZ(f *testing.F) {
	f.Add(water)
	f.Add("1\n\nH 0 0 0")
	f.Add("2\nc\nLi 1e1 -2 .3\n1 0 0 0\n\n\n")
	f.Fuzz(func(t *testing.T, text string) {
		g, err := molecule.ReadXYZ(strings.NewReader(text), "fuzz")
		if err != nil {
			return
		}
		for _, a := range g {
			if a.Z < 1 || a.Z > 118 {
				t.Fatalf("accepted element %d", a.Z)
			}
			for _, x := range a.Position {
				if !(math.Abs(x) <= 1e6) {
					t.Fatalf("accepted coordinate %v", x)
				}
			}
		}
	})
}

func TestValidate(t *testing.T) {
	for _, c := range []struct {
		geometry molecule.Geometry
		want     string
	}{
		{nil, "molecule has no atoms"},
		{molecule.Geometry{{Z: 0}}, "atom 1 has atomic number 0"},
		{molecule.Geometry{{Z: 119}}, "atom 1 has atomic number 119"},
		{molecule.Geometry{{Z: 1}, {Z: 1, Position: [3]float64{0, math.Inf(1), 0}}}, "coordinate 2 of atom 2 (H) is +Inf bohr"},
		{molecule.Geometry{{Z: 3}, {Z: 9, Position: [3]float64{5, 0, 0}}, {Z: 1, Position: [3]float64{0, 0, 0.09}}}, "atoms 1 (Li) and 3 (H) are 0.09 bohr apart, expected at least 0.1"},
	} {
		if err := c.geometry.Validate(); err == nil || !strings.Contains(err.Error(), c.want) {
			t.Errorf("error %v, expected %q", err, c.want)
		}
	}
	if err := (molecule.Geometry{{Z: 1}, {Z: 1, Position: [3]float64{0, 0, 0.11}}}).Validate(); err != nil {
		t.Error(err)
	}
}

func TestElectrons(t *testing.T) {
	g := molecule.Geometry{{Z: 8}, {Z: 1, Position: [3]float64{0, 0, 1.8}}}
	for _, c := range []struct {
		charge, unpaired, up, down int
		want                       string
	}{
		{0, 1, 5, 4, ""},
		{-1, 0, 5, 5, ""},
		{0, 9, 9, 0, ""},
		{0, 0, 0, 0, "unpaired is 0, expected an odd number: charge 0 leaves 9 electrons"},
		{1, 3, 0, 0, "unpaired is 3, expected an even number: charge 1 leaves 8 electrons"},
		{9, 0, 0, 0, "charge 9 leaves 0 electrons, expected at least 1"},
		{0, -1, 0, 0, "unpaired is -1, expected 0 to 9"},
		{0, 11, 0, 0, "unpaired is 11, expected 0 to 9"},
	} {
		up, down, err := g.Electrons(c.charge, c.unpaired)
		if c.want == "" && err != nil || c.want != "" && (err == nil || !strings.Contains(err.Error(), c.want)) {
			t.Errorf("charge %d, unpaired %d: error %v, expected %q", c.charge, c.unpaired, err, c.want)
		}
		if up != c.up || down != c.down {
			t.Errorf("charge %d, unpaired %d: %d up, %d down, expected %d, %d", c.charge, c.unpaired, up, down, c.up, c.down)
		}
	}
}

func TestCoreOrbitals(t *testing.T) {
	for z, want := range map[int]int{1: 0, 2: 0, 3: 1, 4: 1, 10: 1, 11: 5, 18: 5, 19: 9, 36: 9, 54: 18, 86: 27, 87: 43} {
		if n := (molecule.Geometry{{Z: z}}).CoreOrbitals(); n != want {
			t.Errorf("element %d: %d core orbitals, expected %d", z, n, want)
		}
	}
	if n := (molecule.Geometry{{Z: 6}, {Z: 17}, {Z: 1}}).CoreOrbitals(); n != 6 {
		t.Errorf("%d core orbitals of C, Cl and H, expected 6", n)
	}
}

func TestUnits(t *testing.T) {
	if got := 0.529177210903 * float64(molecule.Angstrom); math.Abs(got-1) > 1e-15 {
		t.Errorf("0.529177210903 Å are %v bohr", got)
	}
}
