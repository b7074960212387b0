package record

import (
	"bytes"
	"os"
	"path/filepath"
	"testing"

	"github.com/google/go-cmp/cmp"
	"github.com/google/go-cmp/cmp/cmpopts"
)

// scanAgrees checks that what the scanner accepts, the parser reads alike.
func scanAgrees(t *testing.T, line []byte, h *Header) bool {
	var fast, slow Setting
	if !scanSetting(line, h, &fast) {
		return false
	}
	m, e := object(line)
	if e == nil {
		e = parseSetting(m, h, &slow)
	}
	if e != nil {
		t.Fatalf("the scanner accepts %q, the parser refuses it: %v", line, e)
	}
	if d := cmp.Diff(fast, slow, cmpopts.EquateEmpty()); d != "" {
		t.Fatalf("%q reads differently (-scanner +parser):\n%s", line, d)
	}
	return true
}

func headers(n int) []*Header {
	var list []*Header
	for _, e := range []Ensemble{Matching, Lagrangian, Tableau, Orthogonal} {
		for _, b := range []BitOrder{Q0First, Q0Last} {
			list = append(list, &Header{Ensemble: e, Qubits: n, Kind: Trial, Up: 1, Down: 1, Order: Blocked, Bits: b,
				HamiltonianSHA256: UnknownHash, OrbitalsSHA256: UnknownHash})
		}
	}
	return list
}

// goldenLines returns the setting lines of the golden records.
func goldenLines(tb testing.TB) [][]byte {
	var lines [][]byte
	files, err := filepath.Glob("testdata/*.jsonl")
	if err != nil || len(files) != 7 {
		tb.Fatalf("%d golden files, error %v", len(files), err)
	}
	for _, f := range files {
		text, err := os.ReadFile(f)
		if err != nil {
			tb.Fatal(err)
		}
		all := bytes.Split(bytes.TrimSpace(text), []byte("\n"))
		lines = append(lines, all[1:len(all)-1]...)
	}
	return lines
}

func TestScannerTakesGoldenLines(t *testing.T) {
	hs := headers(4)
	for _, line := range goldenLines(t) {
		spaced := bytes.ReplaceAll(bytes.ReplaceAll(line, []byte(","), []byte(", ")), []byte(":"), []byte(": "))
		for _, l := range [][]byte{line, spaced} {
			taken := 0
			for _, h := range hs {
				if scanAgrees(t, l, h) {
					taken++
				}
			}
			if taken != 2 { // one ensemble, two bit orders
				t.Errorf("%d headers take %q, want 2", taken, l)
			}
		}
	}
}

// TestScannerLeavesTheRest lists lines that only the parser may judge.
func TestScannerLeavesTheRest(t *testing.T) {
	h := headers(2)[0]
	for _, line := range []string{
		`{"s":01,"pairs":[[0,1],[2,3]],"shots":{"00":1}}`,
		`{"s":1,"pairs":[[0,1],[2,4]],"shots":{"00":1}}`,
		`{"s":1,"pairs":[[0,1],[2,3]],"shots":{"00":1,"00":1}}`,
		`{"s":1,"pairs":[[0,1],[2,3]],"shots":{"00":1,}}`,
		`{"s":1,"pairs":[[0,1],[2,3]],"shots":{"00":0}}`,
		`{"s":1,"pairs":[[0,1],[2,3]],"shots":{"00":1}`,
		`{"s":1,"pairs":[[0,1],[2,3]],"shots":{"00":1}}}`,
		`{"s":1,"pairs":[[0,1],[2,3]],"shots":{"0\u0030":1}}`,
		`{"s":4294967296,"pairs":[[0,1],[2,3]],"shots":{"00":1}}`,
		`{"s":1.0,"pairs":[[0,1],[2,3]],"shots":{"00":1}}`,
		`{"shots":{"00":1},"s":1,"pairs":[[0,1],[2,3]]}`,
	} {
		if scanSetting([]byte(line), h, new(Setting)) {
			t.Errorf("scanner takes %q", line)
		}
	}
}

func FuzzScannerAgreesWithParser(f *testing.F) {
	for i, line := range goldenLines(f) {
		if i%25 == 0 && len(line) < 500 {
			f.Add(line)
		}
	}
	f.Add([]byte(`{"s": 7, "pairs": [[0,1],[2,3],[4,5],[6,7]], "shots": {"0000":1,"1111":2}}`))
	hs := headers(4)
	f.Fuzz(func(t *testing.T, line []byte) {
		for _, h := range hs {
			scanAgrees(t, line, h)
		}
	})
}
