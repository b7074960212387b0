package fcidump

import (
	"bytes"
	"errors"
	"math"
	"strings"
	"testing"

	"gonum.org/v1/gonum/mat"

	"leadline/hamiltonian"
)

// TestWrite reads back what was written, bit by bit.
func TestWrite(t *testing.T) {
	for _, name := range []string{"h2.fcidump", "h5.fcidump", "lih.fcidump"} {
		f := read(t, string(open(t, name)))
		h, _, err := f.Hamiltonian(t.Context(), 1e-9)
		if err != nil {
			t.Fatal(err)
		}
		var text bytes.Buffer
		if err := Write(t.Context(), &text, h, Options{Symmetry: f.Symmetry, StateSymmetry: f.StateSymmetry}); err != nil {
			t.Fatal(err)
		}
		got := read(t, text.String())
		if got.Sector != f.Sector || got.Constant != f.Constant || !mat.Equal(got.OneBody, f.OneBody) || got.StateSymmetry != f.StateSymmetry {
			t.Errorf("%s: got %+v\nexpected %+v", name, got, f)
		}
		for p, label := range f.Symmetry {
			if got.Symmetry[p] != label {
				t.Errorf("%s: labels %v, expected %v", name, got.Symmetry, f.Symmetry)
			}
		}
		for i := range got.Dim() {
			for j := range i + 1 {
				// The product sums in an order of its own, so to rounding only.
				sum := 0.0
				for g, s := range h.Factors.Sign {
					sum += s * h.Factors.Row(g, 0)[i] * h.Factors.Row(g, 0)[j]
				}
				if v := got.TwoBody[hamiltonian.Pair(i, j)]; math.Abs(v-sum) > 1e-14 || math.Abs(v-f.TwoBody[hamiltonian.Pair(i, j)]) > 1e-8 {
					t.Fatalf("%s: integral of pairs %d, %d is %v, expected %v", name, i, j, v, sum)
				}
			}
		}
		// Once written the numbers stay: the second file equals the first.
		var again bytes.Buffer
		h2, _, err := got.Hamiltonian(t.Context(), 1e-14)
		if err != nil {
			t.Fatal(err)
		}
		if err := Write(t.Context(), &again, h2, Options{}); err != nil {
			t.Fatal(err)
		}
		for i, v := range read(t, again.String()).TwoBody {
			if math.Abs(v-got.TwoBody[i]) > 1e-13 {
				t.Fatalf("%s: integral %d is %v after a second round, expected %v", name, i, v, got.TwoBody[i])
			}
		}
	}
}

func TestWriteThreshold(t *testing.T) {
	f := read(t, plain)
	h, _, err := f.Hamiltonian(t.Context(), 1e-12)
	if err != nil {
		t.Fatal(err)
	}
	var text bytes.Buffer
	if err := Write(t.Context(), &text, h, Options{Threshold: 0.3}); err != nil {
		t.Fatal(err)
	}
	got := read(t, text.String())
	if got.OneBody.At(0, 1) != 0 || got.TwoElectron(1, 0, 1, 0) != 0 || got.OneBody.At(0, 0) != -1.25 {
		t.Errorf("threshold 0.3 leaves\n%s", text.String())
	}
}

func TestWriteRefuses(t *testing.T) {
	f := read(t, plain)
	h, _, err := f.Hamiltonian(t.Context(), 1e-12)
	if err != nil {
		t.Fatal(err)
	}
	resolved, odd := *h, *h
	resolved.OneBody[hamiltonian.Down] = mat.NewSymDense(2, nil)
	antisymmetric := *h.Factors
	antisymmetric.Antisymmetric = 1
	odd.Factors = &antisymmetric
	for want, h := range map[string]*hamiltonian.Hamiltonian{"differs between spins": &resolved, "antisymmetric factors": &odd} {
		if err := Write(t.Context(), &bytes.Buffer{}, h, Options{}); err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("got %v, expected an error with %q", err, want)
		}
	}
	if err := Write(t.Context(), &bytes.Buffer{}, h, Options{Symmetry: []int{1}}); err == nil {
		t.Error("one symmetry label for two orbitals is accepted")
	}
	if err := Write(t.Context(), full{}, h, Options{}); !errors.Is(err, errFull) {
		t.Errorf("got %v, expected the writer's error", err)
	}
}

var errFull = errors.New("disk full")

type full struct{}

func (full) Write([]byte) (int, error) { return 0, errFull }
