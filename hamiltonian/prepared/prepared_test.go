package prepared

import (
	"bytes"
	"context"
	"crypto/sha256"
	"encoding/binary"
	"encoding/hex"
	"errors"
	"fmt"
	"io"
	"math"
	"math/rand/v2"
	"os"
	"runtime"
	"strings"
	"testing"
	"testing/iotest"

	"github.com/google/go-cmp/cmp"
	"gonum.org/v1/gonum/mat"

	"leadline/hamiltonian"
)

// sample returns a file over 5 orbitals, with everything optional if full.
func sample(full bool) *File {
	random := rand.New(rand.NewPCG(3, 4))
	symmetric := func() *mat.SymDense {
		a := mat.NewSymDense(5, nil)
		for p := range 5 {
			for q := range p + 1 {
				a.SetSym(p, q, random.NormFloat64())
			}
		}
		return a
	}
	dense := func(rows, columns int) *mat.Dense {
		a := mat.NewDense(rows, columns, nil)
		for i := range a.RawMatrix().Data {
			a.RawMatrix().Data[i] = random.NormFloat64()
		}
		return a
	}
	factors := hamiltonian.NewFactors(5, 7)
	for i := range factors.Packed[0] {
		factors.Packed[0][i] = random.NormFloat64()
	}
	one := symmetric()
	f := &File{Hamiltonian: &hamiltonian.Hamiltonian{
		Sector:  hamiltonian.Sector{Orbitals: 5, Up: 3, Down: 2},
		OneBody: [2]*mat.SymDense{one, one}, Factors: factors, Constant: 1.0 / 3,
	}}
	if !full {
		return f
	}
	f.Hamiltonian.OneBody[1] = symmetric()
	factors.Packed[1] = make([]float64, len(factors.Packed[0]))
	for i := range factors.Packed[1] {
		factors.Packed[1][i] = random.NormFloat64()
	}
	// Numbers that decimal text loses easily.
	copy(factors.Packed[1], []float64{math.Copysign(0, -1), math.SmallestNonzeroFloat64, math.MaxFloat64, 0.1, math.Nextafter(1, 2)})
	factors.Antisymmetric, factors.Sign[2], factors.Sign[6] = 2, -1, -1
	f.Orbitals = dense(8, 5)
	f.Reference = &Reference{Kind: "uhf", Energy: -1.25, Occupied: [2]*mat.Dense{dense(5, 3), dense(5, 2)}}
	f.Provenance = Provenance{
		Title: "Be + H₂, <on the way in>", Source: "molecule", Basis: "6-31g", Unit: "hartree", FrozenCore: 1, ConstantBeforeFreezing: 0.1,
		FactorTolerance: 1e-6, FactorResidual: 8.25e-7, Inputs: map[string]string{"beh2.xyz": strings.Repeat("0f", 32)}, Version: "1",
	}
	return f
}

func written(t testing.TB, f *File) []byte {
	t.Helper()
	var out bytes.Buffer
	if err := Write(&out, f); err != nil {
		t.Fatal(err)
	}
	return out.Bytes()
}

func bits(x []float64) []uint64 {
	out := make([]uint64, len(x))
	for i, v := range x {
		out[i] = math.Float64bits(v)
	}
	return out
}

// elements returns every number of the file as bits.
func elements(f *File) map[string][]uint64 {
	h := f.Hamiltonian
	out := map[string][]uint64{
		"constant": bits([]float64{h.Constant}), "signs": bits(h.Factors.Sign),
		"up": bits(h.Factors.Packed[0]), "down": bits(h.Factors.Packed[1]),
	}
	dense := func(name string, a mat.Matrix) {
		rows, columns := a.Dims()
		var all []float64
		for i := range rows {
			for j := range columns {
				all = append(all, a.At(i, j))
			}
		}
		out[name] = append(bits(all), uint64(rows), uint64(columns))
	}
	dense("h up", h.OneBody[0])
	dense("h down", h.OneBody[1])
	if f.Orbitals != nil {
		dense("orbitals", f.Orbitals)
	}
	if f.Reference != nil {
		dense("reference up", f.Reference.Occupied[0])
		dense("reference down", f.Reference.Occupied[1])
	}
	return out
}

