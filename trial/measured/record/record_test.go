package record_test

import (
	"bytes"
	"crypto/sha256"
	"encoding/json"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"testing/iotest"

	"github.com/google/go-cmp/cmp"
	"github.com/google/go-cmp/cmp/cmpopts"

	"leadline/trial/measured/record"
)

// readAll reads a whole record.
func readAll(name string, r io.Reader) (*record.Reader, []*record.Setting, error) {
	rd, err := record.NewReader(name, r)
	if err != nil {
		return nil, nil, err
	}
	var list []*record.Setting
	var s record.Setting
	for {
		if err := rd.Next(&s); err == io.EOF {
			return rd, list, nil
		} else if err != nil {
			return rd, list, err
		}
		list = append(list, s.Clone())
	}
}

// reseal replaces old by new once and gives the text a right end mark.
func reseal(t *testing.T, text, old, new string) []byte {
	t.Helper()
	if strings.Count(text, old) < 1 {
		t.Fatalf("text lacks %q", old)
	}
	text = strings.Replace(text, old, new, 1)
	i := strings.LastIndex(text, `{"end":`)
	sum := sha256.Sum256([]byte(text[:i]))
	j := strings.LastIndex(text, `"sha256":"`)
	return []byte(text[:j] + fmt.Sprintf(`"sha256":"%x"}`, sum) + "\n")
}

var golden = []string{"clifford_n4", "clifford_ref_n4", "tableau_n4", "matching_n4", "matching_ref_n4",
	"orthogonal_n4", "calibration_matching_n4"}

func TestGoldenRecordsInBothForms(t *testing.T) {
	for _, name := range golden {
		text, err := os.ReadFile(filepath.Join("testdata", name+".jsonl"))
		if err != nil {
			t.Fatal(err)
		}
		rd, settings, err := readAll(name, bytes.NewReader(text))
		if err != nil {
			t.Fatal(err)
		}
		if rd.Settings() != 50 || rd.Shots() != 50 {
			t.Errorf("%s: %d settings, %d shots, want 50 and 50", name, rd.Settings(), rd.Shots())
		}
		if want := fmt.Sprintf("%x", sha256.Sum256(text[:bytes.LastIndex(text, []byte(`{"end"`))])); rd.Digest() != want {
			t.Errorf("%s: digest %s, want %s", name, rd.Digest(), want)
		}
		// Text to packed to text gives the same bytes back: the golden files
		// were written in the writer's own key order.
		var packed, again bytes.Buffer
		rewrite(t, rd.Header(), settings, &packed, record.NewPackedWriter)
		rd2, settings2, err := readAll(name, bytes.NewReader(packed.Bytes()))
		if err != nil {
			t.Fatal(err)
		}
		if d := cmp.Diff(settings, settings2, cmpopts.EquateEmpty()); d != "" {
			t.Errorf("%s: packed form differs:\n%s", name, d)
		}
		if d := cmp.Diff(rd.Header(), rd2.Header()); d != "" {
			t.Errorf("%s: packed header differs:\n%s", name, d)
		}
		rewrite(t, rd2.Header(), settings2, &again, record.NewTextWriter)
		if !bytes.Equal(text, again.Bytes()) {
			t.Errorf("%s: text form rewritten differs", name)
		}
		for form, file := range map[string][]byte{"text": text, "packed": packed.Bytes()} {
			rd, err := record.Open(name, bytes.NewReader(file), int64(len(file)))
			if err != nil {
				t.Fatal(err)
			}
			if s, n := rd.Declared(); s != 50 || n != 50 {
				t.Errorf("%s, %s: declared %d settings and %d shots, want 50 and 50", name, form, s, n)
			}
		}
	}
}

func rewrite(t *testing.T, h *record.Header, settings []*record.Setting, w io.Writer, open func(io.Writer, *record.Header) (*record.Writer, error)) {
	t.Helper()
	wr, err := open(w, h)
	if err != nil {
		t.Fatal(err)
	}
	for _, s := range settings {
		if err := wr.Write(s); err != nil {
			t.Fatal(err)
		}
	}
	if err := wr.Close(); err != nil {
		t.Fatal(err)
	}
}

