package expansion

import (
	"math"
	"math/cmplx"
	"reflect"
	"strings"
	"testing"

	"gonum.org/v1/gonum/mat"
)

func list(amplitudes ...complex128) *Expansion {
	e := &Expansion{Orbitals: 8, Active: 8, Up: 1, Down: 1}
	for k, a := range amplitudes {
		e.Determinants = append(e.Determinants, Determinant{Up: 1 << (k % 8), Down: 1 << (k / 8), Amplitude: a})
	}
	return e
}

func TestNormalize(t *testing.T) {
	e := list(3, 4i, 0)
	e.Determinants[1].Error = 0.5
	n := e.Normalize()
	if n.Determinants[0].Amplitude != 0.6 || n.Determinants[1].Amplitude != 0.8i || n.Determinants[1].Error != 0.1 {
		t.Errorf("normalized to %v", n.Determinants)
	}
	if e.Determinants[0].Amplitude != 3 {
		t.Error("the old expansion changed")
	}
	// Neither overflow nor underflow.
	for _, scale := range []complex128{1e-300, 1e90} {
		e := list(3*scale, 4*scale)
		if v := e.Norm() / real(scale); math.Abs(v-5) > 1e-14 {
			t.Errorf("norm at scale %v is %v", scale, v)
		}
	}
}

func TestTruncate(t *testing.T) {
	e := list(0.1, -0.5, 0.3i, 0.3+1e-10, -0.2, 0.3-1e-5, 0)
	for _, c := range []struct {
		n    int
		want []complex128
	}{
		{1, []complex128{-0.5}},
		{2, []complex128{-0.5, 0.3i, 0.3 + 1e-10}},
		{3, []complex128{-0.5, 0.3i, 0.3 + 1e-10}},
		{4, []complex128{-0.5, 0.3i, 0.3 + 1e-10, 0.3 - 1e-5}},
		{6, []complex128{0.1, -0.5, 0.3i, 0.3 + 1e-10, -0.2, 0.3 - 1e-5}},
	} {
		var got []complex128
		for _, d := range e.Truncate(c.n).Determinants {
			got = append(got, d.Amplitude)
		}
		if !reflect.DeepEqual(got, c.want) {
			t.Errorf("largest %d: %v, expected %v", c.n, got, c.want)
		}
	}
	if n := len(e.Truncate(100).Determinants); n != len(e.Determinants) {
		t.Errorf("largest 100 of %d left %d", len(e.Determinants), n)
	}
}

func TestAddNoise(t *testing.T) {
	e := list(3, 4i)
	noisy, err := e.AddNoise(0.3, 5)
	if err != nil {
		t.Fatal(err)
	}
	if len(noisy.Determinants) != 64 {
		t.Fatalf("noise on %d determinants, expected all 64", len(noisy.Determinants))
	}
	old := map[[2]uint64]complex128{}
	for _, d := range e.Determinants {
		old[[2]uint64{d.Up, d.Down}] = d.Amplitude
	}
	var sum, fourth float64
	for _, d := range noisy.Determinants {
		v := d.Amplitude - old[[2]uint64{d.Up, d.Down}]
		if imag(v) != 0 {
			t.Fatalf("noise %v is not real", v)
		}
		sum += real(v) * real(v)
		fourth += math.Pow(real(v), 4)
	}
	if relative := math.Sqrt(sum) / 5; math.Abs(relative-0.3) > 1e-14 {
		t.Errorf("relative norm of the noise is %v, expected exactly 0.3", relative)
	}
	// ⟨v⁴⟩/⟨v²⟩² is 3 for Gaussian numbers, with a standard error of √(96/64) on 64.
	if kurtosis := 64 * fourth / sum / sum; math.Abs(kurtosis-3) > 3*math.Sqrt(96.0/64) {
		t.Errorf("kurtosis %v", kurtosis)
	}
	// The order of the determinants does not matter, the seed does.
	e.Determinants[0], e.Determinants[1] = e.Determinants[1], e.Determinants[0]
	if again, _ := e.AddNoise(0.3, 5); !reflect.DeepEqual(again.Determinants, noisy.Determinants) {
		t.Error("another order gave other noise")
	}
	if other, _ := e.AddNoise(0.3, 6); reflect.DeepEqual(other.Determinants, noisy.Determinants) {
		t.Error("another seed gave the same noise")
	}
	big := &Expansion{Orbitals: 40, Active: 40, Up: 20, Down: 20, Determinants: []Determinant{{Up: 1<<20 - 1, Down: 1<<20 - 1, Amplitude: 1}}}
	if _, err := big.AddNoise(0.1, 1); err == nil {
		t.Error("noise on 1e22 determinants was accepted")
	}
}

