package main

import (
	"context"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"leadline/trial/measured/collapse"
	"leadline/trial/measured/record"
)

// TestCompressedRecords reads the example's record, and refuses it cut short or
// damaged with a code, wherever that is met.
func TestCompressedRecords(t *testing.T) {
	whole, err := os.ReadFile(filepath.Join("example", "measured8", "record.jsonl.gz"))
	if err != nil {
		t.Fatal(err)
	}
	damaged := append([]byte(nil), whole...)
	damaged[len(damaged)/2] ^= 0x55
	for _, c := range []struct {
		name    string
		content []byte
		codes   string
	}{
		{"whole", whole, ""},
		{"cut", whole[:len(whole)/2], "E_TRUNCATED"},
		{"head", whole[:15], "E_TRUNCATED"},
		{"magic", whole[:2], "E_TRUNCATED"},
		// What a wrong bit does depends on where it is.
		{"damaged", damaged, "E_CHECKSUM E_TRUNCATED E_JSON"},
	} {
		name := filepath.Join(t.TempDir(), c.name+".gz")
		if err := os.WriteFile(name, c.content, 0o644); err != nil {
			t.Fatal(err)
		}
		r, err := openRecord(name)
		if err != nil {
			t.Fatal(err)
		}
		e, err := collapse.Run(context.Background(), r.source, collapse.Options{})
		if c.codes == "" {
			if err != nil || e.Provenance.Settings != 1000 || e.Provenance.Shots != 100000 {
				t.Errorf("%s: %v, %+v", c.name, err, e)
			}
		} else if code := string(record.CodeOf(err)); code == "" || !strings.Contains(c.codes, code) || !strings.HasPrefix(err.Error(), code+": "+name) {
			t.Errorf("%s: error %v, expected one of %s", c.name, err, c.codes)
		}
		if err := r.close(); err != nil {
			t.Error(err)
		}
	}
}