func TestBadFilesGiveTheirCode(t *testing.T) {
	var codes map[string]record.Code
	text, err := os.ReadFile("testdata/bad/expected_codes.json")
	if err != nil {
		t.Fatal(err)
	}
	if err := json.Unmarshal(text, &codes); err != nil {
		t.Fatal(err)
	}
	if len(codes) != 19 {
		t.Fatalf("%d bad files, want 19", len(codes))
	}
	for name, want := range codes {
		file, err := os.ReadFile(filepath.Join("testdata", "bad", name+".jsonl"))
		if err != nil {
			t.Fatal(err)
		}
		_, _, err = readAll(name+".jsonl", bytes.NewReader(file))
		if got := record.CodeOf(err); got != want {
			t.Errorf("%s: code %s, want %s (%v)", name, got, want, err)
			continue
		}
		if !strings.HasPrefix(err.Error(), string(want)+": "+name+".jsonl:") {
			t.Errorf("%s: message %q does not begin with code, file and line", name, err)
		}
	}
}

// TestEditsGiveTheirCode goes through the refusals that the files in testdata
// leave out. Each case edits one place of a good record and repairs its
// checksum.
func TestEditsGiveTheirCode(t *testing.T) {
	cases := []struct {
		file, old, new string
		want           record.Code
	}{
		{"matching_n4", `{"s":0,`, `{"s":0,"s":0,`, record.CodeJSON},
		{"matching_n4", `"shots":{"1111":1}`, `"shots":{"1111":1,"1111":1}`, record.CodeJSON},
		{"matching_n4", `"electrons":{"alpha":1,`, `"electrons":{"alpha":1,"alpha":1,`, record.CodeJSON},
		{"matching_n4", `"version":1`, `"version":1,"version":1`, record.CodeJSON},
		{"matching_n4", `{"s":0,`, `{"s":0,"note":"x",`, record.CodeJSON},
		{"matching_n4", `"shots":{"1111":1}}`, `"shots":{"1111":1}} 5`, record.CodeJSON},
		{"matching_n4", `"pairs":[[6,1],[2,5],[7,4],[0,3]],`, ``, record.CodeJSON},
		{"matching_n4", "{\"s\":0", "\n{\"s\":0", record.CodeJSON},
		{"matching_n4", `"golden`, "\"\xff", record.CodeJSON},
		{"matching_n4", `{"end":true`, `{"end":false`, record.CodeJSON},
		{"matching_n4", `{"record":"overlap-shots"`, `{"record":"other"`, record.CodeHeader},
		{"matching_n4", `"twirl":"full"`, `"twirl":"half"`, record.CodeHeader},
		{"matching_n4", `"twirl":"full"`, `"twril":"full"`, record.CodeHeader},
		{"matching_n4", `"qubits":4`, `"qubits":"4"`, record.CodeHeader},
		{"matching_n4", `"qubits":4`, `"qubits":null`, record.CodeHeader},
		{"matching_n4", `"alpha":1`, `"alpha":3`, record.CodeHeader},
		{"matching_n4", `"alpha":1,"beta":1`, `"alpha":0,"beta":0`, record.CodeHeader},
		{"matching_n4", `"row":"vacuum"`, `"row":"full"`, record.CodeHeader},
		{"matching_n4", `"hamiltonian_sha256":"0000`, `"hamiltonian_sha256":"00G0`, record.CodeHeader},
		{"matching_n4", `"twirl":"full"`, `"seed":1.5`, record.CodeHeader},
		{"matching_n4", `"twirl":"full"`, `"top_amplitudes":[["1010",1]]`, record.CodeHeader},
		{"matching_n4", `"twirl":"full"`, `"top_amplitudes":[["1100",1,0]]`, record.CodeHeader},
		{"matching_n4", `"twirl":"full"`, `"active":{"core":[],"active":[0,2,5,8]}`, record.CodeHeader},
		{"matching_n4", `"twirl":"full"`, `"trial_energy":1e999`, record.CodeHeader},
		{"matching_n4", `"twirl":"full"`, `"trial_energy":-Infinity`, record.CodeNumber},
		{"matching_ref_n4", `"occupied":[0,1,2]`, `"occupied":[0,2,3]`, record.CodeHeader},
		{"matching_ref_n4", `"occupied":[0,1,2]`, `"occupied":[1,0,2]`, record.CodeHeader},
		{"calibration_matching_n4", `"alpha":0`, `"alpha":1`, record.CodeHeader},
		{"matching_n4", `"version":1`, `"version":1.0`, record.CodeVersion},
		{"matching_n4", `"jordan-wigner"`, `"parity"`, record.CodeConvention},
		{"matching_n4", `"alpha-then-beta"`, `"beta-then-alpha"`, record.CodeConvention},
		{"matching_n4", `"ensemble":"matching","qubits":4`, `"ensemble":"matching","qubits":5`, record.CodeConvention},
		{"matching_n4", `"ensemble":"matching"`, `"ensemble":"pauli"`, record.CodeUnsupported},
		{"matching_n4", `"qubits":4`, `"qubits":65`, record.CodeUnsupported},
		{"matching_n4", `"twirl":"full"`, `"ancilla":0`, record.CodeUnsupported},
		{"matching_n4", `[[6,1],[2,5],[7,4],[0,3]]`, `[[6,1],[2,5],[7,4]]`, record.CodeLength},
		{"matching_n4", `[[6,1],`, `[[6,1,2],`, record.CodeLength},
		{"matching_n4", `[[6,1],`, `[[8,1],`, record.CodePairing},
		{"matching_n4", `[[6,1],`, `[[6,1.0],`, record.CodePairing},
		{"matching_n4", `[[6,1],`, `[["6",1],`, record.CodePairing},
		{"matching_n4", `{"s":0,`, `{"s":-1,`, record.CodeNumber},
		{"matching_n4", `{"s":0,`, `{"s":4294967296,`, record.CodeNumber},
		{"matching_n4", `{"s":0,`, `{"s":NaN,`, record.CodeNumber},
		{"matching_n4", `"1111":1}`, `"1111":0}`, record.CodeCount},
		{"matching_n4", `"1111":1}`, `"1111":1.5}`, record.CodeCount},
		{"matching_n4", `"1111":1}`, `"1111":4294967296}`, record.CodeCount},
		{"matching_n4", `"shots":{"1111":1}`, `"shots":{}`, record.CodeCount},
		{"matching_n4", `"shots":{"1111":1}`, `"shots":null`, record.CodeCount},
		{"matching_n4", `"settings":50`, `"settings":51`, record.CodeCount},
		{"matching_n4", `"settings":50,"shots":50`, `"settings":50,"shots":49`, record.CodeCount},
		{"clifford_n4", `"R":["1010","0110"],"B":["10","00"]`, `"R":["1010","1100"],"B":["10","00"]`, record.CodeRREF},
		{"clifford_n4", `"R":["1010","0110"],"B":["10","00"]`, `"R":["1100","0100"],"B":["10","00"]`, record.CodeRREF},
		{"clifford_n4", `"R":["1010","0110"],"B":["10","00"]`, `"R":["1010","0110"],"B":["10"]`, record.CodeLength},
		{"clifford_n4", `"R":["1010","0110"],"B":["10","00"]`, `"R":["1010","0110"],"B":["100","000"]`, record.CodeLength},
		{"clifford_n4", `"R":["1010","0110"],`, `"R":["1010","0000"],`, record.CodeRank},
		{"clifford_n4", `"gl":["0011","1100","1000","1001"]`, `"gl":["0011","1100","1000","1011"]`, record.CodeRank},
		{"clifford_n4", `"gl":["0011","1100","1000","1001"]`, `"gl":["0011","1100","1000"]`, record.CodeLength},
		{"clifford_n4", `"x":"0011"`, `"x":"0021"`, record.CodeBits},
		{"clifford_n4", `"R":["1000",`, `"R":[1000,`, record.CodeBits},
		{"tableau_n4", `"r":"0000"`, `"r":"000"`, record.CodeLength},
		{"tableau_n4", `"x":["0100","1000","0010","1001"]`, `"x":["0100","1000","0010"]`, record.CodeLength},
		{"tableau_n4", `,"x":[`, `,"pairs":[[0,1]],"x":[`, record.CodeEnsemble},
		{"orthogonal_n4", `-0.20896429942920358`, `1e400`, record.CodeNumber},
		{"orthogonal_n4", `-0.20896429942920358`, `"a"`, record.CodeNumber},
		{"orthogonal_n4", `-0.20896429942920358`, `-Infinity`, record.CodeNumber},
		{"orthogonal_n4", `-0.20896429942920358`, `null`, record.CodeNumber},
	}
	for _, c := range cases {
		text, err := os.ReadFile(filepath.Join("testdata", c.file+".jsonl"))
		if err != nil {
			t.Fatal(err)
		}
		bad := reseal(t, string(text), c.old, c.new)
		if _, _, err := readAll(c.file, bytes.NewReader(bad)); record.CodeOf(err) != c.want {
			t.Errorf("%s with %q: error %v, want %s", c.file, c.new, err, c.want)
		}
	}
}

