package fcidump

import (
	"bytes"
	"compress/gzip"
	"context"
	"errors"
	"io"
	"math"
	"os"
	"slices"
	"strings"
	"testing"
	"testing/iotest"

	"leadline/hamiltonian"
	"leadline/hamiltonian/internal/fock"
)

func open(t testing.TB, name string) []byte {
	t.Helper()
	text, err := os.ReadFile("testdata/" + name)
	if err != nil {
		t.Fatal(err)
	}
	return text
}

func read(t testing.TB, text string) *Integrals {
	t.Helper()
	f, err := Read(t.Context(), strings.NewReader(text), "test", nil)
	if err != nil {
		t.Fatal(err)
	}
	return f
}

// TestEnergies diagonalises the files' Hamiltonians, from the integrals and from
// both forms of the factorised one. The full-CI energies were computed for this
// project by a string code over integrals of libint2 and checked against a dense
// diagonalisation; the files are of the same origin.
func TestEnergies(t *testing.T) {
	for _, test := range []struct {
		file   string
		energy float64
	}{
		{"h2.fcidump", -1.137275943617},
		{"heh+.fcidump", -2.85146618041},
		{"h4.fcidump", -1.994333484952},
		{"h5.fcidump", -2.677036500885},
		{"lih.fcidump", -7.972249851361},
	} {
		f := read(t, string(open(t, test.file)))
		h, residual, err := f.Hamiltonian(t.Context(), 1e-12)
		if err != nil {
			t.Fatal(err)
		}
		if err := h.Validate(); err != nil {
			t.Error(err)
		}
		if residual > 1e-11 || slices.Contains(h.Factors.Sign, -1) {
			t.Errorf("%s: residual %g, signs %v, expected below 1e-11 and +1", test.file, residual, h.Factors.Sign)
		}
		space := fock.New(f.Sector)
		exact := fock.Lowest(space.Integrals(f.Constant, f.OneBody.At, f.TwoElectron))
		if math.Abs(exact-test.energy) > 1e-10 {
			t.Errorf("%s: energy %.12f, expected %.12f", test.file, exact, test.energy)
		}
		if e := fock.Lowest(space.Normal(h)); math.Abs(e-exact) > 1e-10 {
			t.Errorf("%s: normal-ordered form gives %.12f, expected %.12f", test.file, e, exact)
		}
		if e := fock.Lowest(space.Squares(h)); math.Abs(e-exact) > 1e-10 {
			t.Errorf("%s: form in squares gives %.12f, expected %.12f", test.file, e, exact)
		}
	}
}

// same compares everything but orbital energies.
func same(t *testing.T, got, want *Integrals) {
	t.Helper()
	if got.Sector != want.Sector || got.Constant != want.Constant ||
		!slices.Equal(got.TwoBody, want.TwoBody) || !slices.Equal(got.OneBody.RawSymmetric().Data, want.OneBody.RawSymmetric().Data) {
		t.Errorf("got %+v\nexpected %+v", got, want)
	}
}

const plain = "&FCI NORB=2,NELEC=2,MS2=0,\n ORBSYM=1,5,\n ISYM=1,\n&END\n" +
	"0.5 1 1 1 1\n0.25 2 1 2 1\n0.375 2 2 1 1\n0.75 2 2 2 2\n-1.25 1 1 0 0\n0.125 2 1 0 0\n-0.5 2 2 0 0\n-0.75 1 0 0 0\n0.6875 0 0 0 0\n"

