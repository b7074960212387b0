package meanfield

import (
	"context"
	"errors"
	"math"
	"math/rand/v2"
	"runtime"
	"strings"
	"testing"

	"gonum.org/v1/gonum/mat"

	"leadline/hamiltonian"
	"leadline/hamiltonian/internal/fock"
)

// Sectors in which every state is a determinant (no, one or all but one electron
// of one spin, the other spin empty or full): UHF is exact there.
func TestExactSectors(t *testing.T) {
	const m = 4
	for _, n := range [][2]int{{1, 0}, {0, 1}, {3, 0}, {4, 0}, {4, 1}, {1, 4}, {4, 3}, {3, 4}, {4, 4}} {
		for _, resolved := range []bool{false, true} {
			h := general(hamiltonian.Sector{Orbitals: m, Up: n[0], Down: n[1]}, 3, 2, resolved, 31)
			exact := fock.Lowest(fock.New(h.Sector).Normal(h))
			s, err := Solve(t.Context(), h, UHF, Options{})
			if err != nil {
				t.Fatal(err)
			}
			if math.Abs(s.Energy-exact) > 1e-10 {
				t.Errorf("%v resolved %v: %.12f, expected %.12f", n, resolved, s.Energy, exact)
			}
			for spin := range 2 {
				if rows, columns := s.Occupied(spin).Dims(); columns != n[spin] || n[spin] > 0 && rows != m {
					t.Errorf("%v: %d×%d orbitals of spin %d", n, rows, columns, spin)
				}
			}
			if _, err := Solve(t.Context(), h, ROHF, Options{}); (err != nil) != resolved {
				t.Errorf("%v resolved %v: rohf: %v", n, resolved, err)
			}
		}
	}
}

func TestNoInteraction(t *testing.T) {
	h := general(hamiltonian.Sector{Orbitals: 5, Up: 2, Down: 1}, 0, 0, false, 2)
	values, _, _ := eigenvectors(h.OneBody[0])
	for _, kind := range []Kind{ROHF, UHF} {
		s, err := Solve(t.Context(), h, kind, Options{})
		if err != nil {
			t.Fatal(err)
		}
		if want := h.Constant + 2*values[0] + values[1]; math.Abs(s.Energy-want) > 1e-11 {
			t.Errorf("%s: %.12f, expected %.12f", kind, s.Energy, want)
		}
	}
}

// A solution belongs to its energy, is canonical, and does not change with the
// basis or the names of the spins.
func TestSolutionsAreConsistent(t *testing.T) {
	random := rand.New(rand.NewPCG(6, 6))
	for _, c := range []struct {
		kind     Kind
		up, down int
		resolved bool
	}{{RHF, 2, 2, false}, {ROHF, 3, 1, false}, {ROHF, 1, 2, false}, {UHF, 3, 2, false}, {UHF, 2, 2, true}} {
		h := general(hamiltonian.Sector{Orbitals: 6, Up: c.up, Down: c.down}, 5, 2, c.resolved, 17)
		s, err := Solve(t.Context(), h, c.kind, Options{})
		if err != nil {
			t.Fatal(err)
		}
		occupied := [2]*mat.Dense{s.Occupied(0), s.Occupied(1)}
		if e := Energy(h, occupied); math.Abs(e-s.Energy) > 1e-11 {
			t.Errorf("%v: orbitals have energy %.12f, solution says %.12f", c, e, s.Energy)
		}
		if (s.Orbitals[0] == s.Orbitals[1]) != (c.kind != UHF) {
			t.Errorf("%v: shared orbitals", c)
		}
		f := Fock(h, [2]*mat.SymDense{s.Density(0), s.Density(1)})
		for spin := range 2 {
			var unit, fmo mat.Dense
			unit.Mul(s.Orbitals[spin].T(), s.Orbitals[spin])
			fmo.Mul(f[spin], s.Orbitals[spin])
			fmo.Mul(s.Orbitals[spin].T(), &fmo)
			n := h.Electrons(spin)
			for p := range 6 {
				for q := range 6 {
					want := 0.0
					if p == q {
						want = 1
					}
					if math.Abs(unit.At(p, q)-want) > 1e-12 {
						t.Errorf("%v: overlap (%d,%d) %.1e", c, p, q, unit.At(p, q))
					}
					if c.kind != ROHF && (p < n) != (q < n) && math.Abs(fmo.At(p, q)) > 1e-8 {
						t.Errorf("%v: Fock element (%d,%d) is %.1e", c, p, q, fmo.At(p, q))
					}
				}
				if c.kind != ROHF && math.Abs(fmo.At(p, p)-s.OrbitalEnergies[spin][p]) > 1e-10 {
					t.Errorf("%v: orbital energy %d", c, p)
				}
				if p > 0 && p != h.Up && p != h.Down && s.OrbitalEnergies[spin][p] < s.OrbitalEnergies[spin][p-1] {
					t.Errorf("%v: orbital energies out of order at %d", c, p)
				}
			}
		}
		if turned, err := Solve(t.Context(), h.Rotate(orthonormal(6, 6, random)), c.kind, Options{Starts: 30}); err != nil || math.Abs(turned.Energy-s.Energy) > 1e-9 {
			t.Errorf("%v: in other orbitals %v %.10f, expected %.10f", c, err, turned.Energy, s.Energy)
		}
		swapped := *h
		swapped.Up, swapped.Down = h.Down, h.Up
		swapped.OneBody = [2]*mat.SymDense{h.OneBody[1], h.OneBody[0]}
		factors := *h.Factors
		factors.Packed = [2][]float64{factors.Packed[1], factors.Packed[0]}
		swapped.Factors = &factors
		if other, err := Solve(t.Context(), &swapped, c.kind, Options{Starts: 30}); err != nil || math.Abs(other.Energy-s.Energy) > 1e-9 {
			t.Errorf("%v: spins swapped %v %.10f, expected %.10f", c, err, other.Energy, s.Energy)
		}
	}
}