func TestCutAnywhereIsRefused(t *testing.T) {
	text, err := os.ReadFile("testdata/matching_n4.jsonl")
	if err != nil {
		t.Fatal(err)
	}
	rd, settings, err := readAll("", bytes.NewReader(text))
	if err != nil {
		t.Fatal(err)
	}
	var packed bytes.Buffer
	rewrite(t, rd.Header(), settings, &packed, record.NewPackedWriter)
	for _, file := range [][]byte{text, packed.Bytes()} {
		for cut := range file {
			if cut == len(text)-1 && &file[0] == &text[0] {
				continue // only the last line end is missing: the content is whole
			}
			if cut%7 != 0 && cut < len(file)-200 {
				continue
			}
			if _, _, err := readAll("cut", bytes.NewReader(file[:cut])); record.CodeOf(err) == "" {
				t.Fatalf("cut at %d of %d: error %v, want a refusal", cut, len(file), err)
			}
		}
	}
}

// TestPackedHostile feeds lengths and flags that no writer produces.
func TestPackedHostile(t *testing.T) {
	text, err := os.ReadFile("testdata/clifford_n4.jsonl")
	if err != nil {
		t.Fatal(err)
	}
	rd, settings, err := readAll("", bytes.NewReader(text))
	if err != nil {
		t.Fatal(err)
	}
	var b bytes.Buffer
	rewrite(t, rd.Header(), settings[:1], &b, record.NewPackedWriter)
	good := b.Bytes()
	body := 12 + int(good[8]) + int(good[9])<<8
	edit := func(at int, values ...byte) []byte {
		c := bytes.Clone(good)
		copy(c[at:], values)
		return c
	}
	outcomes := body + 4 + 2 + 8*(4+4+4+1)
	for _, c := range []struct {
		name string
		file []byte
		want record.Code
	}{
		{"header length", edit(8, 255, 255, 255, 255), record.CodeHeader},
		{"k", edit(body+4, 5), record.CodeLength},
		{"flags", edit(body+5, 7), record.CodeUnsupported},
		{"R bits", edit(body+6+7, 1), record.CodeBits},
		{"outcome count", edit(outcomes, 255, 255, 255, 255), record.CodeLength},
		{"outcome count within bounds", edit(outcomes, 0, 0, 80, 0), record.CodeTruncated},
		{"no outcome", edit(outcomes, 0), record.CodeCount},
		{"outcome bits", edit(outcomes+4, 16), record.CodeBits},
		{"outcome zero", edit(outcomes+12, 0), record.CodeCount},
		{"checksum", edit(len(good)-1, good[len(good)-1]+1), record.CodeChecksum},
		{"tail", append(bytes.Clone(good), 0), record.CodeLength},
	} {
		if _, _, err := readAll(c.name, bytes.NewReader(c.file)); record.CodeOf(err) != c.want {
			t.Errorf("%s: error %v, want %s", c.name, err, c.want)
		}
	}
}

