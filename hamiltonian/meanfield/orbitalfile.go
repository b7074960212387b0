package meanfield

import (
	"bufio"
	"errors"
	"fmt"
	"io"
	"math"
	"math/cmplx"
	"strconv"
	"strings"

	"gonum.org/v1/gonum/mat"

	"leadline/hamiltonian"
)

// OrbitalSet holds the occupied orbitals of a determinant in the basis of a
// Hamiltonian.
type OrbitalSet struct {
	// Basis is the number of basis orbitals, M.
	Basis int
	// Occupied holds the orbitals of each spin as orthonormal columns, M×N_σ; an
	// empty matrix where N_σ = 0.
	Occupied [2]*mat.CDense
	// Notes are sentences for the user.
	Notes []string
}

// NewOrbitalSet returns a set of copies of real orbitals, M×N_σ; an empty or nil
// matrix holds no electrons.
func NewOrbitalSet(orbitals int, occupied [2]*mat.Dense) *OrbitalSet {
	s := &OrbitalSet{Basis: orbitals}
	for spin, c := range occupied {
		s.Occupied[spin] = &mat.CDense{}
		if c == nil || c.IsEmpty() {
			continue
		}
		rows, n := c.Dims()
		if rows != orbitals {
			panic("meanfield: orbitals of the wrong shape")
		}
		s.Occupied[spin] = mat.NewCDense(rows, n, nil)
		for i := range rows {
			for j := range n {
				s.Occupied[spin].Set(i, j, complex(c.At(i, j), 0))
			}
		}
	}
	return s
}

// Electrons returns N_σ.
func (s *OrbitalSet) Electrons(spin int) int {
	_, n := s.Occupied[spin].Dims()
	return n
}

// Real returns the real parts, M×N_σ (empty where N_σ = 0), and whether all
// imaginary parts are zero.
func (s *OrbitalSet) Real() (occupied [2]*mat.Dense, exact bool) {
	exact = true
	for spin, c := range s.Occupied {
		occupied[spin] = &mat.Dense{}
		rows, n := c.Dims()
		if n == 0 {
			continue
		}
		occupied[spin] = mat.NewDense(rows, n, nil)
		for i := range rows {
			for j := range n {
				occupied[spin].Set(i, j, real(c.At(i, j)))
				exact = exact && imag(c.At(i, j)) == 0
			}
		}
	}
	return occupied, exact
}

const (
	orthonormalError = 1e-6  // deviation of CᴴC from one that is refused
	orthonormalNote  = 1e-10 // deviation that is repaired with a note
	longestLine      = 1 << 22
)

// ReadOrbitals reads a file of occupied orbitals: text in which # starts a
// comment and blank lines do not count. The first line is
//
//	norb nup ndown
//
// then come norb lines of nup numbers, the up orbitals as columns, and norb
// lines of ndown numbers, the down orbitals; a spin without electrons has no
// lines. A number is real (an exponent may be written with D) or complex,
// (re,im) without blanks. Columns must be orthonormal to 1e-6; they are
// orthonormalised again, with a note if that changed more than 1e-10. Errors
// begin with name:line.
func ReadOrbitals(r io.Reader, name string) (*OrbitalSet, error) {
	lines := &lineReader{Scanner: bufio.NewScanner(r), name: name}
	lines.Buffer(nil, longestLine)
	header, err := lines.fields("a line \"norb nup ndown\"")
	if err != nil {
		return nil, err
	}
	var sizes [3]int
	if len(header) != 3 {
		return nil, lines.errorf("found %d words, expected three numbers: norb nup ndown", len(header))
	}
	for i, word := range header {
		if sizes[i], err = strconv.Atoi(word); err != nil {
			return nil, lines.errorf("found %.20q, expected an integer (norb nup ndown)", word)
		}
	}
	sector := hamiltonian.Sector{Orbitals: sizes[0], Up: sizes[1], Down: sizes[2]}
	if err := sector.Validate(); err != nil {
		return nil, lines.errorf("%w", err)
	}
	s := &OrbitalSet{Basis: sector.Orbitals}
	for spin, label := range []string{"up", "down"} {
		s.Occupied[spin] = &mat.CDense{}
		n := sector.Electrons(spin)
		if n == 0 {
			continue
		}
		first := lines.number + 1
		var data []complex128
		for row := range sector.Orbitals {
			words, err := lines.fields(fmt.Sprintf("row %d of %d of the %s orbitals", row+1, sector.Orbitals, label))
			if err != nil {
				return nil, err
			}
			if row == 0 {
				first = lines.number
			}
			if len(words) != n {
				return nil, lines.errorf("found %d numbers in row %d of the %s orbitals, expected %d", len(words), row+1, label, n)
			}
			for _, word := range words {
				v, ok := parseComplex(word)
				if !ok {
					return nil, lines.errorf("found %.40q, expected a finite number or (re,im)", word)
				}
				data = append(data, v)
			}
		}
		deviation := orthonormalise(data, sector.Orbitals, n)
		if !(deviation <= orthonormalError) {
			return nil, fmt.Errorf("%s:%d: the %s orbitals that begin here are not orthonormal: largest deviation %.1e, expected at most %.0e", name, first, label, deviation, orthonormalError)
		}
		if deviation > orthonormalNote {
			s.Notes = append(s.Notes, fmt.Sprintf("%s: %s orbitals were orthonormal to %.1e only and have been orthonormalised", name, label, deviation))
		}
		s.Occupied[spin] = mat.NewCDense(sector.Orbitals, n, data)
	}
	switch words, err := lines.fields(""); {
	case err == nil:
		return nil, lines.errorf("found %.40q after the last row, expected the end of the file", words[0])
	case !errors.Is(err, io.EOF):
		return nil, err
	}
	return s, nil
}