func TestStyles(t *testing.T) {
	want := read(t, plain)
	if want.TwoElectron(0, 0, 1, 1) != 0.375 || want.TwoElectron(1, 0, 0, 1) != 0.25 || want.OneBody.At(0, 1) != 0.125 ||
		want.Constant != 0.6875 || want.OrbitalEnergies[0] != -0.75 || !slices.Equal(want.Symmetry, []int{1, 5}) || want.StateSymmetry != 1 {
		t.Fatalf("read %+v", want)
	}
	var zipped bytes.Buffer
	zip := gzip.NewWriter(&zipped)
	io.WriteString(zip, plain)
	zip.Close()
	for name, text := range map[string]string{
		"slash":           strings.Replace(plain, "&END", "/", 1),
		"slash on line":   strings.Replace(plain, "\n&END", " /", 1),
		"dollar":          strings.ReplaceAll(plain, "&", "$"),
		"lower case":      strings.ToLower(plain),
		"one line":        strings.Replace(plain, ",\n", ",", 3),
		"blanks":          strings.NewReplacer("&FCI", "\n &FCI", "=", " =\t", ",", " , ").Replace(plain),
		"line feed":       strings.ReplaceAll(plain, "\n", "\r\n"),
		"return":          strings.ReplaceAll(plain, "\n", "\r"),
		"empty lines":     strings.ReplaceAll(plain, "\n", "\n\n"),
		"tabs":            strings.ReplaceAll(plain, " ", " \t "),
		"no last newline": strings.TrimSpace(plain),
		"mark":            "\xef\xbb\xbf" + plain,
		"exponents":       strings.NewReplacer("0.375", "3.75D-01", "-1.25", "-125d-2", "0.125", "+.125E+00").Replace(plain),
		"comment":         strings.Replace(plain, "ISYM", "! words = &END /\n ISYM", 1),
		"unknown keys":    strings.Replace(plain, "ISYM", "NPROP=1,2 TITLE='a / b', IUHF=0, UHF=.FALSE., ISYM", 1),
		"repeat":          strings.Replace(strings.Replace(plain, "ORBSYM=1,5", "ORBSYM=2*5", 1), "1,5", "1,5", 1),
		"permuted":        strings.NewReplacer("2 1 2 1", "1 2 2 1", "2 2 1 1", "1 1 2 2", "2 1 0 0", "1 2 0 0").Replace(plain),
		"agreeing":        plain + "0.250000000001 1 2 1 2\n-1.25 1 1 0 0\n0.6875 0 0 0 0\n",
		"gzip":            zipped.String(),
	} {
		t.Run(name, func(t *testing.T) {
			for _, r := range []io.Reader{strings.NewReader(text), iotest.OneByteReader(strings.NewReader(text))} {
				got, err := Read(t.Context(), r, "test", nil)
				if err != nil {
					t.Fatal(err)
				}
				same(t, got, want)
			}
		})
	}
}

// TestPermutations gives (43|21) in each of its eight orders.
func TestPermutations(t *testing.T) {
	for _, order := range []string{"4 3 2 1", "3 4 2 1", "4 3 1 2", "3 4 1 2", "2 1 4 3", "1 2 4 3", "2 1 3 4", "1 2 3 4"} {
		f := read(t, "&FCI NORB=4 NELEC=2 /\n0.5 "+order+"\n0 0 0 0 0\n")
		if f.TwoElectron(3, 2, 1, 0) != 0.5 || f.TwoElectron(3, 1, 2, 0) != 0 {
			t.Errorf("order %s: %v", order, f.TwoBody)
		}
	}
}

// TestMatrix compares the columns and the diagonal with single elements.
func TestMatrix(t *testing.T) {
	f := read(t, string(open(t, "lih.fcidump")))
	n := f.Dim()
	column, diagonal := make([]float64, n), make([]float64, n)
	f.Diagonal(diagonal)
	for p := range 6 {
		for q := range p + 1 {
			j := hamiltonian.Pair(p, q)
			f.Column(j, column)
			if diagonal[j] != f.TwoElectron(p, q, p, q) {
				t.Errorf("diagonal of pair %d,%d is %v", p, q, diagonal[j])
			}
			for r := range 6 {
				for s := range 6 {
					if column[hamiltonian.Pair(r, s)] != f.TwoElectron(r, s, p, q) {
						t.Errorf("element %d,%d,%d,%d is %v", r, s, p, q, column[hamiltonian.Pair(r, s)])
					}
				}
			}
		}
	}
}

func TestOpenShells(t *testing.T) {
	for header, want := range map[string][2]int{"NELEC=5 MS2=1": {3, 2}, "NELEC=5 MS2=-3": {1, 4}, "NELEC=4": {2, 2}, "NELEC=2,MS2=2": {2, 0}} {
		f := read(t, "&FCI NORB=6 "+header+" /\n0 0 0 0 0\n")
		if f.Up != want[0] || f.Down != want[1] {
			t.Errorf("%s: %d up, %d down, expected %v", header, f.Up, f.Down, want)
		}
	}
}

