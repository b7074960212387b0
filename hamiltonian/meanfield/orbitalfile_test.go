package meanfield

import (
	"bytes"
	"context"
	"math"
	"math/cmplx"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"gonum.org/v1/gonum/mat"

	"leadline/hamiltonian"
)

// The determinant of each orbital file has the energy and ⟨S²⟩ of the table.
func TestOrbitalFilesHaveTheirEnergies(t *testing.T) {
	for _, r := range references {
		name := r.file + ".uhf.txt"
		f, err := os.Open(filepath.Join("testdata", name))
		if err != nil {
			t.Fatal(err)
		}
		set, err := ReadOrbitals(f, name)
		f.Close()
		if err != nil {
			t.Fatal(err)
		}
		h := readIntegrals(t, r.file+".fcidump")
		if set.Basis != h.Orbitals || set.Electrons(hamiltonian.Up) != h.Up || set.Electrons(hamiltonian.Down) != h.Down {
			t.Fatalf("%s: sector %d %d %d", name, set.Basis, set.Electrons(0), set.Electrons(1))
		}
		occupied, exact := set.Real()
		if !exact {
			t.Errorf("%s: not real", name)
		}
		if e := Energy(h, occupied); math.Abs(e-r.uhf) > 1e-9 {
			t.Errorf("%s: energy %.12f, expected %.12f", name, e, r.uhf)
		}
		// ⟨S²⟩ is first order in the error of the orbitals.
		if s2 := SpinSquared(occupied); math.Abs(s2-r.s2) > 1e-7 {
			t.Errorf("%s: <S^2> %.9f, expected %.9f", name, s2, r.s2)
		}
	}
}

func TestOrbitalFileRoundTrip(t *testing.T) {
	h := readIntegrals(t, "H5_chain_R1.8_sto6g_doublet.fcidump")
	s, err := Solve(context.Background(), h, UHF, Options{})
	if err != nil {
		t.Fatal(err)
	}
	set := NewOrbitalSet(h.Orbitals, [2]*mat.Dense{s.Occupied(0), s.Occupied(1)})
	// A phase makes some numbers complex.
	for p := range h.Orbitals {
		set.Occupied[0].Set(p, 1, set.Occupied[0].At(p, 1)*cmplx.Rect(1, 0.3))
	}
	var text bytes.Buffer
	if err := WriteOrbitals(&text, set, "uhf of a chain of five\nsecond line"); err != nil {
		t.Fatal(err)
	}
	again, err := ReadOrbitals(&text, "chain.txt")
	if err != nil {
		t.Fatal(err)
	}
	if len(again.Notes) > 0 {
		t.Errorf("notes %q", again.Notes)
	}
	for spin := range 2 {
		for p := range h.Orbitals {
			for j := range h.Electrons(spin) {
				if d := cmplx.Abs(again.Occupied[spin].At(p, j) - set.Occupied[spin].At(p, j)); d > 1e-14 {
					t.Errorf("spin %d (%d,%d) differs by %.1e", spin, p, j, d)
				}
			}
		}
	}
	if _, exact := again.Real(); exact {
		t.Error("complex orbitals count as real")
	}
}

func TestOrbitalFileForms(t *testing.T) {
	text := "# one up electron, complex\n\n2 1 0   # sizes\n(0.6D0,0) # first\n( 0.8"
	text = strings.Replace(text, "( 0.8", "(0,8.0d-1)\n# end\n", 1)
	set, err := ReadOrbitals(strings.NewReader(text), "a")
	if err != nil {
		t.Fatal(err)
	}
	if v := set.Occupied[0].At(1, 0); cmplx.Abs(v-0.8i) > 1e-15 || set.Electrons(1) != 0 {
		t.Errorf("read %v", v)
	}
	set, err = ReadOrbitals(strings.NewReader("2 1 0\n0.6000001\n0.8\n"), "a")
	if err != nil {
		t.Fatal(err)
	}
	v := set.Occupied[0]
	if norm := real(v.At(0, 0)*v.At(0, 0) + v.At(1, 0)*v.At(1, 0)); math.Abs(norm-1) > 1e-15 || len(set.Notes) != 1 {
		t.Errorf("norm %v, notes %q", norm, set.Notes)
	}
}

