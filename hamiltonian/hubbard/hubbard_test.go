package hubbard

import (
	"math"
	"slices"
	"strings"
	"testing"

	"leadline/hamiltonian/internal/fock"
)

// TestForm compares both decompositions, as normal-ordered squares and as squares,
// element by element with U Σ n↑n↓ and the hopping.
func TestForm(t *testing.T) {
	for _, m := range []Model{
		{Sites: []int{4}, Periodic: []bool{true}, Hopping: 1, Up: 2, Down: 1},
		{Sites: []int{2, 3}, Periodic: []bool{true, true}, Hopping: 0.7, Up: 2, Down: 2},
		{Sites: []int{2, 2, 2}, Periodic: []bool{false, true, false}, Hopping: 1, Up: 1, Down: 1},
	} {
		for _, u := range []float64{4, -3, 0} {
			for _, decomposition := range []Decomposition{Spin, Charge} {
				m.Repulsion, m.Decomposition = u, decomposition
				h, err := m.Hamiltonian()
				if err != nil {
					t.Fatal(err)
				}
				if err := h.Validate(); err != nil {
					t.Error(err)
				}
				space := fock.New(h.Sector)
				want := space.Integrals(0, h.OneBody[0].At, func(p, q, r, s int) float64 { return 0 })
				for i := range space.Dim() {
					for p := range h.Orbitals {
						want.Set(i, i, want.At(i, i)+u*space.Occupied(i, 0, p)*space.Occupied(i, 1, p))
					}
				}
				normal, squares := space.Normal(h), space.Squares(h)
				for i := range space.Dim() {
					for j := range space.Dim() {
						if math.Abs(normal.At(i, j)-want.At(i, j)) > 1e-13 || math.Abs(squares.At(i, j)-want.At(i, j)) > 1e-13 {
							t.Fatalf("%v U = %g, decomposition %d: element %d,%d is %v normal-ordered and %v squared, expected %v",
								m.Sites, u, decomposition, i, j, normal.At(i, j), squares.At(i, j), want.At(i, j))
						}
					}
				}
				// Real fields, s = −1, in the spin form of repulsion and the charge form of
				// attraction.
				for _, s := range h.Factors.Sign {
					if real := (u > 0) == (decomposition == Spin); real != (s < 0) {
						t.Errorf("U = %g, decomposition %d: sign %g", u, decomposition, s)
					}
				}
			}
		}
	}
}

// TestEnergies checks lattices against energies of an independent Lanczos code in
// the site basis (this project's reference table) and, for 4×4, the five decimals
// of Dagotto et al., Phys. Rev. B 45, 10741 (1992), Table II.
func TestEnergies(t *testing.T) {
	on, off := true, false
	for _, test := range []struct {
		sites    []int
		periodic []bool
		up, down int
		u, want  float64
	}{
		{[]int{4}, []bool{on}, 2, 2, 4, -2.102748483462},
		{[]int{6}, []bool{on}, 3, 3, 4, -3.668706178873},
		{[]int{6}, []bool{on}, 2, 2, 8, -4.20797753612},
		{[]int{6}, []bool{off}, 3, 3, 4, -3.092565319505},
		{[]int{6, 1}, []bool{off, on}, 2, 2, 2, -5.017468463489},
		{[]int{2, 2}, []bool{on, on}, 2, 2, 4, -2.102748483462},
		{[]int{2, 3}, []bool{on, on}, 3, 3, 8, -2.3108285447},
		{[]int{2, 3}, []bool{on, on}, 2, 2, 4, -6.332962199385},
		{[]int{4, 4}, []bool{on, on}, 1, 1, 4, -7.838927194942},
		{[]int{4, 4}, []bool{on, on}, 1, 1, 20, -7.674967622411},
	} {
		m := Model{Sites: test.sites, Periodic: test.periodic, Hopping: 1, Repulsion: test.u, Up: test.up, Down: test.down, Decomposition: Charge}
		h, err := m.Hamiltonian()
		if err != nil {
			t.Fatal(err)
		}
		if e := fock.Lowest(fock.New(h.Sector).Normal(h)); math.Abs(e-test.want) > 1e-10 {
			t.Errorf("%v periodic %v, %d+%d, U = %g: %.12f, expected %.12f", test.sites, test.periodic, test.up, test.down, test.u, e, test.want)
		}
	}
}

// TestBonds lists those of the periodic 2×4 lattice by hand: four across, eight
// along the two rings.
func TestBonds(t *testing.T) {
	m := Model{Sites: []int{2, 4}, Periodic: []bool{true, true}}
	want := [][2]int{{0, 4}, {1, 5}, {2, 6}, {3, 7}, {0, 1}, {1, 2}, {2, 3}, {3, 0}, {4, 5}, {5, 6}, {6, 7}, {7, 4}}
	if got := m.Bonds(); !slices.Equal(got, want) {
		t.Errorf("bonds %v, expected %v", got, want)
	}
}

func TestViolations(t *testing.T) {
	m := Model{Sites: []int{4, 0, -1}, Periodic: []bool{true}, Hopping: math.NaN(), Repulsion: math.Inf(1), Decomposition: 7}
	err := m.Validate()
	if err == nil {
		t.Fatal("nonsense is accepted")
	}
	for _, want := range []string{"axis 2 has 0 sites", "axis 3 has -1 sites", "periodic has 1 entries, expected one for each of 3 axes",
		"hopping is NaN", "repulsion is +Inf", "decomposition is 7"} {
		if !strings.Contains(err.Error(), want) {
			t.Errorf("%q is not among\n%v", want, err)
		}
	}
	for want, m := range map[string]Model{
		"lattice has no axis":           {Up: 1},
		"lattice has more than 1000":    {Sites: []int{1 << 31, 1 << 31, 1 << 31}, Periodic: make([]bool, 3), Up: 1},
		"sector has 5 up electrons":     {Sites: []int{4}, Periodic: []bool{true}, Up: 5},
		"sector has no electrons":       {Sites: []int{4}, Periodic: []bool{true}},
		"sector has -1 down electrons,": {Sites: []int{4}, Periodic: []bool{true}, Up: 1, Down: -1},
	} {
		if _, err := m.Hamiltonian(); err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("got %v, expected %q", err, want)
		}
	}
}