func TestWriterRefuses(t *testing.T) {
	h := &record.Header{Ensemble: record.Matching, Qubits: 4, Kind: record.Trial, Up: 1, Down: 1, Order: record.Blocked,
		Bits: record.Q0Last, HamiltonianSHA256: record.UnknownHash, OrbitalsSHA256: record.UnknownHash}
	good := &record.Setting{ID: 1, Pairs: []uint8{0, 1, 2, 3, 4, 5, 6, 7}, Shots: []record.Outcome{{Bits: 1, Count: 2}}}
	bad := good.Clone()
	bad.ID, bad.Pairs[0] = 2, 7
	wr, err := record.NewTextWriter(io.Discard, h)
	if err != nil {
		t.Fatal(err)
	}
	if err := wr.Write(good); err != nil {
		t.Fatal(err)
	}
	if err := wr.Write(good); record.CodeOf(err) != record.CodeDuplicate {
		t.Errorf("same id: %v", err)
	}
	wr, _ = record.NewPackedWriter(io.Discard, h)
	if err := wr.Write(bad); record.CodeOf(err) != record.CodePairing {
		t.Errorf("bad pairs: %v", err)
	}
	h.Up = 3
	if _, err := record.NewTextWriter(io.Discard, h); record.CodeOf(err) != record.CodeHeader {
		t.Errorf("bad header: %v", err)
	}
}

