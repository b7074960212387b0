package fcidump

import (
	"bytes"
	"fmt"
	"io"
	"math/rand/v2"
	"strings"
	"testing"

	"leadline/hamiltonian"
)

// sample returns a file of m orbitals with every integral, in the widest print in
// use, and its number of lines.
func sample(m int) ([]byte, int) {
	random := rand.New(rand.NewPCG(1, 1))
	var text bytes.Buffer
	fmt.Fprintf(&text, " &FCI NORB=%d,NELEC=2,MS2=0,\n &END\n", m)
	lines := 0
	for p := range m {
		for q := range p + 1 {
			for r := range p + 1 {
				for s := range r + 1 {
					if hamiltonian.Pair(r, s) <= hamiltonian.Pair(p, q) {
						fmt.Fprintf(&text, " %23.16E %4d %4d %4d %4d\n", random.NormFloat64(), p+1, q+1, r+1, s+1)
						lines++
					}
				}
			}
		}
	}
	fmt.Fprintf(&text, "1.0 0 0 0 0\n")
	return text.Bytes(), lines + 1
}

// BenchmarkRead reads on one core; the goal is 3 million lines per second.
func BenchmarkRead(b *testing.B) {
	text, lines := sample(50)
	b.SetBytes(int64(len(text)))
	b.ResetTimer()
	for b.Loop() {
		if _, err := Read(b.Context(), bytes.NewReader(text), "test", nil); err != nil {
			b.Fatal(err)
		}
	}
	b.ReportMetric(float64(lines)*float64(b.N)/b.Elapsed().Seconds()/1e6, "Mlines/s")
}

func BenchmarkWrite(b *testing.B) {
	h := &hamiltonian.Hamiltonian{Sector: hamiltonian.Sector{Orbitals: 50, Up: 1, Down: 1}, Factors: hamiltonian.NewFactors(50, 250)}
	random := rand.New(rand.NewPCG(1, 1))
	for i := range h.Factors.Packed[0] {
		h.Factors.Packed[0][i] = random.NormFloat64()
	}
	f := read(b, "&FCI NORB=50 NELEC=2 /\n0 0 0 0 0\n")
	h.OneBody[0], h.OneBody[1] = f.OneBody, f.OneBody
	b.ResetTimer()
	for b.Loop() {
		if err := Write(b.Context(), io.Discard, h, Options{}); err != nil {
			b.Fatal(err)
		}
	}
	pairs := hamiltonian.Pairs(50)
	b.ReportMetric(float64(hamiltonian.Pairs(pairs))*float64(b.N)/b.Elapsed().Seconds()/1e6, "Mlines/s")
}

// FuzzRead feeds anything; what is accepted is finite and fits the limit.
func FuzzRead(f *testing.F) {
	f.Add([]byte(plain))
	f.Add([]byte(strings.ReplaceAll(plain, "\n", "\r\n")))
	f.Add([]byte("&FCI NORB=1000000000,NELEC=2 /\n1 1 1 1 1\n"))
	f.Add([]byte("&fci norb = 2 nelec = 3 ms2 = -1 orbsym = 2*1 uhf = .false. title='/' ! &end\n $end\r1D-1 1 2 1 2\r.5-3 0 0 0 0"))
	f.Add([]byte("\x1f\x8b\x08\x00\x00\x00\x00\x00\x00\xff"))
	f.Fuzz(func(t *testing.T, text []byte) {
		in, err := ReadWithin(t.Context(), bytes.NewReader(text), "test", 1<<16, nil)
		if err != nil {
			if !strings.HasPrefix(err.Error(), "test") {
				t.Errorf("error without the file's name: %v", err)
			}
			return
		}
		if len(in.TwoBody) > 1<<13 {
			t.Errorf("%d integrals beyond the limit", len(in.TwoBody))
		}
		if in.Orbitals > 4 {
			return
		}
		h, _, err := in.Hamiltonian(t.Context(), 1e-6)
		if err != nil {
			return // numbers beyond any Hamiltonian
		}
		if err := h.Validate(); err != nil {
			t.Errorf("accepted an invalid Hamiltonian: %v", err)
		}
	})
}
