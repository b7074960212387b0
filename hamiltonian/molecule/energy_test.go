package molecule_test

import (
	"bufio"
	"context"
	"math"
	"os"
	"strconv"
	"strings"
	"testing"

	"leadline/hamiltonian/basis"
	"leadline/hamiltonian/meanfield"
	"leadline/hamiltonian/molecule"
)

// reference is one molecule of testdata/molecules.txt; NaN where nothing is known.
type reference struct {
	name, basis              string
	options                  molecule.Options
	functions                int
	repulsion                float64
	restricted, unrestricted float64
	geometry                 molecule.Geometry
}

func references(t testing.TB) []reference {
	file, err := os.Open("testdata/molecules.txt")
	if err != nil {
		t.Fatal(err)
	}
	defer file.Close()
	number := func(word string) float64 {
		if word == "-" {
			return math.NaN()
		}
		v, err := strconv.ParseFloat(word, 64)
		if err != nil {
			t.Fatal(err)
		}
		return v
	}
	var list []reference
	lines := bufio.NewScanner(file)
	for lines.Scan() {
		words := strings.Fields(lines.Text())
		switch {
		case len(words) == 8 && words[0] != "#":
			list = append(list, reference{
				name: words[0], basis: words[1],
				options:    molecule.Options{Charge: int(number(words[2])), Unpaired: int(number(words[3])), Tolerance: 1e-9},
				functions:  int(number(words[4])),
				repulsion:  number(words[5]),
				restricted: number(words[6]), unrestricted: number(words[7]),
			})
		case len(words) == 4:
			atom, err := molecule.NewAtom(words[0], [3]float64{number(words[1]), number(words[2]), number(words[3])}, molecule.Bohr)
			if err != nil {
				t.Fatal(err)
			}
			last := &list[len(list)-1]
			last.geometry = append(last.geometry, atom)
		}
	}
	if len(list) < 130 {
		t.Fatalf("%d molecules, expected at least 130", len(list))
	}
	return list
}

// set returns an embedded basis or one of testdata.
func set(t testing.TB, name string) *basis.Set {
	if s, err := basis.Named(name); err == nil {
		return s
	}
	file, err := os.Open("testdata/" + name + ".txt")
	if err != nil {
		t.Fatal(err)
	}
	defer file.Close()
	s, err := basis.Read(file, name)
	if err != nil {
		t.Fatal(err)
	}
	return s
}

// Nuclear repulsion, number of functions, RHF, ROHF and UHF energies of every
// reference molecule.
func TestMeanFieldEnergies(t *testing.T) {
	for _, ref := range references(t) {
		t.Run(ref.name, func(t *testing.T) {
			if testing.Short() && ref.functions > 20 {
				t.Skip("more than 20 functions")
			}
			if ref.functions > 30 {
				ref.options.Tolerance = 1e-8
			}
			ctx := context.Background()
			r, err := molecule.Build(ctx, ref.geometry, set(t, ref.basis), ref.options)
			if err != nil {
				t.Fatal(err)
			}
			h := r.Hamiltonian
			if h.Orbitals != ref.functions || len(r.Warnings) > 0 {
				t.Errorf("%d orbitals, expected %d; warnings %v", h.Orbitals, ref.functions, r.Warnings)
			}
			if d := h.Constant - ref.repulsion; math.Abs(d) > 1e-9 {
				t.Errorf("nuclear repulsion %.12f, off by %.1e", h.Constant, d)
			}
			for _, kind := range []meanfield.Kind{meanfield.ROHF, meanfield.UHF} {
				want := map[meanfield.Kind]float64{meanfield.ROHF: ref.restricted, meanfield.UHF: ref.unrestricted}[kind]
				if math.IsNaN(want) {
					continue
				}
				s, err := meanfield.Solve(ctx, h, kind, meanfield.Options{Guess: r.Density, Starts: -1})
				if err != nil {
					t.Fatal(err)
				}
				if d := s.Energy - want; math.Abs(d) > 1e-7 {
					t.Errorf("%v energy %.10f, expected %.10f: off by %.1e", kind, s.Energy, want, d)
				}
			}
		})
	}
}
