package expansion

import (
	"bytes"
	"errors"
	"fmt"
	"math"
	"os"
	"reflect"
	"regexp"
	"strings"
	"testing"

	"gonum.org/v1/gonum/mat"
)

const plainFile = `# expansion 1
# orbitals 6  core 1  active 4  up 2  down 2
# basis 0123abcd
# source record of the ring,  taken twice

# a comment
1100 1100   0.97310   0.00000
1010 1010  -0.12004   0.00013   0.00210
`

func TestRead(t *testing.T) {
	for _, text := range []string{plainFile, strings.ReplaceAll(plainFile, "\n", "\r\n")} {
		got, err := Read(strings.NewReader(text), "ring.txt")
		if err != nil {
			t.Fatal(err)
		}
		want := &Expansion{Orbitals: 6, Core: 1, Active: 4, Up: 2, Down: 2,
			Basis: "0123abcd", Origin: "record of the ring,  taken twice",
			Determinants: []Determinant{
				{Up: 0b0011, Down: 0b0011, Amplitude: 0.9731},
				{Up: 0b0101, Down: 0b0101, Amplitude: -0.12004 + 0.00013i, Error: 0.0021},
			}}
		if !reflect.DeepEqual(got, want) {
			t.Errorf("read %+v, expected %+v", got, want)
		}
	}
}

func TestRoundTrip(t *testing.T) {
	for k, c := range windows {
		e := c.expansion(t, uint64(k))
		e.Columns = nil
		e.Basis, e.Origin = "f00", "window "+c.name
		e.Determinants[0].Error = 1.0 / 3
		var text bytes.Buffer
		if err := e.Write(&text); err != nil {
			t.Fatal(err)
		}
		got, err := Read(&text, "file")
		if err != nil {
			t.Fatal(err)
		}
		if !reflect.DeepEqual(got, e) {
			t.Errorf("%s: read back %+v, wrote %+v", c.name, got, e)
		}
	}
}

func TestWriteRefusals(t *testing.T) {
	good := func() *Expansion {
		return &Expansion{Orbitals: 2, Active: 2, Up: 1, Determinants: []Determinant{{Up: 1, Amplitude: 1}}}
	}
	for what, spoil := range map[string]func(e *Expansion){
		"line break": func(e *Expansion) { e.Origin = "a\nb" },
		"two words":  func(e *Expansion) { e.Basis = "a b" },
		"own orbitals": func(e *Expansion) {
			e.Columns = mat.NewDense(2, 2, []float64{1, 0, 0, 1})
		},
		"not a number": func(e *Expansion) { e.Determinants[0].Amplitude = complex(math.NaN(), 0) },
		"no norm":      func(e *Expansion) { e.Determinants = nil },
	} {
		e := good()
		spoil(e)
		if err := e.Write(&bytes.Buffer{}); err == nil {
			t.Errorf("%s: written", what)
		}
	}
	if err := good().Write(failing{}); err == nil {
		t.Error("an error of the writer was lost")
	}
}

type failing struct{}

func (failing) Write([]byte) (int, error) { return 0, errors.New("disk full") }