func TestRoundTrip(t *testing.T) {
	for _, full := range []bool{false, true} {
		want := sample(full)
		text := written(t, want)
		for _, r := range []io.Reader{bytes.NewReader(text), iotest.OneByteReader(bytes.NewReader(text))} {
			var done, total int64
			got, err := Read(t.Context(), r, "test", func(d, n int64) { done, total = d, n })
			if err != nil {
				t.Fatal(err)
			}
			if d := cmp.Diff(elements(want), elements(got)); d != "" {
				t.Errorf("full %v: %s", full, d)
			}
			if d := cmp.Diff(want.Provenance, got.Provenance); d != "" {
				t.Errorf("full %v: %s", full, d)
			}
			h := got.Hamiltonian
			if h.Sector != want.Hamiltonian.Sector || h.SpinFree() == full || h.Factors.Antisymmetric != want.Hamiltonian.Factors.Antisymmetric {
				t.Errorf("full %v: sector %v, spin-free %v, %d antisymmetric", full, h.Sector, h.SpinFree(), h.Factors.Antisymmetric)
			}
			if full && (got.Reference.Kind != "uhf" || got.Reference.Energy != -1.25) {
				t.Errorf("reference %+v", got.Reference)
			}
			sum := sha256.Sum256(text)
			if got.Fingerprint != hex.EncodeToString(sum[:]) {
				t.Errorf("fingerprint %s, expected %x", got.Fingerprint, sum)
			}
			if done != int64(len(text)) || total != done {
				t.Errorf("progress ends at %d of %d, expected %d", done, total, len(text))
			}
			if !bytes.Equal(written(t, got), text) {
				t.Error("writing again gives other bytes")
			}
		}
	}
}

func TestModels(t *testing.T) {
	one := mat.NewSymDense(2, []float64{0, -1, -1, 0})
	f := &File{Hamiltonian: &hamiltonian.Hamiltonian{
		Sector: hamiltonian.Sector{Orbitals: 2, Up: 1}, OneBody: [2]*mat.SymDense{one, one}, Factors: hamiltonian.NewFactors(2, 0),
	}, Reference: &Reference{Kind: "uhf", Occupied: [2]*mat.Dense{mat.NewDense(2, 1, []float64{1, 0})}}}
	got, err := Read(t.Context(), bytes.NewReader(written(t, f)), "test", nil)
	if err != nil {
		t.Fatal(err)
	}
	if got.Hamiltonian.Factors.Count() != 0 || got.Reference.Occupied[1] != nil || got.Reference.Occupied[0].At(0, 0) != 1 {
		t.Errorf("read %+v, %+v", got.Hamiltonian.Factors, got.Reference)
	}
}

// TestBytes holds the format still: two orbitals, one factor, byte by byte as
// FORMAT.md lays it out.
func TestBytes(t *testing.T) {
	one := mat.NewSymDense(2, []float64{-1, 0.25, 0.25, -0.5})
	factors := hamiltonian.NewFactors(2, 1)
	copy(factors.Packed[0], []float64{0.5, 0.125, 0.75})
	text := written(t, &File{Hamiltonian: &hamiltonian.Hamiltonian{
		Sector: hamiltonian.Sector{Orbitals: 2, Up: 1, Down: 1}, OneBody: [2]*mat.SymDense{one, one}, Factors: factors, Constant: 2,
	}})
	head := "leadline prepared 1\n" + `{"orbitals":2,"up":1,"down":1,"one_body_spins":1,"factor_spins":1,"factors":1,"antisymmetric":0,"basis_functions":0,"provenance":{}}`
	head += strings.Repeat(" ", 192-len(head)-1) + "\n"
	want := []byte(head)
	for _, v := range []float64{2, -1, 0.25, -0.5, 1, 0.5, 0.125, 0.75} {
		want = binary.LittleEndian.AppendUint64(want, math.Float64bits(v))
	}
	sum := sha256.Sum256(want)
	want = append(want, sum[:]...)
	if !bytes.Equal(text, want) {
		t.Errorf("wrote\n%q\nexpected\n%q", text, want)
	}
}

// TestCutOff cuts the file everywhere.
func TestCutOff(t *testing.T) {
	text := written(t, sample(true))
	for n := range len(text) {
		if f, err := Read(t.Context(), bytes.NewReader(text[:n]), "test", nil); err == nil || f != nil {
			t.Fatalf("the first %d of %d bytes are accepted", n, len(text))
		}
	}
	if _, err := Read(t.Context(), bytes.NewReader(text[:len(text)-40]), "test", nil); err == nil ||
		err.Error() != fmt.Sprintf("test: file ends after %d bytes, expected %d: cut off", len(text)-40, len(text)) {
		t.Errorf("got %v", err)
	}
}

// TestDamaged flips a bit of each byte.
func TestDamaged(t *testing.T) {
	text := written(t, sample(true))
	for i := range text {
		text[i] ^= 1 << (i % 8)
		if _, err := Read(t.Context(), bytes.NewReader(text), "test", nil); err == nil {
			t.Errorf("bit %d of byte %d may flip", i%8, i)
		}
		text[i] ^= 1 << (i % 8)
	}
}

