package molecule

import (
	"fmt"
	"math"

	"leadline/hamiltonian/basis"
)

// Unit is a unit of length, in bohr.
type Unit float64

const (
	Bohr     Unit = 1
	Angstrom Unit = 1 / 0.529177210903 // CODATA 2018: Tiesinga et al., Rev. Mod. Phys. 93, 025010 (2021)
)

// closest is the least distance of two nuclei that is taken for a geometry, bohr:
// a fifteenth of the bond of H2. Closer ones are a mistake of unit or a doubled
// line.
const closest = 0.1

// farthest bounds coordinates, bohr.
const farthest = 1e6

// Atom is a nucleus and its place.
type Atom struct {
	Z        int        // atomic number
	Position [3]float64 // bohr
}

// NewAtom returns the atom of an element at a position in the given unit.
func NewAtom(symbol string, position [3]float64, unit Unit) (Atom, error) {
	z, ok := basis.AtomicNumber(symbol)
	if !ok {
		return Atom{}, fmt.Errorf("%q is no element", symbol)
	}
	for axis := range position {
		position[axis] *= float64(unit)
		if !(math.Abs(position[axis]) <= farthest) {
			return Atom{}, fmt.Errorf("coordinate %d of %s is %v bohr, expected a number within ±%.0e", axis+1, basis.Symbol(z), position[axis], farthest)
		}
	}
	return Atom{z, position}, nil
}

// Geometry is the atoms of a molecule.
type Geometry []Atom

// Validate reports an error unless there is an atom, every element is known and
// no two atoms are closer than 0.1 bohr.
func (g Geometry) Validate() error {
	if len(g) == 0 {
		return fmt.Errorf("molecule has no atoms")
	}
	for i, a := range g {
		if basis.Symbol(a.Z) == "?" {
			return fmt.Errorf("atom %d has atomic number %d, expected that of an element", i+1, a.Z)
		}
		for axis, x := range a.Position {
			if !(math.Abs(x) <= farthest) {
				return fmt.Errorf("coordinate %d of atom %d (%s) is %v bohr, expected a number within ±%.0e", axis+1, i+1, basis.Symbol(a.Z), x, farthest)
			}
		}
		for j, b := range g[:i] {
			if d := distance(a, b); d < closest {
				return fmt.Errorf("atoms %d (%s) and %d (%s) are %.3g bohr apart, expected at least %v", j+1, basis.Symbol(b.Z), i+1, basis.Symbol(a.Z), d, closest)
			}
		}
	}
	return nil
}

func distance(a, b Atom) float64 {
	d := 0.0
	for axis := range 3 {
		d = math.Hypot(d, a.Position[axis]-b.Position[axis])
	}
	return d
}

// NuclearRepulsion returns Σ_{A<B} Z_A Z_B / R_AB.
func (g Geometry) NuclearRepulsion() float64 {
	e := 0.0
	for i, a := range g {
		for _, b := range g[:i] {
			e += float64(a.Z) * float64(b.Z) / distance(a, b)
		}
	}
	return e
}

// NuclearDipole returns Σ_A Z_A R_A, in e·bohr about the origin.
func (g Geometry) NuclearDipole() (d [3]float64) {
	for _, a := range g {
		for axis := range d {
			d[axis] += float64(a.Z) * a.Position[axis]
		}
	}
	return d
}

// Electrons returns the numbers of up and down electrons for a charge and a
// number of unpaired electrons, N_up − N_down.
func (g Geometry) Electrons(charge, unpaired int) (up, down int, err error) {
	n := -charge
	for _, a := range g {
		n += a.Z
	}
	switch {
	case n < 1:
		return 0, 0, fmt.Errorf("charge %d leaves %d electrons, expected at least 1", charge, n)
	case unpaired < 0 || unpaired > n:
		return 0, 0, fmt.Errorf("unpaired is %d, expected 0 to %d (the number of electrons)", unpaired, n)
	case (n-unpaired)%2 != 0:
		parity := [2]string{"even", "odd"}[n%2]
		return 0, 0, fmt.Errorf("unpaired is %d, expected an %s number: charge %d leaves %d electrons", unpaired, parity, charge, n)
	}
	return (n + unpaired) / 2, (n - unpaired) / 2, nil
}

// CoreOrbitals returns the number of doubly occupied orbitals of the usual frozen
// core: for every atom those of the noble gas before its row of the periodic
// table (common practice). It does not look at the charge: an ion such as Li⁺ may
// have no electron left outside.
func (g Geometry) CoreOrbitals() int {
	n := 0
	for _, a := range g {
		core := 0
		for _, noble := range []int{2, 10, 18, 36, 54, 86} {
			if a.Z > noble {
				core = noble / 2
			}
		}
		n += core
	}
	return n
}
