package basis

import (
	"embed"
	"fmt"
	"maps"
	"strings"
)

// MaxL is the largest angular momentum of a shell: i functions.
const MaxL = 6

// letters of the angular momenta 0 to MaxL.
const letters = "SPDFGHI"

// Shell is one contracted shell Σ_k Coefficients[k]·φ_k, with φ_k the
// normalised primitive r^L exp(−Exponents[k]·r²) times an angular function.
type Shell struct {
	// L is the angular momentum, 0 to MaxL.
	L int
	// Exponents are in bohr⁻², positive.
	Exponents []float64
	// Coefficients are of normalised primitives; the sum itself need not be
	// normalised.
	Coefficients []float64
}

// Set is a basis set. It is never changed once made, so that it may be used from
// several goroutines.
type Set struct {
	Name        string
	Publication string
	shells      map[int][]Shell
}

// Over returns a set that takes elements from s and those that s lacks from below.
func (s *Set) Over(below *Set) *Set {
	out := &Set{Name: s.Name + " over " + below.Name, Publication: s.Publication + "; " + below.Publication, shells: maps.Clone(below.shells)}
	maps.Copy(out.shells, s.shells)
	return out
}

// Shells returns the shells of the element with atomic number z, which the
// caller must not change.
func (s *Set) Shells(z int) ([]Shell, error) {
	if shells := s.shells[z]; len(shells) > 0 {
		return shells, nil
	}
	return nil, fmt.Errorf("basis %s has no functions for element %s", s.Name, Symbol(z))
}

//go:embed sets
var files embed.FS

// embedded sets: the name as published, the file, other spellings.
var embedded = []struct {
	name, file string
	spellings  []string
}{
	{"STO-3G", "sto-3g", nil},
	{"STO-6G", "sto-6g", nil},
	{"6-31G", "6-31g", nil},
	{"6-31G*", "6-31gs", []string{"6-31G(d)"}},
	{"6-31G**", "6-31gss", []string{"6-31G(d,p)"}},
	{"6-311G**", "6-311gss", []string{"6-311G(d,p)"}},
	{"cc-pVDZ", "cc-pvdz", nil},
	{"cc-pVTZ", "cc-pvtz", nil},
	{"cc-pVQZ", "cc-pvqz", nil},
	{"aug-cc-pVDZ", "aug-cc-pvdz", []string{"AVDZ"}},
	{"aug-cc-pVTZ", "aug-cc-pvtz", []string{"AVTZ"}},
	{"def2-SVP", "def2-svp", nil},
	{"def2-TZVP", "def2-tzvp", nil},
}

// Names returns the names of the embedded sets.
func Names() []string {
	names := make([]string, len(embedded))
	for i, e := range embedded {
		names[i] = e.name
	}
	return names
}

// plain reduces a name to what the eye reads: lower case, without hyphens,
// underscores and blanks.
func plain(name string) string {
	return strings.NewReplacer("-", "", "_", "", " ", "").Replace(strings.ToLower(name))
}

// Named returns an embedded set by name. Upper and lower case, hyphens,
// underscores and blanks make no difference; 6-31G(d) is 6-31G*, 6-31G(d,p) is
// 6-31G**, 6-311G(d,p) is 6-311G**, AVDZ is aug-cc-pVDZ.
func Named(name string) (*Set, error) {
	for _, e := range embedded {
		for _, spelling := range append([]string{e.name}, e.spellings...) {
			if plain(spelling) != plain(name) {
				continue
			}
			file, err := files.Open("sets/" + e.file + ".txt")
			if err != nil {
				return nil, err
			}
			defer file.Close()
			return Read(file, e.name)
		}
	}
	return nil, fmt.Errorf("no basis is called %q; known are %s", name, strings.Join(Names(), ", "))
}
