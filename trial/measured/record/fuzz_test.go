package record_test

import (
	"bytes"
	"os"
	"path/filepath"
	"testing"

	"github.com/google/go-cmp/cmp"
	"github.com/google/go-cmp/cmp/cmpopts"

	"leadline/trial/measured/record"
)

// FuzzReader checks that no input makes the reader panic, that every refusal
// has a code, and that what it accepts survives a round trip in both forms.
func FuzzReader(f *testing.F) {
	for _, name := range golden {
		text, err := os.ReadFile(filepath.Join("testdata", name+".jsonl"))
		if err != nil {
			f.Fatal(err)
		}
		rd, settings, err := readAll(name, bytes.NewReader(text))
		if err != nil {
			f.Fatal(err)
		}
		for _, open := range []func(*bytes.Buffer) (*record.Writer, error){
			func(b *bytes.Buffer) (*record.Writer, error) { return record.NewTextWriter(b, rd.Header()) },
			func(b *bytes.Buffer) (*record.Writer, error) { return record.NewPackedWriter(b, rd.Header()) },
		} {
			var b bytes.Buffer
			wr, err := open(&b)
			if err != nil {
				f.Fatal(err)
			}
			for _, s := range settings[:2] {
				if err := wr.Write(s); err != nil {
					f.Fatal(err)
				}
			}
			if err := wr.Close(); err != nil {
				f.Fatal(err)
			}
			f.Add(b.Bytes())
		}
	}
	f.Fuzz(func(t *testing.T, file []byte) {
		rd, settings, err := readAll("fuzz", bytes.NewReader(file))
		if err != nil {
			if record.CodeOf(err) == "" {
				t.Fatalf("refusal without code: %v", err)
			}
			return
		}
		for packed := range 2 {
			var b bytes.Buffer
			open := record.NewTextWriter
			if packed == 1 {
				open = record.NewPackedWriter
				for _, s := range settings {
					if s.ID == 1<<32-1 {
						return // that id is for text only
					}
				}
			}
			rewrite(t, rd.Header(), settings, &b, open)
			_, again, err := readAll("again", &b)
			if err != nil {
				t.Fatal(err)
			}
			// The order of outcomes within a setting is free.
			byBits := cmpopts.SortSlices(func(a, b record.Outcome) bool { return a.Bits < b.Bits })
			if d := cmp.Diff(settings, again, cmpopts.EquateEmpty(), byBits); d != "" {
				t.Fatal(d)
			}
		}
	})
}
