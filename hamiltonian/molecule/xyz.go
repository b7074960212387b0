package molecule

import (
	"bufio"
	"fmt"
	"io"
	"strconv"
	"strings"

	"leadline/hamiltonian/basis"
)

const (
	maxAtoms = 100000 // beyond any geometry that can be computed
	maxLine  = 1 << 16
)

// ReadXYZ reads a geometry in the XYZ layout: the number of atoms, a line of
// comment, then one line per atom with element (symbol or atomic number) and
// three coordinates in ångström; further words of an atom's line are ignored,
// lines after the last atom must be empty. The name is used in errors.
func ReadXYZ(r io.Reader, name string) (Geometry, error) {
	lines := bufio.NewScanner(r)
	lines.Buffer(nil, maxLine)
	line := 0
	next := func() bool {
		line++
		return lines.Scan()
	}
	fail := func(format string, a ...any) (Geometry, error) {
		if err := lines.Err(); err == bufio.ErrTooLong {
			format, a = "longer than %d characters", []any{maxLine}
		} else if err != nil {
			return nil, fmt.Errorf("%s: %w", name, err)
		}
		return nil, fmt.Errorf("%s, line %d: %s", name, line, fmt.Sprintf(format, a...))
	}
	if !next() {
		return fail("file ends, expected the number of atoms")
	}
	word := strings.TrimSpace(lines.Text())
	count, err := strconv.Atoi(word)
	if err != nil || count < 1 || count > maxAtoms {
		return fail("number of atoms is %q, expected 1 to %d", word, maxAtoms)
	}
	if !next() {
		return fail("file ends, expected a comment and %d atoms", count)
	}
	var g Geometry
	for i := range count {
		if !next() {
			return fail("file ends after %d atoms, expected %d", i, count)
		}
		words := strings.Fields(lines.Text())
		if len(words) < 4 {
			return fail("found %d words, expected element and three coordinates", len(words))
		}
		symbol := words[0]
		if z, err := strconv.Atoi(symbol); err == nil {
			symbol = basis.Symbol(z)
		}
		var position [3]float64
		for axis := range 3 {
			if position[axis], err = strconv.ParseFloat(words[1+axis], 64); err != nil {
				return fail("coordinate %d is %q, expected a number", axis+1, words[1+axis])
			}
		}
		atom, err := NewAtom(symbol, position, Angstrom)
		if err != nil {
			return fail("%v", err)
		}
		g = append(g, atom)
	}
	for lines.Scan() {
		line++
		if strings.TrimSpace(lines.Text()) != "" {
			return fail("found text after the last of %d atoms, expected the end", count)
		}
	}
	if lines.Err() != nil {
		return fail("")
	}
	return g, nil
}