func TestErrors(t *testing.T) {
	const head = "&FCI NORB=2,NELEC=2,MS2=0 &END\n"
	var zipped bytes.Buffer
	zip := gzip.NewWriter(&zipped)
	io.WriteString(zip, plain)
	zip.Close()
	for _, test := range []struct{ text, want string }{
		{"", "test: file is empty"},
		{"\n", `test:2: file starts with "\n", expected &FCI`},
		{"\x7fELF\x02\x01", `test:1: file starts with "\x7fELF\x02\x01", expected &FCI`},
		{"\nH 0 0 0\n", `test:2: file starts with "\nH 0 0 0\n", expected &FCI`},
		{strings.Repeat("x", 1000), `test:1: file starts with "xxxxxxxxxxxxxxxx", expected &FCI`},
		{"&FCI", "test:1: file ends inside the header, expected &END or / after it"},
		{"&FCI NORB=2,NELEC=2\n", "test:2: file ends inside the header, expected &END or / after it"},
		{"&FCI NORB=2\x00", "test:1: byte 0x00 in the header, expected text"},
		{"&FCI " + strings.Repeat("A ", headerLimit), "test:1: header has no end within 1048576 bytes, expected &END or /"},
		{"&FCI NORB=2,NELEC=2 / 0.5 1 1 1 1\n", "test:1: text after the end of the header, expected a new line"},
		{"&FCI NELEC=2 /\n", "test:1: header has no NORB"},
		{"&FCI NORB=2 /\n", "test:1: header has no NELEC"},
		{"&FCI =2 /\n", "test:1: = without a key before it in the header"},
		{"&FCI NORB=2,NELEC=2,\nNORB=2 /\n", "test:2: NORB is given twice in the header, first at line 1"},
		{"&FCI NORB=two /\n", `test:1: NORB="two", expected an integer`},
		{"&FCI NORB=2,4 /\n", "test:1: NORB has 2 values, expected one integer"},
		{"&FCI NORB=99999999999 /\n", `test:1: NORB="99999999999", expected an integer`},
		{"&FCI NORB=0,NELEC=2 /\n", "test:1: NORB=0, expected at least 1"},
		{"&FCI NORB=1000000000,NELEC=2 /\n1 1 1 1 1\n", "test:1: NORB=1000000000 needs 1.02e+27 GB of memory for its integrals, limit is 0.1 GB"},
		{"&FCI NORB=2,NELEC=5 /\n", "test:1: NELEC=5, expected 1 to 4 (two per orbital)"},
		{"&FCI NORB=2,NELEC=0 /\n", "test:1: NORB=2, NELEC=0, MS2=0: sector has no electrons"},
		{"&FCI NORB=2,NELEC=2,MS2=4 /\n", "test:1: MS2=4, expected at most NELEC=2"},
		{"&FCI NORB=2,NELEC=3,MS2=3 /\n", "test:1: NORB=2, NELEC=3, MS2=3: sector has 3 up electrons, expected 0 to 2 (the number of orbitals)"},
		{"&FCI NORB=2,NELEC=2,\nMS2=1\n/\n", "test:3: NELEC=2 and MS2=1 contradict each other, expected both even or both odd (MS2 is the number of up minus down electrons)"},
		{"&FCI NORB=2,NELEC=2,ORBSYM=1 /\n", "test:1: ORBSYM has 1 labels, expected NORB=2"},
		{"&FCI NORB=2,NELEC=2,ORBSYM=99999999*1 /\n", `test:1: ORBSYM holds "99999999*1", expected integers`},
		{"&FCI NORB=2,NELEC=2,\nIUHF=1 /\n", "test:2: integrals are spin-resolved (IUHF=1), expected spin-free integrals over one set of orbitals, as a restricted calculation gives"},
		{"&FCI NORB=2,NELEC=2,UHF=.TRUE. /\n", "test:1: integrals are spin-resolved (UHF=.TRUE.), expected spin-free integrals over one set of orbitals, as a restricted calculation gives"},
		{head, "test:1: file ends after the header, expected integrals"},
		{head + "0.5 1 1 1 1\n", "test:2: file ends without a constant energy (indices 0 0 0 0), expected one, zero or not: the file looks cut off"},
		{head + "0.5 1 1 1", "test:2: line has 4 numbers, expected a value and four indices"},
		{head + "0.5 1 1 1 1 comment\n", `test:2: "comment" after the four indices, expected the end of the line`},
		{head + "\n0.5 1 1 1 3\n", "test:3: index 3, expected at most NORB=2"},
		{head + "0.5 1 1 1 99999999999999999999999999\n", "test:2: index 2147483647, expected at most NORB=2"},
		{head + "0.5 1 1 1 -1\n", `test:2: index "-1", expected an integer from 0 to NORB=2`},
		{head + "0.5 1 1 1 1.0\n", `test:2: index "1.0", expected an integer from 0 to NORB=2`},
		{head + "NaN 1 1 1 1\n", `test:2: value "NaN", expected a finite number`},
		{head + "-Infinity 1 1 1 1\n", `test:2: value "-Infinity", expected a finite number`},
		{head + "1e999 1 1 1 1\n", `test:2: value "1e999", expected a finite number`},
		{head + "****** 1 1 1 1\n", `test:2: value "******", expected a finite number`},
		{head + "0x1p3 1 1 1 1\n", `test:2: value "0x1p3", expected a finite number`},
		{head + "\x00\x01 1 1 1 1\n", `test:2: value "\x00\x01", expected a finite number`},
		{head + "0.5 2 2 0 1\n", "test:2: indices 2 2 0 1 name no integral, expected i j k l, i j 0 0, i 0 0 0 or 0 0 0 0"},
		{head + "0.5 0 0 1 1\n", "test:2: indices 0 0 1 1 name no integral, expected i j k l, i j 0 0, i 0 0 0 or 0 0 0 0"},
		{head + "0.5 2 1 1 1\n0.5 1 1 1 1\n0.625 1 1 2 1\n", "test:4: integral 1 1 2 1 is 0.625, but an earlier line gives it as 0.5"},
		{head + "0.5 2 1 0 0\n0 1 2 0 0\n", "test:3: integral 1 2 0 0 is 0, but an earlier line gives it as 0.5"},
		{head + "0.5 0 0 0 0\n0.6 0 0 0 0\n", "test:3: second constant energy 0.6, first was 0.5 at line 2: so files separate their blocks of spin-resolved integrals, expected spin-free ones"},
		{head + "0.5 1 1 1 1\n0 0 0 0 0\n0.5 1 1 1 1\n0 0 0 0 0\n", "test:5: second constant energy 0, first was 0 at line 3: so files separate their blocks of spin-resolved integrals, expected spin-free ones"},
		{head + "(0.5,0.0) 1 1 1 1\n", `test:2: value "(0.5,0.0)" looks complex, expected real integrals`},
		{head + "0.5 0.0 1 1 1 1\n", "test:2: two values before the four indices look like complex integrals, expected real ones"},
		{head + strings.Repeat("1", chunk+1), "test:2: line is longer than 262144 bytes, expected a value and four indices"},
		{zipped.String()[:zipped.Len()-9], "test: compressed data end early, expected a whole gzip file: unexpected EOF"},
		{"\x1f\x8bxxxxxxxxxxxxxxxxxx", "test: gzip: invalid header"},
	} {
		f, err := ReadWithin(t.Context(), strings.NewReader(test.text), "test", 1e8, nil)
		if f != nil || err == nil || err.Error() != test.want {
			t.Errorf("%.60q:\n     got %v\nexpected %s", test.text, err, test.want)
		}
	}
}