func TestExchangeSymmetric(t *testing.T) {
	e := &Expansion{Orbitals: 3, Active: 3, Up: 1, Down: 1, Determinants: []Determinant{
		{Up: 1, Down: 1, Amplitude: 1}, {Up: 1, Down: 2, Amplitude: 0.5 + 1e-9}, {Up: 2, Down: 1, Amplitude: 0.5 - 1e-9},
		{Up: 4, Down: 1, Amplitude: 1e-9},
	}}
	if _, ok := e.ExchangeSymmetric(1e-10); ok {
		t.Error("a deviation of 1e-9 passed as one of 1e-10")
	}
	s, ok := e.ExchangeSymmetric(1e-8)
	if !ok {
		t.Fatal("a deviation of 1e-9 did not pass as one of 1e-8")
	}
	want := map[[2]uint64]complex128{{1, 1}: 1, {1, 2}: 0.5, {2, 1}: 0.5, {4, 1}: 5e-10, {1, 4}: 5e-10}
	if len(s.Determinants) != len(want) {
		t.Errorf("%d determinants, expected %d", len(s.Determinants), len(want))
	}
	for _, d := range s.Determinants {
		if cmplx.Abs(d.Amplitude-want[[2]uint64{d.Up, d.Down}]) > 1e-16 {
			t.Errorf("amplitude %v of %b %b", d.Amplitude, d.Up, d.Down)
		}
	}
	source, err := New(s)
	if err != nil {
		t.Fatal(err)
	}
	if !source.symmetric {
		t.Error("the source does not see the symmetry")
	}
	e.Down = 2
	if _, ok := e.ExchangeSymmetric(1); ok {
		t.Error("unequal numbers of electrons passed")
	}
}

func TestNewRefusals(t *testing.T) {
	good := func() *Expansion { return list(1, 0.5) }
	for _, c := range []struct {
		want  string
		spoil func(e *Expansion)
	}{
		{"determinant 3 repeats determinant 1", func(e *Expansion) { e.Determinants = append(e.Determinants, e.Determinants[0]) }},
		{"determinant 2: has 2 active up electrons", func(e *Expansion) { e.Determinants[1].Up = 3 }},
		{"determinant 1: occupies a down orbital beyond", func(e *Expansion) { e.Determinants[0].Down = 1 << 8 }},
		{"determinant 1: amplitude is", func(e *Expansion) { e.Determinants[0].Amplitude = cmplx.Inf() }},
		{"norm zero", func(e *Expansion) { e.Determinants[0].Amplitude, e.Determinants[1].Amplitude = 0, 0 }},
		{"norm zero", func(e *Expansion) { e.Determinants = nil }},
		{"orbitals of the expansion are 8×3", func(e *Expansion) { e.Columns = mat.NewDense(8, 3, nil) }},
		{"have overlap 0", func(e *Expansion) { e.Columns = mat.NewDense(8, 8, nil) }},
		{"137846528820 strings", func(e *Expansion) {
			e.Orbitals, e.Active, e.Up = 40, 40, 20
			e.Determinants = []Determinant{{Up: 1<<20 - 1, Down: 1, Amplitude: 1}}
		}},
	} {
		e := good()
		c.spoil(e)
		if _, err := New(e); err == nil || !strings.Contains(err.Error(), c.want) {
			t.Errorf("error %v, expected %q", err, c.want)
		}
	}
	if _, err := New(good()); err != nil {
		t.Error(err)
	}
}