// Complex columns that are orthonormal to 5e-7 only come out orthonormal and span
// what they spanned.
func TestOrthonormalise(t *testing.T) {
	s := complex(math.Sqrt(0.5), 0)
	before := []complex128{
		s, s * 1i,
		s * 1i, s,
		0, 5e-7 * (1 + 1i),
	}
	before[1] += 3e-7i * before[0]
	before[3] += 3e-7i * before[2]
	c := append([]complex128(nil), before...)
	if d := orthonormalise(c, 3, 2); d < 2e-7 || d > 1e-6 {
		t.Errorf("deviation %.1e", d)
	}
	if d := orthonormalise(append([]complex128(nil), c...), 3, 2); d > 1e-15 {
		t.Errorf("deviation %.1e afterwards", d)
	}
	for i := range c {
		if d := cmplx.Abs(c[i] - before[i]); d > 1e-6 {
			t.Errorf("number %d moved by %.1e", i, d)
		}
	}
}

func TestOrbitalFileErrors(t *testing.T) {
	for _, c := range []struct{ text, want string }{
		{"", "a:1: file ends, expected a line"},
		{"# nothing\n\n", "a:2: file ends"},
		{"2 1\n", "a:1: found 2 words"},
		{"2 x 1\n", `a:1: found "x", expected an integer`},
		{"1000000000 1 0\n1\n", "a:2: file ends, expected row 2 of 1000000000"},
		{"99999999999999999999 1 0\n1\n", "a:1: found \"99999999999999999999\""},
		{"2 3 0\n", "a:1: sector has 3 up electrons"},
		{"2 -1 1\n", "a:1: sector has -1 up electrons"},
		{"2 0 0\n", "a:1: sector has no electrons"},
		{"2 1 1\n1\n0\n\n1 0\n0\n", "a:5: found 2 numbers in row 1 of the down orbitals, expected 1"},
		{"2 1 0\n1\n", "a:2: file ends, expected row 2 of 2 of the up"},
		{"2 1 0\n1\nNaN\n", `a:3: found "NaN"`},
		{"2 1 0\n1\n1e999\n", `a:3: found "1e999"`},
		{"2 1 0\n1\n(0,0\n", `a:3: found "(0,0"`},
		{"2 1 0\n1\n(0)\n", `a:3: found "(0)"`},
		{"2 1 0\n\n1\n0.1\n", "a:3: the up orbitals that begin here are not orthonormal: largest deviation 1.0e-02"},
		{"2 2 0\n1 1\n0 0\n", "not orthonormal"},
		{"2 1 0\n1e200\n0\n", "not orthonormal"},
		{"2 1 0\n1\n0\n7\n", `a:4: found "7" after the last row`},
		{"2 1 0\n1\n" + strings.Repeat(" ", longestLine+1), "a:3: line longer"},
		{"\x00\x01\x02", "a:1: found 1 words"},
	} {
		if _, err := ReadOrbitals(strings.NewReader(c.text), "a"); err == nil || !strings.Contains(err.Error(), c.want) {
			t.Errorf("%.40q: %v, expected %q", c.text, err, c.want)
		}
	}
}

func FuzzReadOrbitals(f *testing.F) {
	f.Add("2 1 0\n1\n0\n")
	f.Add("2 1 1\n(0.6,0) # x\n(0,8d-1)\n1\n0\n")
	f.Add("1000000000 1 1\n1e400\n")
	f.Fuzz(func(t *testing.T, text string) {
		set, err := ReadOrbitals(strings.NewReader(text), "f")
		if err != nil {
			return
		}
		var out bytes.Buffer
		if err := WriteOrbitals(&out, set, ""); err != nil {
			t.Fatal(err)
		}
		if _, err := ReadOrbitals(&out, "again"); err != nil {
			t.Fatalf("%q written as %q: %v", text, out.String(), err)
		}
	})
}
