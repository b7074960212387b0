package collapse_test

import (
	"context"
	"fmt"
	"io"
	"math/bits"
	"math/rand/v2"
	"runtime"
	"testing"

	"leadline/trial/measured/clifford"
	"leadline/trial/measured/collapse"
	"leadline/trial/measured/matchgate"
	"leadline/trial/measured/record"
)

// generated is a record made up while it is read, one shot per setting, with
// the statistics of a state spread evenly over the half-filled sector.
type generated struct {
	h        record.Header
	n, next  int
	rng      *rand.Rand
	ranks    []float64
	basis    clifford.Basis
	matching matchgate.Matching
}

func generate(e record.Ensemble, qubits, settings int) record.Source {
	return func() (record.Stream, error) {
		return &generated{n: settings, rng: rand.New(rand.NewPCG(1, 2)), ranks: clifford.RankDistribution(qubits),
			h: record.Header{Ensemble: e, Qubits: qubits, Kind: record.Trial, Up: qubits / 4, Down: qubits / 4, Order: record.Blocked, Bits: record.Q0First,
				HamiltonianSHA256: record.UnknownHash, OrbitalsSHA256: record.UnknownHash}}, nil
	}
}

func (g *generated) Header() *record.Header   { return &g.h }
func (g *generated) Declared() (int64, int64) { return int64(g.n), int64(g.n) }
func (g *generated) Digest() string           { return "" }
func (g *generated) determinant() (mask uint64) { // vacuum half of the time
	if g.rng.Uint64()&1 == 0 {
		return 0
	}
	m := g.h.Qubits / 2
	for spin := range 2 {
		for _, p := range g.rng.Perm(m)[:m/2] {
			mask |= 1 << (p + spin*m)
		}
	}
	return mask
}

func (g *generated) Next(s *record.Setting) error {
	if g.next == g.n {
		return io.EOF
	}
	s.ID = uint32(g.next)
	g.next++
	n := g.h.Qubits
	bit := g.rng.Uint64() & (1<<n - 1)
	if g.h.Ensemble == record.Matching {
		s.Pairs = matchgate.Pairs(s.Pairs[:0], n, g.rng)
		g.matching.Set(n, s.Pairs)
		if _, p := g.matching.Signs(bit, 0); bits.OnesCount64(p)&1 != 0 {
			bit ^= 1 // one pair turns the total parity
		}
	} else {
		k := clifford.Rank(g.ranks, g.rng)
		s.R = clifford.Subspace(s.R[:0], n, k, g.rng)
		s.B = clifford.Phases(s.B[:0], k, g.rng)
		if err := g.basis.Lagrangian(n, s.R, s.B, nil, 0); err != nil {
			return err
		}
		_, u := g.basis.Coordinates(g.determinant())
		bit = bit&g.basis.Pivots | u
	}
	s.Shots = append(s.Shots[:0], record.Outcome{Bits: bit, Count: 1})
	return nil
}

// BenchmarkCollapse reports seconds for 10⁶ settings of one shot each, half
// filling. Goals on two cores: 45 s for matchings and 15 s for Clifford bases on
// 16 qubits, 300 s and 180 s on 20.
func BenchmarkCollapse(b *testing.B) {
	for _, c := range []struct {
		e        record.Ensemble
		qubits   int
		settings int
		goal     float64
	}{
		{record.Matching, 8, 50000, 0}, {record.Matching, 12, 50000, 0}, {record.Matching, 16, 20000, 45}, {record.Matching, 20, 4000, 300},
		{record.Lagrangian, 8, 50000, 0}, {record.Lagrangian, 12, 50000, 0}, {record.Lagrangian, 16, 20000, 15}, {record.Lagrangian, 20, 4000, 180},
	} {
		b.Run(fmt.Sprintf("%s/%d", c.e, c.qubits), func(b *testing.B) {
			for b.Loop() {
				if _, err := collapse.Run(context.Background(), generate(c.e, c.qubits, c.settings), collapse.Options{}); err != nil {
					b.Fatal(err)
				}
			}
			b.ReportMetric(b.Elapsed().Seconds()/float64(b.N)/float64(c.settings)*1e6, "s/1e6")
			b.ReportMetric(c.goal, "goal-s/1e6")
		})
	}
}

// BenchmarkMemory reports the memory of a collapse on 24 qubits with 32
// batches. Goal: at most 0.6 GB.
func BenchmarkMemory(b *testing.B) {
	for b.Loop() {
		e, err := collapse.Run(context.Background(), generate(record.Lagrangian, 24, 64), collapse.Options{})
		if err != nil {
			b.Fatal(err)
		}
		if e.Size() != 853776 {
			b.Fatalf("%d determinants", e.Size())
		}
		var m runtime.MemStats
		runtime.ReadMemStats(&m)
		b.ReportMetric(float64(m.Sys)/1e9, "GB")
		b.ReportMetric(0.6, "goal-GB")
	}
}
