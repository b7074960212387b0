package basis_test

import (
	"math"
	"strings"
	"testing"

	"leadline/hamiltonian/basis"
)

// Every embedded set carries hydrogen to argon, with its publication, and as
// many spherical functions as its publication says (contractions of the first
// row, e.g. cc-pVQZ: Dunning, J. Chem. Phys. 90, 1007 (1989), table of sets).
func TestEmbeddedSets(t *testing.T) {
	carbon := map[string]string{
		"STO-3G": "2s1p", "STO-6G": "2s1p", "6-31G": "3s2p", "6-31G*": "3s2p1d", "6-31G**": "3s2p1d",
		"6-311G**": "4s3p1d", "cc-pVDZ": "3s2p1d", "cc-pVTZ": "4s3p2d1f", "cc-pVQZ": "5s4p3d2f1g",
		"aug-cc-pVDZ": "4s3p2d", "aug-cc-pVTZ": "5s4p3d2f", "def2-SVP": "3s2p1d", "def2-TZVP": "5s3p2d1f",
	}
	hydrogen := map[string]string{
		"STO-3G": "1s", "STO-6G": "1s", "6-31G": "2s", "6-31G*": "2s", "6-31G**": "2s1p",
		"6-311G**": "3s1p", "cc-pVDZ": "2s1p", "cc-pVTZ": "3s2p1d", "cc-pVQZ": "4s3p2d1f",
		"aug-cc-pVDZ": "3s2p", "aug-cc-pVTZ": "4s3p2d", "def2-SVP": "2s1p", "def2-TZVP": "3s1p",
	}
	names := basis.Names()
	if len(names) != len(carbon) {
		t.Errorf("%d sets, expected %d", len(names), len(carbon))
	}
	for _, name := range names {
		set, err := basis.Named(name)
		if err != nil {
			t.Fatal(err)
		}
		if set.Name != name || !strings.Contains(set.Publication, "Phys.") && !strings.Contains(set.Publication, "Chim.") {
			t.Errorf("%s: name %q, publication %q", name, set.Name, set.Publication)
		}
		for z := 1; z <= 18; z++ {
			if _, err := set.Shells(z); err != nil {
				t.Error(err)
			}
		}
		for z, want := range map[int]string{6: carbon[name], 1: hydrogen[name]} {
			shells, _ := set.Shells(z)
			if got := contraction(shells); got != want {
				t.Errorf("%s %s: contraction %s, expected %s", name, basis.Symbol(z), got, want)
			}
		}
		if _, err := set.Shells(26); err == nil || !strings.Contains(err.Error(), "Fe") || !strings.Contains(err.Error(), name) {
			t.Errorf("%s: error for iron is %v, expected one that names both", name, err)
		}
	}
}

func contraction(shells []basis.Shell) string {
	var s strings.Builder
	for l, letter := range "spdfghi" {
		n := 0
		for _, shell := range shells {
			if shell.L == l {
				n++
			}
		}
		if n > 0 {
			s.WriteByte(byte('0' + n))
			s.WriteRune(letter)
		}
	}
	return s.String()
}

// The fully contracted functions of STO-nG are printed normalised; a mistyped
// digit shows here.
func TestMinimalSetsAreNormalised(t *testing.T) {
	for _, name := range []string{"STO-3G", "STO-6G"} {
		set, _ := basis.Named(name)
		for z := 1; z <= 18; z++ {
			shells, _ := set.Shells(z)
			for i, s := range shells {
				norm := 0.0
				for j, a := range s.Exponents {
					for k, b := range s.Exponents {
						norm += s.Coefficients[j] * s.Coefficients[k] * math.Pow(4*a*b/((a+b)*(a+b)), 0.75+0.5*float64(s.L))
					}
				}
				if math.Abs(norm-1) > 2e-5 {
					t.Errorf("%s %s shell %d: norm² %.7f, expected 1", name, basis.Symbol(z), i+1, norm)
				}
			}
		}
	}
}

func TestSpellings(t *testing.T) {
	for spelling, want := range map[string]string{
		"sto-3g": "STO-3G", "STO3G": "STO-3G", "6-31g(d)": "6-31G*", "6-31G(d,p)": "6-31G**", "6-31g**": "6-31G**",
		"6-311G(d, p)": "6-311G**", "ccpvdz": "cc-pVDZ", "CC-PVTZ": "cc-pVTZ", "aug-cc-pvtz": "aug-cc-pVTZ",
		"AVDZ": "aug-cc-pVDZ", "def2svp": "def2-SVP", "Def2 TZVP": "def2-TZVP",
	} {
		set, err := basis.Named(spelling)
		if err != nil {
			t.Errorf("%q: %v", spelling, err)
		} else if set.Name != want {
			t.Errorf("%q is %s, expected %s", spelling, set.Name, want)
		}
	}
	if _, err := basis.Named("6-31G***"); err == nil || !strings.Contains(err.Error(), "cc-pVQZ") {
		t.Errorf("unknown name: %v, expected an error that lists the names", err)
	}
}

func TestElements(t *testing.T) {
	for symbol, want := range map[string]int{"H": 1, "he": 2, "AR": 18, "Kr": 36, "Xe": 54, "Rn": 86, "Og": 118} {
		if z, ok := basis.AtomicNumber(symbol); !ok || z != want {
			t.Errorf("%s is element %d, expected %d", symbol, z, want)
		}
		if z, _ := basis.AtomicNumber(basis.Symbol(want)); z != want {
			t.Errorf("symbol of %d is %s", want, basis.Symbol(want))
		}
	}
	if _, ok := basis.AtomicNumber("Xx"); ok {
		t.Error("Xx is an element")
	}
}