func TestIndependentOfProcessors(t *testing.T) {
	h := readIntegrals(t, "H10_chain_R1.8_sto6g.fcidump")
	defer runtime.GOMAXPROCS(runtime.GOMAXPROCS(0))
	var first *Solution
	for _, n := range []int{1, 2, 7} {
		runtime.GOMAXPROCS(n)
		s, err := Solve(t.Context(), h, UHF, Options{})
		if err != nil {
			t.Fatal(err)
		}
		if first == nil {
			first = s
		}
		if s.Energy != first.Energy || !mat.Equal(s.Orbitals[0], first.Orbitals[0]) || !mat.Equal(s.Orbitals[1], first.Orbitals[1]) {
			t.Errorf("%d processors: another solution", n)
		}
	}
}

// Davidson's method finds the eigenvalue of the whole Hessian, at minima, at
// saddle points and where the lowest mode has a symmetry of its own.
func TestLowestMode(t *testing.T) {
	for _, file := range []string{"H10_chain_R1.8_sto6g", "Be_ccpvdz", "Hubbard_sq4x4_U4_5u5d", "Hubbard_ring10_U4_5u5d"} {
		h := readIntegrals(t, file+".fcidump")
		for _, kind := range []Kind{RHF, UHF} {
			s, err := Solve(t.Context(), h, kind, Options{})
			if err != nil {
				t.Fatal(err)
			}
			p := newProblem(h, UHF)
			pt := p.canonical(p.at(s.Orbitals))
			want, _, err := p.lowestDense(t.Context(), pt)
			if err != nil {
				t.Fatal(err)
			}
			got, vector, err := p.lowestDavidson(t.Context(), pt)
			if err != nil {
				t.Fatal(err)
			}
			hx := make([]float64, p.size)
			p.hessian(pt, vector, hx)
			// Far below zero the search ends at a residual of 2 %.
			if tolerance := 1e-7 + 1e-3*max(0, -want); math.Abs(got-want) > tolerance {
				t.Errorf("%s at %s: %.9f, expected %.9f", file, kind, got, want)
			}
		}
	}
}

func TestNaturalOrbitals(t *testing.T) {
	h := readIntegrals(t, "LiH_3.0A_631g.fcidump")
	uhf, err := Solve(t.Context(), h, UHF, Options{})
	if err != nil {
		t.Fatal(err)
	}
	orbitals, occupations := NaturalOrbitals(uhf, h)
	total := mat.NewSymDense(h.Orbitals, nil)
	total.AddSym(uhf.Density(0), uhf.Density(1))
	var d mat.Dense
	d.Mul(total, orbitals)
	d.Mul(orbitals.T(), &d)
	for p := range h.Orbitals {
		for q := range h.Orbitals {
			want := 0.0
			if p == q {
				want = occupations[p]
			}
			if math.Abs(d.At(p, q)-want) > 1e-10 {
				t.Errorf("density (%d,%d) is %.1e, expected %.6f", p, q, d.At(p, q), want)
			}
		}
	}
	// Natural orbitals of a determinant of two electron pairs: occupations come in
	// pairs n, 2 − n (Amos & Hall, Proc. R. Soc. A 263, 483 (1961)), and
	// ⟨S²⟩ = Σ over pairs of 1 − (n − 1)².
	if math.Abs(occupations[0]+occupations[3]-2) > 1e-10 || math.Abs(occupations[1]+occupations[2]-2) > 1e-10 {
		t.Errorf("occupations %v do not pair", occupations)
	}
	s2 := 2 - math.Pow(occupations[0]-1, 2) - math.Pow(occupations[1]-1, 2)
	if math.Abs(s2-uhf.SpinSquared) > 1e-9 {
		t.Errorf("<S^2> from occupations %.9f, expected %.9f", s2, uhf.SpinSquared)
	}
	// In a basis that says nothing of the solution.
	h = h.Rotate(orthonormal(h.Orbitals, h.Orbitals, rand.New(rand.NewPCG(1, 9))))
	rhf, err := Solve(t.Context(), h, RHF, Options{})
	if err != nil {
		t.Fatal(err)
	}
	orbitals, occupations = NaturalOrbitals(rhf, h)
	f := Fock(h, [2]*mat.SymDense{rhf.Density(0), rhf.Density(1)})
	var fmo mat.Dense
	fmo.Mul(f[0], orbitals)
	fmo.Mul(orbitals.T(), &fmo)
	for p, e := range rhf.OrbitalEnergies[0] {
		if math.Abs(fmo.At(p, p)-e) > 1e-10 {
			t.Errorf("natural orbital %d of RHF has energy %.9f, expected %.9f", p+1, fmo.At(p, p), e)
		}
		if want := 2 * float64(min(1, max(0, 2-p))); math.Abs(occupations[p]-want) > 1e-12 {
			t.Errorf("occupation %d is %v", p+1, occupations[p])
		}
	}
}

