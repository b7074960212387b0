package expansion

import (
	"bufio"
	"errors"
	"fmt"
	"io"
	"math"
	"slices"
	"strconv"
	"strings"
)

// maxLine is the longest line of a file, in bytes.
const maxLine = 1 << 12

// Read reads an expansion in the format of FORMAT.md. name stands in errors,
// "name:line: …". Memory grows with what is read, never with what a header
// claims. What is returned is valid.
func Read(r io.Reader, name string) (*Expansion, error) {
	in := reader{in: bufio.NewReaderSize(r, maxLine), e: &Expansion{}, declared: -1}
	if err := in.read(); err != nil {
		return nil, fmt.Errorf("%s:%d: %w", name, max(1, in.line), err)
	}
	return in.e, nil
}

type reader struct {
	in   *bufio.Reader
	e    *Expansion
	line int
	// seen holds the header lines met so far.
	version, shape, basis, source bool
	declared                      int     // number of determinants, −1 where not said
	lines                         []int32 // line of each determinant
}

func (r *reader) read() error {
	for {
		text, err := r.next()
		if errors.Is(err, io.EOF) {
			return r.finish()
		}
		if err != nil {
			return err
		}
		fields := strings.Fields(text)
		switch {
		case len(fields) == 0 && r.version:
		case !r.version:
			err = r.readVersion(fields)
		case fields[0] == "#":
			err = r.header(fields[1:], text)
		case strings.HasPrefix(fields[0], "#"):
		default:
			err = r.determinant(fields)
		}
		if err != nil {
			return err
		}
	}
}

// next returns the next line without its end.
func (r *reader) next() (string, error) {
	r.line++
	line, err := r.in.ReadSlice('\n')
	switch {
	case errors.Is(err, bufio.ErrBufferFull):
		return "", fmt.Errorf("line of more than %d bytes", maxLine)
	case errors.Is(err, io.EOF) && len(line) > 0:
		return "", fmt.Errorf("file ends within a line: it is cut off, or its last line lacks a line end")
	case err != nil:
		return "", err
	}
	return string(line[:len(line)-1]), nil
}

func (r *reader) readVersion(fields []string) error {
	if len(fields) != 3 || fields[0] != "#" || fields[1] != "expansion" {
		return fmt.Errorf("not an expansion file: expected a first line \"# expansion 1\"")
	}
	if fields[2] != "1" {
		return fmt.Errorf("expansion file of version %q, expected 1", fields[2])
	}
	r.version = true
	return nil
}

// header reads a header line; others that begin with # are comments.
func (r *reader) header(fields []string, text string) error {
	if len(fields) == 0 {
		return nil
	}
	once := func(seen *bool) error {
		if *seen {
			return fmt.Errorf("second header line %q", fields[0])
		}
		*seen = true
		return nil
	}
	switch fields[0] {
	case "orbitals":
		if err := once(&r.shape); err != nil {
			return err
		}
		return r.readShape(fields)
	case "basis":
		if err := once(&r.basis); err != nil {
			return err
		}
		if len(fields) != 2 {
			return fmt.Errorf("header \"basis\" with %d words, expected one fingerprint or -", len(fields)-1)
		}
		if fields[1] != "-" {
			r.e.Basis = fields[1]
		}
	case "source":
		if err := once(&r.source); err != nil {
			return err
		}
		_, after, _ := strings.Cut(text, "source")
		r.e.Origin = strings.TrimSpace(after)
	case "determinants":
		if r.declared >= 0 {
			return fmt.Errorf("second header line %q", fields[0])
		}
		if len(fields) != 2 {
			return fmt.Errorf("header \"determinants\" with %d words, expected one number", len(fields)-1)
		}
		n, err := strconv.Atoi(fields[1])
		if err != nil || n < 1 {
			return fmt.Errorf("header \"determinants\" is %q, expected a positive whole number", fields[1])
		}
		r.declared = n
	case "expansion":
		return fmt.Errorf("second header line %q", fields[0])
	}
	return nil
}