// build returns a file with the given header and zeros, correctly summed.
func build(head string, numbers int) string {
	text := "leadline prepared 1\n" + head
	text += strings.Repeat(" ", (alignment-(len(text)+1)%alignment)%alignment) + "\n" + strings.Repeat("\x00", 8*numbers)
	sum := sha256.Sum256([]byte(text))
	return text + string(sum[:])
}

func TestErrors(t *testing.T) {
	good := `{"orbitals":1,"up":1,"down":0,"one_body_spins":1,"factor_spins":1,"factors":0,"antisymmetric":0,"basis_functions":0,"provenance":{}}`
	if _, err := Read(t.Context(), strings.NewReader(build(good, 2)), "test", nil); err != nil {
		t.Fatal(err)
	}
	nan := []byte(build(good, 2))
	binary.LittleEndian.PutUint64(nan[len(nan)-48:], math.Float64bits(math.NaN()))
	sum := sha256.Sum256(nan[:len(nan)-32])
	copy(nan[len(nan)-32:], sum[:])
	for _, test := range []struct{ text, want string }{
		{"", "test: file is empty, expected a prepared Hamiltonian"},
		{"&FCI NORB=2\n", `test: file starts with "&FCI NORB=2\n", expected "leadline prepared 1": no prepared Hamiltonian`},
		{strings.Repeat("\x00", 10000), `test: file starts with "\x00\x00\x00\x00\x00\x00\x00\x00\x00\x00\x00\x00\x00\x00\x00\x00\x00\x00\x00\x00", expected "leadline prepared 1": no prepared Hamiltonian`},
		{"leadline prepared 2\n{}\n", "test: version 2 of the prepared format, expected 1"},
		{"leadline prepared 1\n" + strings.Repeat(" ", 2*headerLimit), "test: header has no end within 1048576 bytes: cut off or damaged"},
		{"leadline prepared 1\n{}\n", "test: header ends at byte 23, expected a multiple of 64: damaged"},
		{build("{}", 0), "test: header: sector has 0 orbitals, expected at least 1"},
		{build("[1]", 0), "test: header: json: cannot unmarshal array into Go value of type prepared.header"},
		{build(good+"{}", 2), `test: header: "{}` + strings.Repeat(" ", 18) + `" after the end`},
		{build(strings.Replace(good, "up", "upper", 1), 2), `test: header: json: unknown field "upper"`},
		{build(strings.Replace(good, `"up":1`, `"up":2`, 1), 2), "test: header: sector has 2 up electrons, expected 0 to 1 (the number of orbitals)"},
		{build(strings.Replace(good, `"factors":0`, `"factors":-1`, 1), 2), "test: header: factors is -1, expected 0 or more"},
		{build(strings.Replace(good, `"one_body_spins":1`, `"one_body_spins":3`, 1), 2), "test: header: one_body_spins is 3, expected 1 or 2"},
		{build(strings.Replace(good, `"factor_spins":1`, `"factor_spins":0`, 1), 2), "test: header: factor_spins is 0, expected 1 or 2"},
		{build(strings.Replace(good, `"antisymmetric":0`, `"antisymmetric":1`, 1), 2), "test: header: antisymmetric is 1, expected 0 to 0 (the number of factors)"},
		{build(strings.Replace(good, `"basis_functions":0`, `"basis_functions":-4`, 1), 2), "test: header: basis_functions is -4, expected 0 or at least 1 (the number of orbitals)"},
		{build(strings.Replace(good, `"orbitals":1`, `"orbitals":1000000000`, 1), 2), "test: header: header asks for 5e+17 numbers, more than any file holds"},
		{build(strings.Replace(good, `"orbitals":1`, `"orbitals":10000000`, 1), 2), "test: file ends after 240 bytes, expected 400000040000232: cut off"},
		{build(strings.Replace(good, `"factors":0`, `"factors":1`, 1), 4), "test: sign of factor 1 is 0, expected +1 or -1"},
		{build(good, 3), "checksum"},
		{build(good, 2) + "x", "test: bytes after the checksum, expected the end after 240"},
		{string(nan), "test: constant energy is NaN, expected a finite number"},
	} {
		f, err := Read(t.Context(), strings.NewReader(test.text), "test", nil)
		if err == nil || err.Error() != test.want && !(test.want == "checksum" && strings.Contains(err.Error(), "the file is damaged")) {
			t.Errorf("%.60q:\n     got %v\nexpected %s", test.text, err, test.want)
		}
		if f != nil {
			t.Errorf("%.60q: a file beside the error", test.text)
		}
	}
}

