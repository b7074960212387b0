package pairing

import (
	"context"
	"errors"
	"math"
	"math/bits"
	"strings"
	"testing"

	"gonum.org/v1/gonum/mat"

	"leadline/hamiltonian/internal/fock"
)

// diagonalise returns the ground state of the model among paired states, from the
// operators themselves.
func diagonalise(m Model) float64 {
	var states []int
	for bit := range 1 << m.Levels {
		if bits.OnesCount(uint(bit)) == m.Pairs {
			states = append(states, bit)
		}
	}
	h := mat.NewDense(len(states), len(states), nil)
	for i, a := range states {
		for j, b := range states {
			switch d := a ^ b; {
			case d == 0:
				e := 0.0
				for p := range m.Levels {
					e += float64(a>>p&1) * (2*m.Spacing*float64(p+1) - m.Coupling)
				}
				h.Set(i, j, e)
			case bits.OnesCount(uint(d)) == 2:
				h.Set(i, j, -m.Coupling)
			}
		}
	}
	return fock.Lowest(h)
}

// TestForm compares the factors' two forms, element by element in the full sector,
// with ε n − G P†P written in operators.
func TestForm(t *testing.T) {
	for _, g := range []float64{0.4, -0.3, 0} {
		m := Model{Levels: 4, Spacing: 1.5, Coupling: g, Pairs: 2}
		h, err := m.Hamiltonian()
		if err != nil {
			t.Fatal(err)
		}
		if err := h.Validate(); err != nil {
			t.Error(err)
		}
		if g != 0 && (h.Factors.Count() != 16 || h.Factors.Antisymmetric != 6) {
			t.Errorf("%d factors, %d antisymmetric, expected 16 and 6", h.Factors.Count(), h.Factors.Antisymmetric)
		}
		space := fock.New(h.Sector)
		want := mat.NewDense(space.Dim(), space.Dim(), nil)
		for spin := range 2 {
			space.OneBody(want, spin, func(p, q int) float64 {
				if p != q {
					return 0
				}
				return 1.5 * float64(p+1)
			})
		}
		// c†_p↑ c†_p↓ c_q↓ c_q↑: the pattern (pq|rs) with p = r and q = s between up and
		// down, half of it from each order of the spins.
		for spin := range 2 {
			space.TwoBody(want, spin, 1-spin, func(p, q, r, s int) float64 {
				if p == r && q == s {
					return -g
				}
				return 0
			})
		}
		normal, squares := space.Normal(h), space.Squares(h)
		if !mat.EqualApprox(normal, want, 1e-13) {
			t.Errorf("G = %g: normal-ordered form differs", g)
		}
		if !mat.EqualApprox(squares, want, 1e-13) {
			t.Errorf("G = %g: form in squares differs", g)
		}
		if e := fock.Lowest(want); g > 0 && math.Abs(e-diagonalise(m)) > 1e-12 {
			t.Errorf("G = %g: %v in the full sector, %v among pairs", g, e, diagonalise(m))
		}
	}
}

// TestExact compares with Richardson's equations solved in 60 digits by Newton
// continuation, which agree with diagonalisation to 1e-13 (this project's reference
// table; spacing 1, half filling).
func TestExact(t *testing.T) {
	for _, test := range []struct {
		levels int
		g, e   float64
	}{
		{4, 0.1, 5.787661867014894}, {4, 0.25, 5.416774284351104}, {4, 0.5, 4.635548473575597}, {4, 1, 2.5103478446361533},
		{6, 0.1, 11.679819241936805}, {6, 0.25, 11.105926380626023}, {6, 0.5, 9.801527971008904}, {6, 1, 5.810840747419518},
		{8, 0.1, 19.571755416694415}, {8, 0.25, 18.78974245278355}, {8, 0.5, 16.889170412332152}, {8, 1, 10.486586239939568},
		{10, 0.1, 29.46356198651856}, {10, 0.25, 28.469551806818696}, {10, 0.5, 25.901416564542988}, {10, 1, 16.536739388621275},
		{12, 0.1, 41.355281692025024}, {12, 0.25, 40.146088523104886}, {12, 0.5, 36.83917274845055}, {12, 1, 23.96102441566078},
		{14, 0.25, 53.81981417030138}, {14, 0.5, 49.70263718822201},
		{16, 0.25, 69.49104350912118}, {16, 0.5, 64.49178366589867},
	} {
		e, err := Model{Levels: test.levels, Spacing: 1, Coupling: test.g, Pairs: test.levels / 2}.Exact(t.Context())
		if err != nil || math.Abs(e-test.e) > 1e-11 {
			t.Errorf("%d levels, G = %g: %.13f (%v), expected %.13f", test.levels, test.g, e, err, test.e)
		}
	}
}