func TestFrozenCore(t *testing.T) {
	for _, c := range []struct {
		file string
		n    int
		core float64 // energy of the highest frozen orbital lies below this
	}{{"N2_1.6A_sto6g", 2, -10}, {"N_631g_quartet", 1, -10}, {"LiH_3.0A_631g", 1, -2}} {
		h := readIntegrals(t, c.file+".fcidump")
		frozen, s, err := FrozenCore(t.Context(), h, c.n, Options{})
		if err != nil {
			t.Fatal(err)
		}
		if frozen.Orbitals != h.Orbitals-c.n || frozen.Up != h.Up-c.n || frozen.Down != h.Down-c.n {
			t.Errorf("%s: sector %+v", c.file, frozen.Sector)
		}
		if e := s.OrbitalEnergies[0]; e[c.n-1] > c.core || e[c.n] < c.core {
			t.Errorf("%s: orbital energies %v", c.file, e[:c.n+1])
		}
		inside, err := Solve(t.Context(), frozen, ROHF, Options{})
		if err != nil {
			t.Fatal(err)
		}
		if math.Abs(inside.Energy-s.Energy) > 1e-9 {
			t.Errorf("%s: energy inside %.10f, of everything %.10f", c.file, inside.Energy, s.Energy)
		}
		// The remaining orbitals are columns n on: a UHF determinant inside has the
		// same energy with the core put back.
		u, err := Solve(t.Context(), frozen, UHF, Options{})
		if err != nil {
			t.Fatal(err)
		}
		var whole [2]*mat.Dense
		for spin := range whole {
			rest := s.Orbitals[spin].Slice(0, h.Orbitals, c.n, h.Orbitals)
			whole[spin] = leading(s.Orbitals[spin], h.Electrons(spin))
			whole[spin].Slice(0, h.Orbitals, c.n, h.Electrons(spin)).(*mat.Dense).Mul(rest, u.Occupied(spin))
		}
		if e := Energy(h, whole); math.Abs(e-u.Energy) > 1e-10 {
			t.Errorf("%s: uhf inside %.10f, with the core %.10f", c.file, u.Energy, e)
		}
	}
}

func TestGuessIsUsed(t *testing.T) {
	h := readIntegrals(t, "H2_ccpvdz_R4.0.fcidump")
	s, err := Solve(t.Context(), h, UHF, Options{})
	if err != nil {
		t.Fatal(err)
	}
	again, err := Solve(t.Context(), h, UHF, Options{Guess: [2]*mat.SymDense{s.Density(0), s.Density(1)}})
	if err != nil {
		t.Fatal(err)
	}
	if again.Iterations > 3 || math.Abs(again.Energy-s.Energy) > 1e-10 {
		t.Errorf("%d iterations to %.10f, expected %.10f", again.Iterations, again.Energy, s.Energy)
	}
}

func TestSolveErrors(t *testing.T) {
	h := readIntegrals(t, "H5_chain_R1.8_sto6g_doublet.fcidump")
	resolved := general(hamiltonian.Sector{Orbitals: 4, Up: 2, Down: 2}, 3, 0, true, 1)
	bad := general(hamiltonian.Sector{Orbitals: 4, Up: 2, Down: 2}, 3, 0, false, 1)
	bad.OneBody[0].SetSym(1, 2, math.NaN())
	for _, c := range []struct {
		h    *hamiltonian.Hamiltonian
		kind Kind
		o    Options
		want string
	}{
		{h, RHF, Options{}, "rhf needs as many up as down electrons, found 3 and 2: use rohf or uhf"},
		{resolved, RHF, Options{}, "rhf needs a Hamiltonian that acts alike on both spins: use uhf"},
		{resolved, UHF, Options{MaxIterations: 1, Tolerance: 1e-13}, "uhf did not converge"},
		{bad, UHF, Options{}, "expected a finite number"},
	} {
		if s, err := Solve(t.Context(), c.h, c.kind, c.o); err == nil || s != nil || !strings.Contains(err.Error(), c.want) {
			t.Errorf("%v, expected %q", err, c.want)
		}
	}
	ended, cancel := context.WithCancel(t.Context())
	cancel()
	if _, err := Solve(ended, h, UHF, Options{}); !errors.Is(err, context.Canceled) {
		t.Errorf("ended context: %v", err)
	}
	if _, _, err := FrozenCore(t.Context(), h, 3, Options{}); err == nil || !strings.Contains(err.Error(), "expected 0 to 2") {
		t.Errorf("core of 3: %v", err)
	}
}
