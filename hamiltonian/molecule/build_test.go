package molecule_test

import (
	"context"
	"math"
	"runtime"
	"slices"
	"strings"
	"testing"

	"gonum.org/v1/gonum/mat"

	"leadline/hamiltonian"
	"leadline/hamiltonian/basis"
	"leadline/hamiltonian/meanfield"
	"leadline/hamiltonian/molecule"
)

func build(t testing.TB, g molecule.Geometry, name string, o molecule.Options) *molecule.Result {
	t.Helper()
	r, err := molecule.Build(context.Background(), g, set(t, name), o)
	if err != nil {
		t.Fatal(err)
	}
	return r
}

func energy(t testing.TB, r *molecule.Result, kind meanfield.Kind) *meanfield.Solution {
	t.Helper()
	s, err := meanfield.Solve(context.Background(), r.Hamiltonian, kind, meanfield.Options{Guess: r.Density, Starts: -1})
	if err != nil {
		t.Fatal(err)
	}
	return s
}

// distorted is water with no symmetry and a hydrogen atom nearby.
var distorted = molecule.Geometry{
	{Z: 8, Position: [3]float64{0, 0, 0.2}},
	{Z: 1, Position: [3]float64{0.1, 1.45, -0.9}},
	{Z: 1, Position: [3]float64{-0.2, -1.4, -0.8}},
	{Z: 1, Position: [3]float64{2.5, 0.3, 0.7}},
}

// Published totals.
func TestPublishedEnergies(t *testing.T) {
	for _, c := range []struct {
		name, basis       string
		geometry          molecule.Geometry
		cartesian         bool
		energy, tolerance float64
		source            string
	}{
		{"water", "dz-h2o", molecule.Geometry{
			{Z: 8, Position: [3]float64{0, 0, -0.009}},
			{Z: 1, Position: [3]float64{0, 1.515263, -1.058898}},
			{Z: 1, Position: [3]float64{0, -1.515263, -1.058898}},
		}, false, -76.009838, 1e-6, "Saxe, Schaefer and Handy, Chem. Phys. Lett. 79, 202 (1981), from memory"},
		{"water, cartesian d", "6-31G*", bent(8, 0.9473*float64(molecule.Angstrom), 105.5), true, -76.01075, 1e-5,
			"Hehre, Radom, Schleyer, Pople, Ab Initio Molecular Orbital Theory (1986), from memory"},
		{"neon", "cc-pVDZ", molecule.Geometry{{Z: 10}}, false, -128.488776, 1e-6, "Dunning, J. Chem. Phys. 90, 1007 (1989), from memory"},
	} {
		r := build(t, c.geometry, c.basis, molecule.Options{Cartesian: c.cartesian, Tolerance: 1e-9})
		if s := energy(t, r, meanfield.RHF); math.Abs(s.Energy-c.energy) > c.tolerance {
			t.Errorf("%s %s: %.7f, published %.6f (%s)", c.name, c.basis, s.Energy, c.energy, c.source)
		}
	}
}

// bent returns an atom with two hydrogen atoms, degrees between the bonds.
func bent(z int, bond, degrees float64) molecule.Geometry {
	s, c := math.Sincos(degrees / 2 * math.Pi / 180)
	return molecule.Geometry{{Z: z}, {Z: 1, Position: [3]float64{bond * s, 0, bond * c}}, {Z: 1, Position: [3]float64{-bond * s, 0, bond * c}}}
}