// TestCutOff cuts a file everywhere: every part is refused, but for the last line
// break.
func TestCutOff(t *testing.T) {
	text := string(open(t, "h2.fcidump"))
	text = strings.TrimSpace(text)
	for n := range len(text) {
		if _, err := Read(t.Context(), strings.NewReader(text[:n]), "test", nil); err == nil {
			t.Errorf("the first %d of %d bytes are accepted", n, len(text))
		}
	}
}

func TestReadFailure(t *testing.T) {
	broken := errors.New("disk on fire")
	for _, n := range []int{0, 10, 60} {
		r := io.MultiReader(strings.NewReader(plain[:n]), iotest.ErrReader(broken))
		if _, err := Read(t.Context(), r, "test", nil); !errors.Is(err, broken) {
			t.Errorf("after %d bytes: %v, expected the reader's error", n, err)
		}
	}
	ctx, cancel := context.WithCancel(t.Context())
	cancel()
	if _, err := Read(ctx, strings.NewReader(plain), "test", nil); !errors.Is(err, context.Canceled) {
		t.Errorf("got %v, expected context.Canceled", err)
	}
}

func TestProgress(t *testing.T) {
	var done int64
	if _, err := Read(t.Context(), strings.NewReader(plain), "test", func(n int64) { done = n }); err != nil || done != int64(len(plain)) {
		t.Errorf("progress ends at %d (%v), expected %d", done, err, len(plain))
	}
}

// TestModels covers integrals with on-site terms only, of both signs, and those of
// no definite sign.
func TestModels(t *testing.T) {
	for _, test := range []struct {
		name, lines string
		signs       []float64
	}{
		{"repulsive", "4 1 1 1 1\n4 2 2 2 2\n", []float64{1, 1}},
		{"attractive", "-4 1 1 1 1\n-4 2 2 2 2\n", []float64{-1, -1}},
		{"neighbours", "1 1 1 1 1\n1 2 2 2 2\n3 1 1 2 2\n", []float64{1, -1}},
		{"exchange", "-0.5 2 1 2 1\n", []float64{-1}},
	} {
		f := read(t, "&FCI NORB=2 NELEC=2 /\n"+test.lines+"-1 2 1 0 0\n0.5 0 0 0 0\n")
		h, residual, err := f.Hamiltonian(t.Context(), 1e-8)
		if err != nil {
			t.Fatalf("%s: %v", test.name, err)
		}
		if residual > 1e-14 || !slices.Equal(h.Factors.Sign, test.signs) {
			t.Errorf("%s: signs %v, residual %g, expected %v and 0", test.name, h.Factors.Sign, residual, test.signs)
		}
		space := fock.New(f.Sector)
		exact := fock.Lowest(space.Integrals(f.Constant, f.OneBody.At, f.TwoElectron))
		if e := fock.Lowest(space.Squares(h)); math.Abs(e-exact) > 1e-12 {
			t.Errorf("%s: form in squares gives %.14f, expected %.14f", test.name, e, exact)
		}
	}
}
