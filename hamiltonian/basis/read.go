package basis

import (
	"bufio"
	"fmt"
	"io"
	"math"
	"strconv"
	"strings"
)

// Limits of what a reader accepts: well beyond any published set, small enough
// that a damaged count cannot ask for much memory.
const (
	maxPrimitives  = 1000
	maxLine        = 1 << 16
	least, most    = 1e-9, 1e12 // exponents, bohr⁻²
	maxCoefficient = 1e10
	// cancelling is the norm of a shell, relative to that of its primitives, below
	// which they leave nothing but rounding.
	cancelling = 1e-8
)

// Read reads a basis set from text. An element begins with its symbol and a
// zero, or with the word element and its symbol; then follow its shells, each a
// line of letter and number of primitives, then one line per primitive with
// exponent (bohr⁻²) and coefficient of the normalised primitive:
//
//	H 0
//	S 2 1.00
//	  5.447178  0.156285
//	  0.824547  0.904691
//	****
//
// Letters are S to I; SP (or L) is an s and a p shell of common exponents, with
// two coefficients per line. A third word of the shell line is a scale factor of
// the functions (exponents times its square). Powers of ten may be written with
// D. Lines of stars end an element; empty lines and those that begin with # or !
// say nothing, but for "# publication: …". Later elements do not replace earlier
// ones: an element given twice is an error, as is one without shells.
//
// The name is used in errors and becomes [Set.Name].
func Read(r io.Reader, name string) (*Set, error) {
	p := &parser{lines: bufio.NewScanner(r), set: &Set{Name: name, shells: map[int][]Shell{}}}
	p.lines.Buffer(nil, maxLine)
	if err := p.read(); err != nil {
		return nil, fmt.Errorf("basis %s, line %d: %w", name, p.line, err)
	}
	if len(p.set.shells) == 0 {
		return nil, fmt.Errorf("basis %s holds no element", name)
	}
	return p.set, nil
}

type parser struct {
	lines *bufio.Scanner
	line  int
	set   *Set
}

// next returns the words of the next line that says something, nil at the end.
func (p *parser) next() ([]string, error) {
	for p.lines.Scan() {
		p.line++
		text := strings.TrimSpace(p.lines.Text())
		if comment, ok := strings.CutPrefix(text, "# publication:"); ok {
			p.set.Publication = strings.TrimSpace(comment)
		}
		if text == "" || text[0] == '#' || text[0] == '!' {
			continue
		}
		return strings.Fields(text), nil
	}
	if p.lines.Err() == bufio.ErrTooLong {
		p.line++
		return nil, fmt.Errorf("longer than %d characters", maxLine)
	}
	return nil, p.lines.Err()
}

func (p *parser) read() error {
	element := 0
	for {
		words, err := p.next()
		if err != nil {
			return err
		}
		if words == nil || strings.HasPrefix(words[0], "****") {
			if element != 0 && len(p.set.shells[element]) == 0 {
				return fmt.Errorf("element %s has no shells", Symbol(element))
			}
			element = 0
			if words == nil {
				return nil
			}
			continue
		}
		if z, ok := elementLine(words); ok {
			if element != 0 && len(p.set.shells[element]) == 0 {
				return fmt.Errorf("element %s has no shells", Symbol(element))
			}
			if z == 0 {
				return fmt.Errorf("%q is no element", words[0])
			}
			if _, twice := p.set.shells[z]; twice {
				return fmt.Errorf("element %s is given twice", Symbol(z))
			}
			element, p.set.shells[z] = z, nil
			continue
		}
		if element == 0 {
			return fmt.Errorf("found %q, expected an element (as in \"H 0\")", strings.Join(words, " "))
		}
		shells, err := p.shell(words)
		if err != nil {
			return err
		}
		p.set.shells[element] = append(p.set.shells[element], shells...)
	}
}