// X is orthonormal, the density holds the right electrons, and its Fock matrix is
// a far better start than none.
func TestResult(t *testing.T) {
	for _, o := range []molecule.Options{{Unpaired: 1}, {Unpaired: 1, Cartesian: true}, {Charge: -1}, {Charge: 3}} {
		r := build(t, distorted, "cc-pVDZ", o)
		n, m := r.Orbitals.Dims()
		if want := map[bool]int{false: 29, true: 30}[o.Cartesian]; n != want || m != n {
			t.Errorf("%d functions, %d orbitals, expected %d", n, m, want)
		}
		var half, unit mat.Dense
		half.Mul(r.Overlap, r.Orbitals)
		unit.Mul(r.Orbitals.T(), &half)
		for p := range m {
			unit.Set(p, p, unit.At(p, p)-1)
		}
		if e := mat.Norm(&unit, 2); e > 1e-12 {
			t.Errorf("XᵀSX is off the unit matrix by %.1e", e)
		}
		for spin := range 2 {
			if e := mat.Trace(r.Density[spin]) - float64(r.Hamiltonian.Electrons(spin)); math.Abs(e) > 1e-10 {
				t.Errorf("density of spin %d has %.1e electrons too many", spin, e)
			}
		}
		if r.Residual > 1e-6 || r.Residual <= 0 || !r.Hamiltonian.SpinFree() || r.Quartets == 0 {
			t.Errorf("residual %v, spin-free %v, quartets %d", r.Residual, r.Hamiltonian.SpinFree(), r.Quartets)
		}
	}
	// The energy of the start, as of a density, lies within 0.3 of the solution:
	// tr(hD) + ½ tr((F−h)D) for a closed shell.
	r := build(t, distorted[:3], "cc-pVDZ", molecule.Options{})
	fock := meanfield.Fock(r.Hamiltonian, r.Density)
	e := r.Hamiltonian.Constant
	for p := range r.Hamiltonian.Orbitals {
		for q := range r.Hamiltonian.Orbitals {
			for spin := range 2 {
				e += 0.5 * (fock[spin].At(p, q) + r.Hamiltonian.OneBody[spin].At(p, q)) * r.Density[spin].At(p, q)
			}
		}
	}
	if s := energy(t, r, meanfield.RHF); math.Abs(e-s.Energy) > 0.3 {
		t.Errorf("energy of the first density %.3f, of the solution %.3f", e, s.Energy)
	}
}

// Cartesian functions hold the spherical ones: their energy is lower, and equal
// where there are only s and p functions.
func TestCartesian(t *testing.T) {
	s := energy(t, build(t, distorted[:3], "6-31G*", molecule.Options{Tolerance: 1e-9}), meanfield.RHF).Energy
	c := energy(t, build(t, distorted[:3], "6-31G*", molecule.Options{Tolerance: 1e-9, Cartesian: true}), meanfield.RHF).Energy
	if !(c < s-1e-4 && c > s-0.01) {
		t.Errorf("cartesian d give %.6f, spherical ones %.6f", c, s)
	}
	s = energy(t, build(t, distorted[:3], "6-31G", molecule.Options{Tolerance: 1e-9}), meanfield.RHF).Energy
	c = energy(t, build(t, distorted[:3], "6-31G", molecule.Options{Tolerance: 1e-9, Cartesian: true}), meanfield.RHF).Energy
	if math.Abs(s-c) > 1e-8 {
		t.Errorf("without d functions cartesian ones give %.9f, spherical ones %.9f", c, s)
	}
}

// Moving and turning the molecule changes no energy. The dipole moment turns along.
func TestMovedMolecule(t *testing.T) {
	o := molecule.Options{Tolerance: 1e-11}
	a := build(t, distorted[:3], "cc-pVDZ", o)
	moved := slices.Clone(distorted[:3])
	turn := func(p [3]float64) [3]float64 { // by 0.7 about z, then z to x
		s, c := math.Sincos(0.7)
		return [3]float64{p[2], c*p[0] - s*p[1], s*p[0] + c*p[1]}
	}
	for i := range moved {
		moved[i].Position = turn(moved[i].Position)
		moved[i].Position[1] += 7
	}
	b := build(t, moved, "cc-pVDZ", o)
	sa, sb := energy(t, a, meanfield.RHF), energy(t, b, meanfield.RHF)
	if d := sa.Energy - sb.Energy; math.Abs(d) > 1e-9 {
		t.Errorf("energy changes by %.1e", d)
	}
	da, db := dipole(a, sa), dipole(b, sb)
	for axis, v := range turn(da) {
		if math.Abs(db[axis]-v) > 1e-6 {
			t.Errorf("dipole moment %v turns into %v, expected %v", da, db, turn(da))
		}
	}
}

func dipole(r *molecule.Result, s *meanfield.Solution) [3]float64 {
	d := r.NuclearDipole
	for axis := range d {
		for spin := range 2 {
			var x mat.Dense
			x.Mul(s.Density(spin), r.Position[axis])
			d[axis] -= mat.Trace(&x)
		}
	}
	return d
}

