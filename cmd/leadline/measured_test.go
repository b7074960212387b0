package main

import (
	"context"
	"math"
	"math/bits"
	"math/rand/v2"
	"os"
	"path/filepath"
	"testing"

	"leadline/cmd/leadline/job"
	"leadline/hamiltonian/exact"
	"leadline/hamiltonian/fcidump"
	"leadline/hamiltonian/strings"
	"leadline/trial/expansion"
	"leadline/trial/measured/record"
)

// TestWindowAnywhere places a window whose core and active orbitals are not the
// first ones, as a record's header names them: energies of the embedded state
// from the trial, from the window's Hamiltonian and from full CI agree.
func TestWindowAnywhere(t *testing.T) {
	const name = "LiH_1.6A_sto6g"
	file, err := os.Open(filepath.Join("..", "..", "testdata", "integrals", name+".fcidump"))
	if err != nil {
		t.Fatal(err)
	}
	defer file.Close()
	integrals, err := fcidump.Read(context.Background(), file, name, nil)
	if err != nil {
		t.Fatal(err)
	}
	h, _, err := integrals.Hamiltonian(context.Background(), 1e-10)
	if err != nil {
		t.Fatal(err)
	}
	full, err := exact.NewOperator(h)
	if err != nil {
		t.Fatal(err)
	}
	for _, c := range []struct {
		core   int
		active []int
	}{{0, []int{1, 2, 5}}, {1, []int{0, 2, 4}}, {4, []int{0, 1, 3}}} {
		header := &record.Header{Qubits: 6, Up: 1, Down: 1, Order: record.Blocked,
			Active: &record.Window{Core: []int{c.core, c.core + 6}}}
		for spin := range 2 {
			for _, p := range c.active {
				header.Active.Active = append(header.Active.Active, p+6*spin)
			}
		}
		m := &measuredTrial{orbitals: h.Orbitals}
		if err := m.place(header, job.Space{Electrons: 2, Orbitals: 3}, h.Sector); err != nil {
			t.Fatal(err)
		}
		// A random state of the window, and the same in the whole space: core
		// first there means a sign where active orbitals lie below the core.
		rng := rand.New(rand.NewPCG(1, uint64(c.core)))
		up := strings.New(3, 1)
		whole := strings.New(h.Orbitals, h.Up)
		small, large := make([]float64, 9), make([]float64, whole.Len()*whole.Len())
		e := &expansion.Expansion{Orbitals: h.Orbitals, Core: m.core, Active: m.active, Up: 1, Down: 1}
		place := func(mask uint64) (int, float64) {
			p := c.active[bits.TrailingZeros64(mask)]
			sign := 1.0
			if p < c.core {
				sign = -1
			}
			return whole.Index(1<<p | 1<<c.core), sign
		}
		for i, u := range up.Masks() {
			for j, d := range up.Masks() {
				v := rng.NormFloat64()
				small[3*i+j] = v
				a, s := place(u)
				b, r := place(d)
				large[a*whole.Len()+b] = s * r * v
				e.Determinants = append(e.Determinants, expansion.Determinant{Up: u, Down: d, Amplitude: complex(v, 0)})
			}
		}
		source, err := expansion.New(m.expansion(e))
		if err != nil {
			t.Fatal(err)
		}
		folded, err := windowHamiltonian(h, m)
		if err != nil {
			t.Fatal(err)
		}
		operator, err := exact.NewOperator(folded)
		if err != nil {
			t.Fatal(err)
		}
		want := full.Energy(large, nil)
		for what, got := range map[string]float64{"trial": source.Energy(h), "window": operator.Energy(small, nil)} {
			if math.Abs(got-want) > 1e-9 {
				t.Errorf("core %d, active %v: energy of the %s %.10f, full CI %.10f", c.core, c.active, what, got, want)
			}
		}
	}
	// What does not fit is refused.
	for _, c := range []struct {
		header record.Header
		active job.Space
	}{
		{record.Header{Qubits: 6, Up: 1, Down: 1, Order: record.Blocked}, job.Space{Electrons: 2, Orbitals: 4}},
		{record.Header{Qubits: 6, Up: 2, Down: 1, Order: record.Blocked}, job.Space{}},
		{record.Header{Qubits: 14, Up: 2, Down: 2, Order: record.Blocked}, job.Space{}},
		{record.Header{Qubits: 6, Up: 1, Down: 1, Order: record.Blocked, Active: &record.Window{Core: []int{0, 6}, Active: []int{1, 2, 4, 7, 8, 11}}}, job.Space{}},
		{record.Header{Qubits: 6, Up: 1, Down: 1, Order: record.Blocked, Active: &record.Window{Core: []int{}, Active: []int{1, 2, 4, 7, 8, 10}}}, job.Space{}},
		{record.Header{Qubits: 6, Up: 1, Down: 1, Order: record.Blocked, Active: &record.Window{Core: []int{0, 9}, Active: []int{1, 2, 8, 10, 11, 17}}}, job.Space{}},
	} {
		m := &measuredTrial{orbitals: h.Orbitals}
		if err := m.place(&c.header, c.active, h.Sector); err == nil {
			t.Errorf("%+v is accepted", c.header)
		} else {
			t.Log(err)
		}
	}
}