// TestFillings covers every number of pairs and couplings from weak to far beyond
// all critical ones.
func TestFillings(t *testing.T) {
	for _, levels := range []int{1, 2, 5, 8} {
		for pairs := 1; pairs <= levels; pairs++ {
			for g := 0.0; g < 30; g = 1.25*g + 0.013 {
				m := Model{Levels: levels, Spacing: 0.7, Coupling: g, Pairs: pairs}
				e, err := m.Exact(t.Context())
				if want := diagonalise(m); err != nil || math.Abs(e-want) > 1e-11*max(1, math.Abs(want)) {
					t.Errorf("%d pairs on %d levels, G = %g: %.13f (%v), expected %.13f", pairs, levels, g, e, err, want)
				}
			}
		}
	}
}

// TestCritical covers the coupling at which two pairs on four levels collide on the
// lowest one. With A = Σ_{i>1} 1/(2ε_i − 2ε_1) and B the sum of its squares, the
// limit of both equations there gives 1/G = A + √B: 11/12 + 7/12.
func TestCritical(t *testing.T) {
	for _, shift := range []float64{0, 1e-15, 1e-12, -1e-9, 1e-6, -1e-3} {
		m := Model{Levels: 4, Spacing: 1, Coupling: 2.0/3 + shift, Pairs: 2}
		if e, err := m.Exact(t.Context()); err != nil || math.Abs(e-diagonalise(m)) > 1e-12 {
			t.Errorf("%g from the critical coupling: %.14f (%v), expected %.14f", shift, e, err, diagonalise(m))
		}
	}
}

// TestHoles checks sizes beyond diagonalisation by the exchange of pairs and holes,
// P ↔ P† with the levels reversed: for levels ε_p = p,
//
//	E(M−N) = Σ_p 2ε_p − 2N(M+1) + 2GN − GM + E(N),
//
// which relates two different systems of equations.
func TestHoles(t *testing.T) {
	for _, test := range []struct {
		levels, pairs int
		g             float64
	}{{30, 14, 0.5}, {40, 12, 0.2}, {40, 3, 2}, {30, 13, 5}, {60, 29, 0.5}} {
		if test.levels > 40 && testing.Short() {
			continue
		}
		few, err := Model{Levels: test.levels, Spacing: 1, Coupling: test.g, Pairs: test.pairs}.Exact(t.Context())
		if err != nil {
			t.Fatal(err)
		}
		many, err := Model{Levels: test.levels, Spacing: 1, Coupling: test.g, Pairs: test.levels - test.pairs}.Exact(t.Context())
		if err != nil {
			t.Fatal(err)
		}
		m, n := float64(test.levels), float64(test.pairs)
		want := m*(m+1) - 2*n*(m+1) + 2*test.g*n - test.g*m + few
		if math.Abs(many-want) > 1e-12*m*m {
			t.Errorf("%+v: %.12f, expected %.12f", test, many, want)
		}
	}
}

// TestHalfFilled checks 50 pairs on 100 levels at weak coupling by perturbation
// theory, E = N(N+1) − GN − G² Σ 1/(2ε_a − 2ε_i) + O(G³).
func TestHalfFilled(t *testing.T) {
	const n = 50
	sum := 0.0
	for i := 1; i <= n; i++ {
		for a := n + 1; a <= 2*n; a++ {
			sum += 1 / (2 * float64(a-i))
		}
	}
	remainder := func(g float64) float64 {
		e, err := Model{Levels: 2 * n, Spacing: 1, Coupling: g, Pairs: n}.Exact(t.Context())
		if err != nil {
			t.Fatal(err)
		}
		return (e - (n*(n+1) - g*n - g*g*sum)) / (g * g * g)
	}
	if a, b := remainder(0.006), remainder(0.003); math.Abs(a/b-1) > 0.05 {
		t.Errorf("third-order remainders %.4f and %.4f, expected equal within 5 %%", a, b)
	}
}

func TestCancelled(t *testing.T) {
	ctx, cancel := context.WithCancel(t.Context())
	cancel()
	if _, err := (Model{Levels: 4, Spacing: 1, Coupling: 1, Pairs: 2}).Exact(ctx); !errors.Is(err, context.Canceled) {
		t.Errorf("got %v, expected context.Canceled", err)
	}
}

func TestViolations(t *testing.T) {
	err := Model{Levels: 0, Spacing: math.NaN(), Coupling: math.Inf(-1), Pairs: 3}.Validate()
	for _, want := range []string{"0 levels", "3 pairs", "spacing is NaN", "coupling is -Inf"} {
		if err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("%q is not among %v", want, err)
		}
	}
	if _, err := (Model{Levels: 129, Spacing: 1, Coupling: 1, Pairs: 1}).Hamiltonian(); err == nil {
		t.Error("129 levels are accepted")
	}
	for _, m := range []Model{{Levels: 4, Spacing: 0, Coupling: 1, Pairs: 2}, {Levels: 4, Spacing: 1, Coupling: -1, Pairs: 2}} {
		if _, err := m.Exact(t.Context()); err == nil {
			t.Errorf("%+v is accepted", m)
		}
	}
}
