package measured

import (
	"bytes"
	"encoding/json"
	"math"
	"math/bits"
	"math/cmplx"
	"os"
	"testing"

	"leadline/trial/measured/record"
)

// TestGoldenOverlaps compares with overlaps that an independent program computed
// from the same records: walkers over spin orbitals, every column a mixture of
// both spins, so the sum goes over the whole sector of N electrons.
func TestGoldenOverlaps(t *testing.T) {
	text, err := os.ReadFile("record/testdata/expected.json")
	if err != nil {
		t.Fatal(err)
	}
	var all map[string]json.RawMessage
	if err := json.Unmarshal(text, &all); err != nil {
		t.Fatal(err)
	}
	checked := 0
	for name, raw := range all {
		var c struct {
			File     string           `json:"file"`
			Walkers  [][][][2]float64 `json:"walkers"`
			Overlaps [][2]float64     `json:"walker_overlaps"`
		}
		if json.Unmarshal(raw, &c) != nil || c.Walkers == nil {
			continue
		}
		file, err := os.ReadFile("record/testdata/" + c.File)
		if err != nil {
			t.Fatal(err)
		}
		d, err := NewDirect(record.At(c.File, bytes.NewReader(file), int64(len(file))), 2, 0, nil)
		if err != nil {
			t.Fatal(err)
		}
		n, electrons := d.header.Qubits, d.measured()
		if d.dets != nil {
			d.dets = d.dets[:0]
			for det := range uint64(1) << n {
				if bits.OnesCount64(det) == electrons {
					d.dets = append(d.dets, det)
				}
			}
		}
		a := d.scratch.Get()
		columns := len(c.Walkers) * electrons
		for part := range 2 {
			a.planes[part] = make([]float64, n*columns)
			for w, walker := range c.Walkers {
				for p, row := range walker {
					for k, v := range row {
						a.planes[part][p*columns+w*electrons+k] = v[part]
					}
				}
			}
		}
		d.average(a, len(c.Walkers))
		for w, got := range a.sum {
			want := complex(c.Overlaps[w][0], c.Overlaps[w][1])
			if cmplx.Abs(got-want) > 1e-12*math.Max(1, cmplx.Abs(want)) {
				t.Errorf("%s, walker %d: %v, want %v", name, w, got, want)
			}
			checked++
		}
	}
	if checked != 18 {
		t.Errorf("%d overlaps checked, want 18", checked)
	}
}