// The dipole moment is minus the derivative of the energy in a field.
func TestDipoleIsDerivative(t *testing.T) {
	r := build(t, distorted[:3], "6-31G", molecule.Options{Tolerance: 1e-10})
	d := dipole(r, energy(t, r, meanfield.RHF))
	const field = 1e-3
	for axis := range 3 {
		var e [2]float64
		for k, f := range []float64{field, -field} {
			in := *r.Hamiltonian
			one := mat.NewSymDense(in.Orbitals, nil)
			one.ScaleSym(f, r.Position[axis]) // electrons: +F·x, nuclei: −F·X
			one.AddSym(one, r.Hamiltonian.OneBody[0])
			in.OneBody = [2]*mat.SymDense{one, one}
			in.Constant -= f * r.NuclearDipole[axis]
			s, err := meanfield.Solve(context.Background(), &in, meanfield.RHF, meanfield.Options{Guess: r.Density, Starts: -1})
			if err != nil {
				t.Fatal(err)
			}
			e[k] = s.Energy
		}
		if want := -(e[0] - e[1]) / (2 * field); math.Abs(d[axis]-want) > 1e-4 {
			t.Errorf("axis %d: dipole moment %.6f, derivative of the energy %.6f", axis, d[axis], want)
		}
	}
}

// A far atom does nothing, at any distance: energies add up.
func TestFarAtom(t *testing.T) {
	o := molecule.Options{Tolerance: 1e-9}
	alone := energy(t, build(t, distorted[:3], "6-31G", o), meanfield.RHF).Energy
	helium := energy(t, build(t, molecule.Geometry{{Z: 2}}, "6-31G", o), meanfield.RHF).Energy
	for _, far := range []float64{60, 1e3, 9e5} {
		g := append(slices.Clone(distorted[:3]), molecule.Atom{Z: 2, Position: [3]float64{far, 0, 0}})
		e := energy(t, build(t, g, "6-31G", o), meanfield.RHF).Energy
		if d := e - alone - helium; math.Abs(d) > 2e-8 {
			t.Errorf("helium %v bohr away changes the energy by %.1e", far, d)
		}
	}
}

// Functions that are equal but for the seventh digit: one of each two is removed,
// with a warning, and the energy is that of the basis without them.
func TestNearDependence(t *testing.T) {
	read := func(text string) *basis.Set {
		s, err := basis.Read(strings.NewReader(text), "twins")
		if err != nil {
			t.Fatal(err)
		}
		return s
	}
	g := molecule.Geometry{{Z: 1}, {Z: 1, Position: [3]float64{0, 0, 1.4}}}
	single := read("H 0\nS 1\n1.3 1\nS 1\n0.3 1\nP 1\n0.7 1\n")
	double := read("H 0\nS 1\n1.3 1\nS 1\n0.3 1\nS 1\n0.3000001 1\nP 1\n0.7 1\n")
	var e [2]float64
	for i, s := range []*basis.Set{single, double} {
		r, err := molecule.Build(context.Background(), g, s, molecule.Options{Tolerance: 1e-9})
		if err != nil {
			t.Fatal(err)
		}
		if r.Hamiltonian.Orbitals != 10 {
			t.Errorf("%d orbitals, expected 10", r.Hamiltonian.Orbitals)
		}
		if i == 0 && len(r.Warnings) > 0 {
			t.Errorf("warnings %v without dependence", r.Warnings)
		}
		if i == 1 && (len(r.Warnings) != 1 || r.Warnings[0].Figure != 2 || !strings.Contains(r.Warnings[0].Text, "2 of 12 functions removed")) {
			t.Errorf("warnings %v, expected one of 2 functions removed", r.Warnings)
		}
		e[i] = energy(t, r, meanfield.RHF).Energy
	}
	if d := e[1] - e[0]; math.Abs(d) > 1e-7 {
		t.Errorf("twins change the energy by %.1e", d)
	}
}

// The same bits for any number of processors.
func TestBuildIsDeterministic(t *testing.T) {
	defer runtime.GOMAXPROCS(runtime.GOMAXPROCS(0))
	var want *molecule.Result
	for _, n := range []int{1, 2, 5} {
		runtime.GOMAXPROCS(n)
		r := build(t, distorted, "6-31G**", molecule.Options{Unpaired: 1})
		if want == nil {
			want = r
		}
		if !slices.Equal(r.Hamiltonian.Factors.Packed[0], want.Hamiltonian.Factors.Packed[0]) || !mat.Equal(r.Density[0], want.Density[0]) ||
			!mat.Equal(r.Hamiltonian.OneBody[0], want.Hamiltonian.OneBody[0]) {
			t.Errorf("other numbers with %d processors", n)
		}
	}
}