// lineReader gives the words of the lines that hold any.
type lineReader struct {
	*bufio.Scanner
	name   string
	number int
}

func (l *lineReader) errorf(format string, args ...any) error {
	return fmt.Errorf("%s:%d: "+format, append([]any{l.name, max(1, l.number)}, args...)...)
}

// fields returns the words of the next line with any; at the end of the file an
// error wrapping io.EOF that names what was expected.
func (l *lineReader) fields(expected string) ([]string, error) {
	for l.Scan() {
		l.number++
		text, _, _ := strings.Cut(l.Text(), "#")
		if words := strings.Fields(text); len(words) > 0 {
			return words, nil
		}
	}
	if err := l.Err(); errors.Is(err, bufio.ErrTooLong) {
		l.number++
		return nil, l.errorf("line longer than %d bytes", longestLine)
	} else if err != nil {
		return nil, fmt.Errorf("%s: %w", l.name, err)
	}
	return nil, l.errorf("file ends, expected %s: %w", expected, io.EOF)
}

func parseComplex(word string) (complex128, bool) {
	inner, isPair := strings.CutPrefix(word, "(")
	if !isPair {
		v, ok := parseReal(word)
		return complex(v, 0), ok
	}
	inner, closed := strings.CutSuffix(inner, ")")
	re, im, comma := strings.Cut(inner, ",")
	x, okRe := parseReal(re)
	y, okIm := parseReal(im)
	return complex(x, y), closed && comma && okRe && okIm
}

func parseReal(word string) (float64, bool) {
	v, err := strconv.ParseFloat(strings.NewReplacer("D", "e", "d", "e").Replace(word), 64)
	return v, err == nil && !math.IsInf(v, 0) && !math.IsNaN(v)
}

// orthonormalise makes the columns of a flat rows×n matrix orthonormal by
// Gram–Schmidt, twice, and returns the largest deviation of CᴴC from one before;
// columns too far from orthonormal are left as they are.
func orthonormalise(c []complex128, rows, n int) float64 {
	dot := func(i, j int) complex128 {
		var sum complex128
		for p := range rows {
			sum += cmplx.Conj(c[p*n+i]) * c[p*n+j]
		}
		return sum
	}
	deviation := 0.0
	for i := range n {
		for j := range i {
			deviation = max(deviation, cmplx.Abs(dot(i, j)))
		}
		deviation = max(deviation, cmplx.Abs(dot(i, i)-1))
	}
	if !(deviation <= orthonormalError) {
		return deviation
	}
	for range 2 {
		for i := range n {
			for j := range i {
				overlap := dot(j, i)
				for p := range rows {
					c[p*n+i] -= overlap * c[p*n+j]
				}
			}
			norm := complex(math.Sqrt(real(dot(i, i))), 0)
			for p := range rows {
				c[p*n+i] /= norm
			}
		}
	}
	return deviation
}

// WriteOrbitals writes a set in the form that [ReadOrbitals] reads, after the
// lines of a comment. Numbers keep all their digits.
func WriteOrbitals(w io.Writer, s *OrbitalSet, comment string) error {
	out := bufio.NewWriter(w)
	for line := range strings.Lines(comment) {
		fmt.Fprintf(out, "# %s\n", strings.TrimRight(line, "\r\n"))
	}
	fmt.Fprintf(out, "%d %d %d\n", s.Basis, s.Electrons(hamiltonian.Up), s.Electrons(hamiltonian.Down))
	for spin, label := range []string{"up", "down"} {
		n := s.Electrons(spin)
		if n == 0 {
			continue
		}
		fmt.Fprintf(out, "# %s\n", label)
		for p := range s.Basis {
			for j := range n {
				if j > 0 {
					out.WriteByte(' ')
				}
				if v := s.Occupied[spin].At(p, j); imag(v) == 0 {
					fmt.Fprintf(out, "%.16e", real(v))
				} else {
					fmt.Fprintf(out, "(%.16e,%.16e)", real(v), imag(v))
				}
			}
			out.WriteByte('\n')
		}
	}
	return out.Flush()
}
