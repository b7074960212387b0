package record_test

import (
	"bytes"
	"io"
	"math/rand/v2"
	"os"
	"path/filepath"
	"testing"

	"golang.org/x/exp/mmap"

	"leadline/trial/measured/record"
)

// benchRecord makes a record of matchings or tableaux on 16 qubits, one shot per setting.
func benchRecord(tb testing.TB, e record.Ensemble, packed bool, settings int) []byte {
	h := &record.Header{Ensemble: e, Qubits: 16, Kind: record.Trial, Up: 4, Down: 4, Order: record.Blocked,
		Bits: record.Q0First, HamiltonianSHA256: record.UnknownHash, OrbitalsSHA256: record.UnknownHash}
	var b bytes.Buffer
	open := record.NewTextWriter
	if packed {
		open = record.NewPackedWriter
	}
	wr, err := open(&b, h)
	if err != nil {
		tb.Fatal(err)
	}
	rng := rand.New(rand.NewPCG(1, 2))
	s := &record.Setting{Shots: []record.Outcome{{Count: 1}}}
	for i := range settings {
		s.ID = uint32(i)
		s.Shots[0].Bits = rng.Uint64() & 0xFFFF
		switch e {
		case record.Matching:
			s.Pairs = s.Pairs[:0]
			for _, a := range rng.Perm(32) {
				s.Pairs = append(s.Pairs, uint8(a))
			}
		case record.Lagrangian: // full rank, random symmetric phases
			s.R, s.B = s.R[:0], make([]uint64, 16)
			for j := range 16 {
				s.R = append(s.R, 1<<j)
				for l := range j + 1 {
					bit := rng.Uint64() & 1
					s.B[j] |= bit << l
					s.B[l] |= bit << j
				}
			}
		}
		if err := wr.Write(s); err != nil {
			tb.Fatal(err)
		}
	}
	if err := wr.Close(); err != nil {
		tb.Fatal(err)
	}
	return b.Bytes()
}

// BenchmarkRead reads through the validating reader on one core, from a mapped
// file. Goals: packed at least 200 MB/s, text at least 40 MB/s.
func BenchmarkRead(b *testing.B) {
	for _, c := range []struct {
		name   string
		e      record.Ensemble
		packed bool
		goal   float64
	}{
		{"matching/packed", record.Matching, true, 200},
		{"matching/text", record.Matching, false, 40},
		{"lagrangian/packed", record.Lagrangian, true, 200},
		{"lagrangian/text", record.Lagrangian, false, 40},
	} {
		b.Run(c.name, func(b *testing.B) {
			file := filepath.Join(b.TempDir(), "record")
			text := benchRecord(b, c.e, c.packed, 50000)
			if err := os.WriteFile(file, text, 0o600); err != nil {
				b.Fatal(err)
			}
			mapped, err := mmap.Open(file)
			if err != nil {
				b.Fatal(err)
			}
			defer mapped.Close()
			b.SetBytes(int64(len(text)))
			for b.Loop() {
				rd, err := record.Open(file, mapped, int64(mapped.Len()))
				if err != nil {
					b.Fatal(err)
				}
				var s record.Setting
				for err == nil {
					err = rd.Next(&s)
				}
				if err != io.EOF {
					b.Fatal(err)
				}
			}
			b.ReportMetric(c.goal, "goal-MB/s")
		})
	}
}