// elementLine tells whether the words begin an element ("H 0", "-H 0" or
// "element H"), and which; z is zero for an unknown symbol.
func elementLine(words []string) (z int, ok bool) {
	symbol := ""
	switch {
	case strings.EqualFold(words[0], "element") && len(words) == 2:
		symbol = words[1]
	case len(words) == 2 && words[1] == "0":
		symbol = strings.TrimPrefix(words[0], "-")
	default:
		return 0, false
	}
	z, _ = AtomicNumber(symbol)
	return z, true
}

// shell reads the primitives of the shell announced by the words.
func (p *parser) shell(head []string) ([]Shell, error) {
	var momenta []int
	switch letter := strings.ToUpper(head[0]); {
	case letter == "SP" || letter == "L":
		momenta = []int{0, 1}
	case len(letter) == 1 && strings.Contains(letters, letter):
		momenta = []int{strings.Index(letters, letter)}
	default:
		return nil, fmt.Errorf("found %q, expected a shell letter S, P, D, F, G, H, I or SP", head[0])
	}
	if len(head) < 2 || len(head) > 3 {
		return nil, fmt.Errorf("shell line has %d words, expected letter and number of primitives (as in \"S 3\")", len(head))
	}
	count, err := strconv.Atoi(head[1])
	if err != nil || count < 1 || count > maxPrimitives {
		return nil, fmt.Errorf("number of primitives is %q, expected 1 to %d", head[1], maxPrimitives)
	}
	scale := 1.0
	if len(head) == 3 {
		if scale, err = number(head[2]); err != nil {
			return nil, fmt.Errorf("scale factor: %w", err)
		}
		if !(scale > 0) {
			return nil, fmt.Errorf("scale factor is %v, expected a positive number", scale)
		}
	}
	shells := make([]Shell, len(momenta))
	for i, l := range momenta {
		shells[i].L = l
	}
	for range count {
		words, err := p.next()
		if err != nil {
			return nil, err
		}
		if len(words) != 1+len(momenta) {
			return nil, fmt.Errorf("found %d numbers, expected exponent and %d coefficient(s)", len(words), len(momenta))
		}
		exponent, err := number(words[0])
		if err != nil {
			return nil, fmt.Errorf("exponent: %w", err)
		}
		exponent *= scale * scale
		if !(exponent >= least && exponent <= most) {
			return nil, fmt.Errorf("exponent is %v, expected a positive number from %.0e to %.0e", exponent, least, most)
		}
		for i := range shells {
			c, err := number(words[1+i])
			if err != nil {
				return nil, fmt.Errorf("coefficient: %w", err)
			}
			if math.Abs(c) > maxCoefficient {
				return nil, fmt.Errorf("coefficient is %v, expected at most %.0e", c, maxCoefficient)
			}
			shells[i].Exponents = append(shells[i].Exponents, exponent)
			shells[i].Coefficients = append(shells[i].Coefficients, c)
		}
	}
	for _, s := range shells {
		if err := s.check(); err != nil {
			return nil, err
		}
	}
	return shells, nil
}

// check refuses shells that have no well-defined normalised form.
func (s Shell) check() error {
	norm, sum := 0.0, 0.0
	for i, a := range s.Exponents {
		for j, b := range s.Exponents {
			if a == b && i != j {
				return fmt.Errorf("exponent %v appears twice in one shell", a)
			}
			// Overlap of normalised primitives.
			overlap := math.Pow(4*a/(a+b)*b/(a+b), 0.75+0.5*float64(s.L))
			norm += s.Coefficients[i] * s.Coefficients[j] * overlap
		}
		sum += s.Coefficients[i] * s.Coefficients[i]
	}
	if sum == 0 {
		return fmt.Errorf("all coefficients of the shell are zero")
	}
	if norm < cancelling*sum {
		return fmt.Errorf("the primitives of the shell cancel: norm² %.1e of %.1e", norm, sum)
	}
	return nil
}

// number reads a finite number; powers of ten may be written with D.
func number(word string) (float64, error) {
	v, err := strconv.ParseFloat(strings.NewReplacer("D", "e", "d", "e").Replace(word), 64)
	if err != nil || math.IsInf(v, 0) || math.IsNaN(v) {
		return 0, fmt.Errorf("found %q, expected a finite number", word)
	}
	return v, nil
}
