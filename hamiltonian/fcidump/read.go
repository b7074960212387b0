package fcidump

import (
	"bufio"
	"bytes"
	"compress/gzip"
	"context"
	"errors"
	"fmt"
	"io"
	"math"
	"strings"

	"gonum.org/v1/gonum/mat"

	"leadline/hamiltonian"
)

const (
	// MemoryLimit is the memory that [Read] takes at most, in bytes: about 300
	// orbitals.
	MemoryLimit = 8 << 30
	// Agreement is how far an integral given twice may differ, relative to its
	// magnitude or to 1 hartree, whichever is larger: one unit of an eight-digit
	// print.
	Agreement = 1e-8
	// chunk is how much is read at a time, in bytes; no line is longer.
	chunk = 1 << 18
)

// Read is [ReadWithin] a memory of [MemoryLimit].
func Read(ctx context.Context, r io.Reader, name string, progress func(done int64)) (*Integrals, error) {
	return ReadWithin(ctx, r, name, MemoryLimit, progress)
}

// ReadWithin reads an integral interchange file, plain or compressed by gzip. It
// holds M⁴ bytes for M orbitals and a constant amount beside them, and refuses
// before it allocates if that exceeds memory, in bytes. Plain text goes through at
// some five million lines per second; compressed text waits for its inflation, at
// a third of that. Its errors start with the
// name of the file and, where there is one, the line. The progress, unless nil,
// is called with the number of bytes taken from r.
//
// An integral given several times must agree within [Agreement]; the first counts.
// Orbital energies are kept but not used. The constant must be there, for it is
// customarily last and tells a whole file from a cut one. Refused are complex and
// spin-resolved integrals.
func ReadWithin(ctx context.Context, r io.Reader, name string, memory int64, progress func(done int64)) (*Integrals, error) {
	b := &body{source: &counter{Reader: r}, progress: progress}
	f, err := b.read(ctx, memory)
	switch at := (*fault)(nil); {
	case err == nil:
		return f, nil
	case errors.As(err, &at) && at.line > 0:
		return nil, fmt.Errorf("%s:%d: %w", name, at.line, err)
	case errors.Is(err, io.ErrUnexpectedEOF):
		return nil, fmt.Errorf("%s: compressed data end early, expected a whole gzip file: %w", name, err)
	}
	return nil, fmt.Errorf("%s: %w", name, err)
}

// counter counts the bytes read.
type counter struct {
	io.Reader
	done int64
}

func (c *counter) Read(p []byte) (int, error) {
	n, err := c.Reader.Read(p)
	c.done += int64(n)
	return n, err
}

// body reads the lines of integrals.
type body struct {
	source   *counter
	progress func(done int64)
	line     int
	out      *Integrals
	one      []float64 // lower triangle of h
	energies []float64
	// One bit per integral read: two-electron, one-electron.
	seenTwo, seenOne []uint64
	constantLine     int
	count            int
}

// Memory returns the bytes that the integrals of m orbitals take while read.
func Memory(m int) float64 {
	pairs := float64(m) * (float64(m) + 1) / 2
	return pairs * (pairs + 1) / 2 * (8 + 1.0/8)
}

func (b *body) read(ctx context.Context, memory int64) (*Integrals, error) {
	in := bufio.NewReaderSize(b.source, chunk)
	if magic, _ := in.Peek(2); len(magic) == 2 && magic[0] == 0x1f && magic[1] == 0x8b {
		unzip, err := gzip.NewReader(in)
		if err != nil {
			return nil, err
		}
		defer unzip.Close()
		in = bufio.NewReaderSize(unzip, chunk)
	}
	top := &headerReader{in: in, line: 1}
	if err := top.parse(); err != nil {
		return nil, err
	}
	head, err := top.result()
	if err != nil {
		return nil, err
	}
	m := head.sector.Orbitals
	if need := Memory(m); need > float64(memory) {
		return nil, &fault{top.end, fmt.Sprintf("NORB=%d needs %.3g GB of memory for its integrals, limit is %.3g GB", m, need/1e9, float64(memory)/1e9)}
	}
	pairs := hamiltonian.Pairs(m)
	b.line = top.line
	b.out = &Integrals{
		Sector: head.sector, Symmetry: head.symmetry, StateSymmetry: head.stateSymmetry,
		TwoBody: make([]float64, hamiltonian.Pairs(pairs)),
	}
	b.seenTwo, b.seenOne = make([]uint64, hamiltonian.Pairs(pairs)/64+1), make([]uint64, pairs/64+1)
	b.one = make([]float64, pairs)
	if err := b.lines(ctx, in); err != nil {
		return nil, err
	}
	switch {
	case b.count == 0:
		return nil, &fault{b.line - 1, "file ends after the header, expected integrals"}
	case b.constantLine == 0:
		return nil, &fault{b.line - 1, "file ends without a constant energy (indices 0 0 0 0), expected one, zero or not: the file looks cut off"}
	}
	b.out.OrbitalEnergies = b.energies
	b.out.OneBody = mat.NewSymDense(m, nil)
	for p := range m {
		for q := range p + 1 {
			b.out.OneBody.SetSym(p, q, b.one[hamiltonian.Pair(p, q)])
		}
	}
	return b.out, nil
}