func (r *reader) readShape(fields []string) error {
	names := []string{"orbitals", "core", "active", "up", "down"}
	values := []*int{&r.e.Orbitals, &r.e.Core, &r.e.Active, &r.e.Up, &r.e.Down}
	if len(fields) != 2*len(names) {
		return fmt.Errorf("header with %d words, expected \"orbitals M core … active … up … down …\"", len(fields))
	}
	for i, name := range names {
		if fields[2*i] != name {
			return fmt.Errorf("header word %q, expected %q", fields[2*i], name)
		}
		n, err := strconv.Atoi(fields[2*i+1])
		if err != nil {
			return fmt.Errorf("header value of %q is %q, expected a whole number", name, fields[2*i+1])
		}
		*values[i] = n
	}
	return r.e.validateShape()
}

func (r *reader) determinant(fields []string) error {
	if !r.shape {
		return fmt.Errorf("determinant before the header line \"# orbitals …\"")
	}
	if len(fields) != 4 && len(fields) != 5 {
		return fmt.Errorf("%d columns, expected occupations of up and down, real part, imaginary part and, if measured, a standard error", len(fields))
	}
	if r.declared >= 0 && len(r.lines) == r.declared {
		return fmt.Errorf("more than the %d determinants that the header says", r.declared)
	}
	if len(r.lines) == math.MaxInt32 {
		return fmt.Errorf("more than %d determinants", math.MaxInt32)
	}
	var d Determinant
	for k, mask := range []*uint64{&d.Up, &d.Down} {
		var err error
		if *mask, err = r.occupation(fields[k]); err != nil {
			return err
		}
	}
	var numbers [3]float64
	for k, text := range fields[2:] {
		v, err := strconv.ParseFloat(text, 64)
		if err != nil || math.IsNaN(v) || math.IsInf(v, 0) {
			return fmt.Errorf("column %d is %q, expected a finite number", k+3, text)
		}
		numbers[k] = v
	}
	d.Amplitude, d.Error = complex(numbers[0], numbers[1]), numbers[2]
	if err := r.e.validateDeterminant(d); err != nil {
		return fmt.Errorf("determinant %s %s %w", fields[0], fields[1], err)
	}
	r.e.Determinants = append(r.e.Determinants, d)
	r.lines = append(r.lines, int32(min(r.line, math.MaxInt32)))
	return nil
}

func (r *reader) occupation(text string) (uint64, error) {
	if len(text) != r.e.Active {
		return 0, fmt.Errorf("occupation %q of %d orbitals, expected the %d active ones", text, len(text), r.e.Active)
	}
	var mask uint64
	for p := range len(text) {
		switch text[p] {
		case '0':
		case '1':
			mask |= 1 << p
		default:
			return 0, fmt.Errorf("occupation %q, expected only 0 and 1", text)
		}
	}
	return mask, nil
}

// finish checks what only the whole file shows.
func (r *reader) finish() error {
	list := r.e.Determinants
	switch {
	case !r.version:
		return fmt.Errorf("file is empty")
	case !r.shape:
		return fmt.Errorf("file ends without a header line \"# orbitals …\"")
	case len(list) == 0:
		return fmt.Errorf("file ends without a determinant")
	case r.declared >= 0 && len(list) != r.declared:
		return fmt.Errorf("file ends after %d of %d determinants", len(list), r.declared)
	}
	order := make([]int32, len(list))
	for i := range order {
		order[i] = int32(i)
	}
	slices.SortStableFunc(order, func(a, b int32) int { return compare(list[a], list[b]) })
	for k := 1; k < len(order); k++ {
		if compare(list[order[k-1]], list[order[k]]) == 0 {
			r.line = int(r.lines[order[k]])
			return fmt.Errorf("determinant repeats that of line %d", r.lines[order[k-1]])
		}
	}
	if r.e.largest() == 0 {
		return fmt.Errorf("every amplitude is zero: the expansion has norm zero")
	}
	return nil
}