func TestBitOrder(t *testing.T) {
	h := &record.Header{Ensemble: record.Matching, Qubits: 4, Kind: record.Trial, Up: 1, Down: 1, Order: record.Blocked,
		Bits: record.Q0Last, HamiltonianSHA256: record.UnknownHash, OrbitalsSHA256: record.UnknownHash}
	s := &record.Setting{Pairs: []uint8{0, 1, 2, 3, 4, 5, 6, 7}, Shots: []record.Outcome{{Bits: 0b0001, Count: 2}, {Bits: 0b0110, Count: 1}}}
	var b bytes.Buffer
	rewrite(t, h, []*record.Setting{s}, &b, record.NewTextWriter)
	if !strings.Contains(b.String(), `"shots":{"0001":2,"0110":1}`) {
		t.Errorf("qubit 0 is not printed last:\n%s", b.String())
	}
	_, got, err := readAll("", &b)
	if err != nil {
		t.Fatal(err)
	}
	if d := cmp.Diff([]*record.Setting{s}, got, cmpopts.EquateEmpty()); d != "" {
		t.Error(d)
	}
}

func TestSpatialWindow(t *testing.T) {
	h := record.Header{Qubits: 4, Order: record.Blocked, Active: &record.Window{Core: []int{0, 6}, Active: []int{1, 3, 7, 9}}}
	core, active, err := h.SpatialWindow()
	if err != nil || !cmp.Equal(core, []int{0}) || !cmp.Equal(active, []int{1, 3}) {
		t.Errorf("blocked: core %v, active %v, error %v", core, active, err)
	}
	h.Order, h.Active = record.Interleaved, &record.Window{Core: []int{0, 1}, Active: []int{2, 3, 6, 7}}
	core, active, err = h.SpatialWindow()
	if err != nil || !cmp.Equal(core, []int{0}) || !cmp.Equal(active, []int{1, 3}) {
		t.Errorf("interleaved: core %v, active %v, error %v", core, active, err)
	}
	for _, w := range []record.Window{{Active: []int{0, 1}}, {Active: []int{1, 2, 3, 4}}, {Core: []int{2, 3}, Active: []int{2, 3, 6, 7}}, {Active: []int{-2, -1, 2, 3}}} {
		h.Active = &w
		if _, _, err := h.SpatialWindow(); err == nil {
			t.Errorf("window %v: no error", w)
		}
	}
}

// TestRestarted reads records that cannot be looked at from their end: the
// totals are known all the same, and what is cut short is refused with its place.
func TestRestarted(t *testing.T) {
	for _, name := range []string{"matching_n4", "tableau_n4"} {
		content, err := os.ReadFile(filepath.Join("testdata", name+".jsonl"))
		if err != nil {
			t.Fatal(err)
		}
		opened := 0
		open := func(content []byte) record.Source {
			return record.Restarted(name, func() (io.Reader, error) {
				opened++
				return iotest.HalfReader(bytes.NewReader(content)), nil
			})
		}
		source := open(content)
		for range 2 {
			st, err := source()
			if err != nil {
				t.Fatal(err)
			}
			settings, shots := st.Declared()
			if total, err := record.Total(st); err != nil || total != settings || settings != 50 || shots < 50 {
				t.Errorf("%s: %d settings and %d shots declared, total %d, %v", name, settings, shots, total, err)
			}
		}
		if opened != 3 {
			t.Errorf("%s: opened %d times for two readings, expected 3", name, opened)
		}
		st, err := open(content[:len(content)/2])()
		if err != nil {
			t.Fatal(err)
		}
		_, err = record.Total(st)
		if code := record.CodeOf(err); code != record.CodeTruncated && code != record.CodeJSON {
			t.Errorf("%s cut short: %v", name, err)
		}
	}
}
