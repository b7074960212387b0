package molecule

import (
	"context"
	"strings"
	"testing"

	"leadline/hamiltonian/basis"
)

// TestBasisWithoutLowShells: a set of g functions only gives no atomic start; that
// is an error, not a panic.
func TestBasisWithoutLowShells(t *testing.T) {
	set, err := basis.Read(strings.NewReader("****\nH 0\nG 1 1.0\n1.0 1.0\n****\n"), "g.gbs")
	if err != nil {
		t.Fatal(err)
	}
	a, err := NewAtom("H", [3]float64{}, Bohr)
	if err != nil {
		t.Fatal(err)
	}
	b, err := NewAtom("H", [3]float64{0, 0, 1.4}, Bohr)
	if err != nil {
		t.Fatal(err)
	}
	if _, err := Build(context.Background(), Geometry{a, b}, set, Options{}); err == nil || !strings.Contains(err.Error(), "functions") {
		t.Errorf("error %v, expected one that speaks of the missing functions", err)
	}
}