// TestMemory reads a header that promises 400 terabytes.
func TestMemory(t *testing.T) {
	text := build(`{"orbitals":10000000,"up":1,"down":0,"one_body_spins":1,"factor_spins":1,"factors":0,"antisymmetric":0,"basis_functions":0,"provenance":{}}`, 200000)
	var before, after runtime.MemStats
	runtime.ReadMemStats(&before)
	if _, err := Read(t.Context(), strings.NewReader(text), "test", nil); err == nil {
		t.Fatal("accepted")
	}
	runtime.ReadMemStats(&after)
	if used := after.TotalAlloc - before.TotalAlloc; used > 5*uint64(len(text)) {
		t.Errorf("allocated %d bytes for a file of %d", used, len(text))
	}
}

func TestFailures(t *testing.T) {
	broken := errors.New("disk on fire")
	text := written(t, sample(true))
	for _, n := range []int{0, 10, 100, len(text) / 2, len(text) - 10, len(text)} {
		r := io.MultiReader(bytes.NewReader(text[:n]), iotest.ErrReader(broken))
		if _, err := Read(t.Context(), r, "test", nil); !errors.Is(err, broken) {
			t.Errorf("after %d bytes: %v, expected the reader's error", n, err)
		}
	}
	ctx, cancel := context.WithCancel(t.Context())
	cancel()
	if _, err := Read(ctx, bytes.NewReader(text), "test", nil); !errors.Is(err, context.Canceled) {
		t.Errorf("got %v, expected context.Canceled", err)
	}
	if _, err := Fingerprint(iotest.ErrReader(broken)); !errors.Is(err, broken) {
		t.Errorf("got %v, expected the reader's error", err)
	}
	for name, spoil := range map[string]func(f *File){
		"constant":        func(f *File) { f.Hamiltonian.Constant = math.NaN() },
		"orbital columns": func(f *File) { f.Orbitals = mat.NewDense(8, 4, nil) },
		"orbital rows":    func(f *File) { f.Orbitals = mat.NewDense(4, 5, nil) },
		"orbital number":  func(f *File) { f.Orbitals.Set(0, 0, math.Inf(1)) },
		"reference shape": func(f *File) { f.Reference.Occupied[0] = f.Reference.Occupied[1] },
		"no reference":    func(f *File) { f.Reference.Occupied[0] = nil },
		"energy":          func(f *File) { f.Reference.Energy = math.NaN() },
		"long provenance": func(f *File) { f.Provenance.Title = strings.Repeat("x", headerLimit) },
	} {
		f := sample(true)
		spoil(f)
		if err := Write(io.Discard, f); err == nil {
			t.Errorf("%s: written", name)
		}
	}
	read, write := io.Pipe()
	read.CloseWithError(broken)
	if err := Write(write, sample(true)); !errors.Is(err, broken) {
		t.Errorf("got %v, expected the writer's error", err)
	}
}

// TestFingerprint uses the SHA-256 of "abc" published in FIPS 180-2, appendix B.1.
func TestFingerprint(t *testing.T) {
	got, err := Fingerprint(strings.NewReader("abc"))
	if want := "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad"; err != nil || got != want {
		t.Errorf("%s (%v), expected %s", got, err, want)
	}
}

// TestSpecification looks for every key of the header in FORMAT.md.
func TestSpecification(t *testing.T) {
	text, err := os.ReadFile("FORMAT.md")
	if err != nil {
		t.Fatal(err)
	}
	head, _, _ := bytes.Cut(written(t, sample(true))[len(magic)+2:], []byte("\n"))
	for _, part := range strings.Split(string(head), `":`) {
		if at := strings.LastIndex(part, `"`); at >= 0 {
			if key := part[at+1:]; key != "beh2.xyz" && !strings.ContainsAny(key, "}, ") && !bytes.Contains(text, []byte("`"+key+"`")) {
				t.Errorf("FORMAT.md says nothing of %s", key)
			}
		}
	}
}

// FuzzRead feeds anything, as it is and with a correct checksum.
func FuzzRead(f *testing.F) {
	f.Add(written(f, sample(false)))
	f.Add(written(f, sample(true)))
	f.Add([]byte(build(`{"orbitals":1,"up":1,"down":0,"one_body_spins":1,"factor_spins":1}`, 2)))
	f.Fuzz(func(t *testing.T, text []byte) {
		if len(text) >= 32 {
			sum := sha256.Sum256(text[:len(text)-32])
			summed := append(append([]byte(nil), text[:len(text)-32]...), sum[:]...)
			if got, err := Read(t.Context(), bytes.NewReader(summed), "test", nil); err == nil {
				again, err := Read(t.Context(), bytes.NewReader(written(t, got)), "test", nil)
				if err != nil {
					t.Fatalf("what is written is not read: %v", err)
				}
				if d := cmp.Diff(elements(got), elements(again)); d != "" {
					t.Error(d)
				}
			}
		}
		if _, err := Read(t.Context(), bytes.NewReader(text), "test", nil); err != nil && !strings.HasPrefix(err.Error(), "test: ") {
			t.Errorf("error without the file's name: %v", err)
		}
	})
}