func TestBuildErrors(t *testing.T) {
	hydrogen, _ := basis.Read(strings.NewReader("H 0\nS 1\n1 1\n"), "mine")
	sto := set(t, "STO-3G")
	for _, c := range []struct {
		geometry molecule.Geometry
		set      *basis.Set
		options  molecule.Options
		want     string
	}{
		{molecule.Geometry{{Z: 1}, {Z: 26, Position: [3]float64{0, 0, 3}}}, sto, molecule.Options{Unpaired: 1}, "atom 2: basis STO-3G has no functions for element Fe"},
		{molecule.Geometry{{Z: 3}}, hydrogen, molecule.Options{Unpaired: 1}, "atom 1: basis mine has no functions for element Li"},
		{molecule.Geometry{{Z: 1}}, hydrogen, molecule.Options{Charge: -3}, "basis mine is too small: sector has 2 up electrons, expected 0 to 1"},
		{molecule.Geometry{{Z: 1}}, hydrogen, molecule.Options{}, "unpaired is 0, expected an odd number"},
		{molecule.Geometry{{Z: 1}, {Z: 1}}, hydrogen, molecule.Options{}, "atoms 1 (H) and 2 (H) are 0 bohr apart"},
		{molecule.Geometry{{Z: 1}}, hydrogen, molecule.Options{Unpaired: 1, Tolerance: 1e-18}, "factor tolerance is 1.0e-18, expected at least"},
	} {
		if _, err := molecule.Build(context.Background(), c.geometry, c.set, c.options); err == nil || !strings.Contains(err.Error(), c.want) {
			t.Errorf("error %v, expected %q", err, c.want)
		}
	}
	ctx, cancel := context.WithCancel(context.Background())
	cancel()
	if _, err := molecule.Build(ctx, distorted, sto, molecule.Options{Unpaired: 1}); err != context.Canceled {
		t.Errorf("error %v, expected that of the context", err)
	}
}

// One electron, one function; and an atom whose basis is too small for its shells.
func TestSmallest(t *testing.T) {
	r := build(t, molecule.Geometry{{Z: 1}}, "STO-3G", molecule.Options{Unpaired: 1})
	// Exact in this function: Szabo and Ostlund, Modern Quantum Chemistry, E(H) in
	// STO-3G with ζ = 1.24 is −0.4666 (from memory).
	if e := energy(t, r, meanfield.UHF).Energy; math.Abs(e+0.46658) > 1e-4 {
		t.Errorf("hydrogen atom in STO-3G: %.5f, expected −0.4666", e)
	}
	s, err := basis.Read(strings.NewReader("C 0\nS 1\n1 1\nS 1\n0.3 1\nS 1\n9 1\nS 1\n80 1\n"), "s only")
	if err != nil {
		t.Fatal(err)
	}
	r, err = molecule.Build(context.Background(), molecule.Geometry{{Z: 6}}, s, molecule.Options{})
	if err != nil {
		t.Fatal(err)
	}
	if e := mat.Trace(r.Density[hamiltonian.Up]) - 3; math.Abs(e) > 1e-10 {
		t.Errorf("density of carbon in s functions has %v up electrons too many", e)
	}
}

// The bounds of what a basis may hold: finite numbers come out, and the energy of
// an electron is that of the function that matters.
func TestExtremeExponents(t *testing.T) {
	text := "H 0\nS 1\n1e12 1\nS 1\n0.2829421 1\nS 1\n1e-9 1\nI 1\n1e12 1\nI 1\n1e-9 1\n"
	s, err := basis.Read(strings.NewReader(text), "extreme")
	if err != nil {
		t.Fatal(err)
	}
	r, err := molecule.Build(context.Background(), molecule.Geometry{{Z: 1}}, s, molecule.Options{Unpaired: 1})
	if err != nil {
		t.Fatal(err)
	}
	// One Gaussian gives −4/(3π) at the exponent 8/(9π) (the textbook example of the
	// variation principle; Szabo and Ostlund, exercise 1.18, from memory).
	if e := energy(t, r, meanfield.UHF).Energy; math.Abs(e+4/(3*math.Pi)) > 2e-4 {
		t.Errorf("energy %.6f, expected %.6f", e, -4/(3*math.Pi))
	}
}