// Each spoiled file is refused at the line that spoils it.
func TestReadRefusals(t *testing.T) {
	head := "# expansion 1\n# orbitals 6 core 1 active 4 up 2 down 1\n"
	first := head + "1100 0100 0.5 0\n"
	for _, c := range []struct{ name, text, want string }{
		{"empty", "", `x:1: file is empty`},
		{"other file", "&FCI NORB=4\n", `x:1: not an expansion file`},
		{"version", "# expansion 2\n", `x:1: expansion file of version "2", expected 1`},
		{"no header", "# expansion 1\n1100 1100 1 0\n", `x:2: determinant before the header line`},
		{"no determinant", head, `x:3: file ends without a determinant`},
		{"only comments", "# expansion 1\n# hm\n", `x:3: file ends without a header line`},
		{"huge header", "# expansion 1\n# orbitals 99999999 core 1 active 4 up 2 down 2\n", `x:2: 99999999 orbitals, expected 1 to 4096`},
		{"beyond integers", "# expansion 1\n# orbitals 99999999999999999999 core 1 active 4 up 2 down 2\n", `x:2: header value of "orbitals"`},
		{"negative", "# expansion 1\n# orbitals 6 core -1 active 4 up 2 down 2\n", `x:2: core of -1`},
		{"window too large", "# expansion 1\n# orbitals 100 core 1 active 65 up 2 down 2\n", `x:2: 65 active orbitals`},
		{"window beyond orbitals", "# expansion 1\n# orbitals 6 core 3 active 4 up 2 down 2\n", `x:2: core of 3 and 4 active orbitals do not fit into 6`},
		{"too many electrons", "# expansion 1\n# orbitals 6 core 1 active 4 up 5 down 2\n", `x:2: 5 up electrons in 4 active orbitals`},
		{"no electrons", "# expansion 1\n# orbitals 6 core 0 active 4 up 0 down 0\n", `x:2: expansion has no electrons`},
		{"header words", "# expansion 1\n# orbitals 6 core 1 active 4 alpha 2 down 2\n", `x:2: header word "alpha", expected "up"`},
		{"short header", "# expansion 1\n# orbitals 6 core 1\n", `x:2: header with 4 words`},
		{"second header", head + "# orbitals 6 core 1 active 4 up 2 down 1\n", `x:3: second header line "orbitals"`},
		{"second version", head + "# expansion 1\n", `x:3: second header line "expansion"`},
		{"fingerprint", head + "# basis a b\n", `x:3: header "basis" with 2 words`},
		{"columns", first + "1010 0100 1\n", `x:4: 3 columns`},
		{"more columns", first + "1010 0100 1 0 0.1 7\n", `x:4: 6 columns`},
		{"duplicate", first + "1010 0100 1 0\n1100 0100 0.1 0\n", `x:5: determinant repeats that of line 3`},
		{"up electrons", first + "1110 0100 1 0\n", `x:4: determinant 1110 0100 has 3 active up electrons, expected 2`},
		{"down electrons", first + "1100 0000 1 0\n", `x:4: determinant 1100 0000 has 0 active down electrons, expected 1`},
		{"outside the window", first + "11000 0100 1 0\n", `x:4: occupation "11000" of 5 orbitals, expected the 4 active ones`},
		{"short occupation", first + "110 0100 1 0\n", `x:4: occupation "110" of 3`},
		{"letters", first + "11a0 0100 1 0\n", `x:4: occupation "11a0", expected only 0 and 1`},
		{"NaN", first + "1010 0100 NaN 0\n", `x:4: column 3 is "NaN", expected a finite number`},
		{"infinite", first + "1010 0100 0 -Inf\n", `x:4: column 4 is "-Inf"`},
		{"overflow", first + "1010 0100 1e400 0\n", `x:4: column 3 is "1e400"`},
		{"large", first + "1010 0100 1e200 0\n", `x:4: determinant 1010 0100 amplitude is`},
		{"negative error", first + "1010 0100 1 0 -0.1\n", `x:4: determinant 1010 0100 standard error is`},
		{"zero norm", head + "1100 0100 0 0\n1010 0100 0 -0\n", `x:5: every amplitude is zero`},
		{"cut within a line", first + "1010 0100 0.12", `x:4: file ends within a line`},
		{"cut between lines", head + "# determinants 2\n1100 0100 0.5 0\n", `x:5: file ends after 1 of 2 determinants`},
		{"more than said", head + "# determinants 1\n1100 0100 0.5 0\n1010 0100 0.5 0\n", `x:5: more than the 1 determinants`},
		{"count", head + "# determinants -3\n", `x:3: header "determinants" is "-3"`},
		{"long line", first + strings.Repeat(" ", maxLine) + "\n", `x:4: line of more than 4096 bytes`},
		{"binary", "# expansion 1\n\x00\xff\xfe\n", `x:2: determinant before`},
	} {
		_, err := Read(strings.NewReader(c.text), "x")
		if err == nil {
			t.Errorf("%s: accepted", c.name)
			continue
		}
		got := strings.Replace(err.Error(), "file ends", "file ends", 1)
		if !strings.HasPrefix(got, c.want) || strings.Contains(got, "\n") {
			t.Errorf("%s: error %q, expected %q", c.name, got, c.want)
		}
	}
}

// Whatever prefix of a file is left, reading it ends in one error or, only at the
// end of a line, in the expansion so far; with the number of determinants in the
// header, in an error always.
func TestTruncatedFiles(t *testing.T) {
	e, err := Read(strings.NewReader(plainFile), "x")
	if err != nil {
		t.Fatal(err)
	}
	var counted bytes.Buffer
	if err := e.Write(&counted); err != nil {
		t.Fatal(err)
	}
	for n := range counted.Len() {
		if _, err := Read(bytes.NewReader(counted.Bytes()[:n]), "x"); err == nil {
			t.Errorf("the first %d bytes were accepted", n)
		}
	}
	for n := range len(plainFile) {
		if _, err := Read(strings.NewReader(plainFile[:n]), "x"); err == nil && plainFile[n-1] != '\n' {
			t.Errorf("the first %d bytes were accepted", n)
		}
	}
}

// The example of the specification is read.
func TestFormatExample(t *testing.T) {
	text, err := os.ReadFile("FORMAT.md")
	if err != nil {
		t.Fatal(err)
	}
	example := regexp.MustCompile("(?s)```\n(.*?)```").FindSubmatch(text)[1]
	example = bytes.Replace(example, []byte("5b0c…  (one word)"), []byte("5b0c"), 1)
	if e, err := Read(bytes.NewReader(example), "FORMAT.md"); err != nil || len(e.Determinants) != 3 {
		t.Errorf("example: %v, %v", e, err)
	}
}

func FuzzRead(f *testing.F) {
	f.Add([]byte(plainFile))
	f.Add([]byte("# expansion 1\n# orbitals 3 core 0 active 3 up 1 down 0\n# determinants 1\n010 000 1e0 0 1\n"))
	f.Add([]byte("# expansion 1\r\n# orbitals 64 core 0 active 64 up 1 down 0\n"))
	f.Fuzz(func(t *testing.T, text []byte) {
		e, err := Read(bytes.NewReader(text), "fuzz")
		if err != nil {
			if !strings.HasPrefix(err.Error(), "fuzz:") {
				t.Errorf("error without name and line: %v", err)
			}
			return
		}
		if err := e.Validate(); err != nil {
			t.Fatalf("accepted an invalid expansion: %v", err)
		}
		var out bytes.Buffer
		if err := e.Write(&out); err != nil {
			if len(e.Basis) > 256 || len(e.Origin) > maxLine/2 || strings.ContainsRune(e.Origin, '\r') {
				return
			}
			t.Fatalf("cannot write what was read: %v", err)
		}
		again, err := Read(&out, "again")
		if err != nil {
			t.Fatalf("cannot read what was written: %v", err)
		}
		if fmt.Sprint(again) != fmt.Sprint(e) {
			t.Errorf("read %v, again %v", e, again)
		}
	})
}