// lines reads chunk by chunk and hands on whole lines.
func (b *body) lines(ctx context.Context, in io.Reader) error {
	buffer := make([]byte, chunk+1)
	for held := 0; ; {
		if err := ctx.Err(); err != nil {
			return err
		}
		n, err := in.Read(buffer[held:chunk])
		held += n
		if err != nil && err != io.EOF {
			return err
		}
		if end := err == io.EOF; end && held > 0 && buffer[held-1] != '\n' && buffer[held-1] != '\r' {
			buffer[held] = '\n'
			held++
		}
		whole := bytes.LastIndexByte(buffer[:held], '\n') + 1
		if whole == 0 && (held == chunk || err == io.EOF) {
			if whole = bytes.LastIndexByte(buffer[:held], '\r') + 1; whole == 0 && held > 0 {
				return &fault{b.line, fmt.Sprintf("line is longer than %d bytes, expected a value and four indices", chunk)}
			}
		}
		if err := b.parse(buffer[:whole]); err != nil {
			return err
		}
		held = copy(buffer, buffer[whole:held])
		if b.progress != nil {
			b.progress(b.source.done)
		}
		if err == io.EOF {
			return nil
		}
	}
}

// parse reads the lines of text, which ends with a line break.
func (b *body) parse(text []byte) error {
	for i := 0; i < len(text); {
		switch text[i] {
		case '\n', '\r': // or both, which is one line break
			if text[i] == '\r' || i == 0 || text[i-1] != '\r' {
				b.line++
			}
			i++
			continue
		case ' ', '\t':
			i++
			continue
		}
		start := i
		value, after, ok := number(text, i)
		i = after
		var index [4]int
		for k := range index {
			if !ok || text[i] != ' ' && text[i] != '\t' {
				return b.explain(text[start:])
			}
			for text[i] == ' ' || text[i] == '\t' {
				i++
			}
			ok = text[i]-'0' <= 9
			for ; text[i]-'0' <= 9; i++ {
				index[k] = min(index[k]*10+int(text[i]-'0'), math.MaxInt32)
			}
		}
		for text[i] == ' ' || text[i] == '\t' {
			i++
		}
		if !ok || text[i] != '\n' && text[i] != '\r' {
			return b.explain(text[start:])
		}
		if err := b.store(value, index); err != nil {
			return err
		}
		b.count++
	}
	return nil
}

// store puts one integral, orbitals one-based, in its place.
func (b *body) store(value float64, index [4]int) error {
	m := b.out.Orbitals
	i, j, k, l := index[0], index[1], index[2], index[3]
	if max(i, j, k, l) > m {
		return &fault{b.line, fmt.Sprintf("index %d, expected at most NORB=%d", max(i, j, k, l), m)}
	}
	switch {
	case i > 0 && j > 0 && k > 0 && l > 0:
		place := hamiltonian.Pair(hamiltonian.Pair(i-1, j-1), hamiltonian.Pair(k-1, l-1))
		return b.put(&b.out.TwoBody[place], b.seenTwo, place, value, index)
	case i > 0 && j > 0 && k == 0 && l == 0:
		place := hamiltonian.Pair(i-1, j-1)
		return b.put(&b.one[place], b.seenOne, place, value, index)
	case i > 0 && j == 0 && k == 0 && l == 0:
		if b.energies == nil {
			b.energies = make([]float64, m)
		}
		b.energies[i-1] = value
	case i == 0 && j == 0 && k == 0 && l == 0:
		if b.constantLine > 0 && (value == 0 || !agree(value, b.out.Constant)) {
			return &fault{b.line, fmt.Sprintf("second constant energy %v, first was %v at line %d: so files separate their blocks of spin-resolved integrals, expected spin-free ones", value, b.out.Constant, b.constantLine)}
		}
		if b.constantLine == 0 {
			b.out.Constant, b.constantLine = value, b.line
		}
	default:
		return &fault{b.line, fmt.Sprintf("indices %d %d %d %d name no integral, expected i j k l, i j 0 0, i 0 0 0 or 0 0 0 0", i, j, k, l)}
	}
	return nil
}

func (b *body) put(element *float64, seen []uint64, place int, value float64, index [4]int) error {
	bit := uint64(1) << (place & 63)
	if seen[place>>6]&bit != 0 {
		if !agree(value, *element) {
			return &fault{b.line, fmt.Sprintf("integral %d %d %d %d is %v, but an earlier line gives it as %v", index[0], index[1], index[2], index[3], value, *element)}
		}
		return nil
	}
	seen[place>>6] |= bit
	*element = value
	return nil
}

func agree(a, b float64) bool { return math.Abs(a-b) <= Agreement*max(1, math.Abs(a)) }

// explain says what is wrong with the line that text starts with.
func (b *body) explain(text []byte) error {
	line, _, _ := strings.Cut(string(text[:min(len(text), 1000)]), "\n")
	line, _, _ = strings.Cut(line, "\r")
	words := strings.Fields(line)
	fail := func(format string, args ...any) error {
		return &fault{b.line, fmt.Sprintf(format, args...)}
	}
	for i, word := range words {
		if i == 0 && word[0] == '(' {
			return fail("value %.40q looks complex, expected real integrals", word)
		}
		if i >= 5 {
			return fail("%.40q after the four indices, expected the end of the line", word)
		}
		x, after, ok := number([]byte(word+"\n"), 0)
		switch whole := after == len(word); {
		case i == 0 && (!ok || !whole):
			return fail("value %.40q, expected a finite number", word)
		case i > 0 && whole && ok && (x < 0 || strings.ContainsAny(word, ".eEdD")) && len(words) == 6:
			return fail("two values before the four indices look like complex integrals, expected real ones")
		case i > 0 && strings.Trim(word, "0123456789") != "":
			return fail("index %.40q, expected an integer from 0 to NORB=%d", word, b.out.Orbitals)
		}
	}
	return fail("line has %d numbers, expected a value and four indices", len(words))
}
