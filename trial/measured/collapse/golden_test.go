package collapse_test

import (
	"bytes"
	"context"
	"encoding/json"
	"io"
	"math"
	"math/cmplx"
	"os"
	"path/filepath"
	"testing"

	"leadline/trial/measured/calibrate"
	"leadline/trial/measured/collapse"
	"leadline/trial/measured/record"
)

const goldenDir = "../record/testdata"

// load reads a golden record into memory.
func load(t *testing.T, file string) (*record.Header, []*record.Setting) {
	t.Helper()
	text, err := os.ReadFile(filepath.Join(goldenDir, file))
	if err != nil {
		t.Fatal(err)
	}
	rd, err := record.Open(file, bytes.NewReader(text), int64(len(text)))
	if err != nil {
		t.Fatal(err)
	}
	var list []*record.Setting
	var s record.Setting
	for {
		if err := rd.Next(&s); err == io.EOF {
			return rd.Header(), list
		} else if err != nil {
			t.Fatal(err)
		}
		list = append(list, s.Clone())
	}
}

// pairs are complex numbers as [re, im].
type pairs [][2]float64

func (p pairs) at(i int) complex128 { return complex(p[i][0], p[i][1]) }

type goldenCase struct {
	File           string      `json:"file"`
	Dets           []uint64    `json:"dets"`
	Estimated      pairs       `json:"estimated_c"`
	First          pairs       `json:"first_shot_c"`
	Walkers        []pairsRows `json:"walkers"`
	WalkerOverlaps pairs       `json:"walker_overlaps"`
	F              []float64   `json:"f"`
}

type pairsRows []pairs

func golden(t *testing.T) map[string]goldenCase {
	t.Helper()
	text, err := os.ReadFile(filepath.Join(goldenDir, "expected.json"))
	if err != nil {
		t.Fatal(err)
	}
	var raw map[string]json.RawMessage
	if err := json.Unmarshal(text, &raw); err != nil {
		t.Fatal(err)
	}
	cases := make(map[string]goldenCase)
	for name, value := range raw {
		var c goldenCase
		if json.Unmarshal(value, &c) == nil && c.File != "" || name == "calibration_matching_n4" {
			cases[name] = c
		}
	}
	if len(cases) != 7 {
		t.Fatalf("%d golden cases, want 7", len(cases))
	}
	return cases
}

// TestGoldenAmplitudes compares with amplitudes that an independent program
// computed from the same records: all shots, and the first one alone.
func TestGoldenAmplitudes(t *testing.T) {
	for name, c := range golden(t) {
		if c.Dets == nil {
			continue
		}
		h, settings := load(t, c.File)
		for _, part := range []struct {
			list []*record.Setting
			want pairs
		}{{settings, c.Estimated}, {settings[:1], c.First}} {
			got, err := collapse.Masks(context.Background(), record.NewMemory(h, part.list), c.Dets, collapse.Options{})
			if err != nil {
				t.Fatal(err)
			}
			for i, d := range c.Dets {
				if cmplx.Abs(got[i]-part.want.at(i)) > 1e-12 {
					t.Errorf("%s, %d settings, det %b: %v, want %v", name, len(part.list), d, got[i], part.want.at(i))
				}
			}
		}
	}
}

func TestGoldenCalibration(t *testing.T) {
	h, settings := load(t, "calibration_matching_n4.jsonl")
	c, err := calibrate.Estimate(record.NewMemory(h, settings), 10)
	if err != nil {
		t.Fatal(err)
	}
	want := golden(t)["calibration_matching_n4"].F
	if len(want) != 5 {
		t.Fatalf("%d numbers, want 5", len(want))
	}
	for k, f := range want {
		if math.Abs(c.Kept[k]-f) > 1e-12 {
			t.Errorf("f_%d = %.15g, want %.15g", k, c.Kept[k], f)
		}
	}
}
