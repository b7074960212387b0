package prepared

import (
	"bufio"
	"bytes"
	"context"
	"crypto/sha256"
	"encoding/binary"
	"encoding/hex"
	"encoding/json"
	"errors"
	"fmt"
	"hash"
	"io"
	"math"
	"strconv"
	"strings"

	"gonum.org/v1/gonum/mat"

	"leadline/hamiltonian"
)

// Read reads a prepared Hamiltonian. Its errors start with the name of the file.
// Memory stays within a few times the length of what r really holds, whatever the
// header says. The progress, unless nil, is called with the bytes read and the length that the header implies.
func Read(ctx context.Context, r io.Reader, name string, progress func(done, total int64)) (*File, error) {
	in := &reader{ctx: ctx, in: bufio.NewReaderSize(r, 1<<16), sum: sha256.New(), progress: progress}
	f, err := in.file()
	if err != nil {
		return nil, fmt.Errorf("%s: %w", name, err)
	}
	return f, nil
}

// reader reads the parts of the file in their order.
type reader struct {
	ctx         context.Context
	in          *bufio.Reader
	sum         hash.Hash
	done, total int64
	progress    func(done, total int64)
	err         error // the first one
	buffer      [8 * piece]byte
}

// piece is how many numbers are read at a time.
const piece = 1 << 12

func (r *reader) file() (*File, error) {
	head, err := r.header()
	if err != nil {
		return nil, err
	}
	r.total = r.done + 8*int64(head.numbers()) + sha256.Size
	f := &File{Provenance: head.Provenance}
	h := &hamiltonian.Hamiltonian{
		Sector:  hamiltonian.Sector{Orbitals: head.Orbitals, Up: head.Up, Down: head.Down},
		Factors: &hamiltonian.Factors{Antisymmetric: head.Antisymmetric},
	}
	f.Hamiltonian = h
	constant := r.numbers(1)
	for spin := range head.OneBodySpins {
		packed := r.numbers(hamiltonian.Pairs(head.Orbitals))
		if r.err != nil {
			return nil, r.err
		}
		h.OneBody[spin] = mat.NewSymDense(head.Orbitals, nil)
		for p := range head.Orbitals {
			for q := range p + 1 {
				h.OneBody[spin].SetSym(p, q, packed[hamiltonian.Pair(p, q)])
			}
		}
	}
	h.Factors.Sign = r.numbers(head.Factors)
	for spin := range head.FactorSpins {
		h.Factors.Packed[spin] = r.numbers(head.Factors * hamiltonian.Pairs(head.Orbitals))
	}
	f.Orbitals = r.dense(head.BasisFunctions, head.Orbitals)
	if head.Reference != nil {
		f.Reference = &Reference{Kind: head.Reference.Kind, Energy: head.Reference.Energy}
		f.Reference.Occupied[hamiltonian.Up] = r.dense(head.Orbitals, head.Up)
		f.Reference.Occupied[hamiltonian.Down] = r.dense(head.Orbitals, head.Down)
	}
	if r.err != nil {
		return nil, r.err
	}
	h.Constant = constant[0]
	if head.OneBodySpins == 1 {
		h.OneBody[hamiltonian.Down] = h.OneBody[hamiltonian.Up]
	}
	if head.FactorSpins == 1 {
		h.Factors.Packed[hamiltonian.Down] = h.Factors.Packed[hamiltonian.Up]
	}
	if f.Fingerprint, err = r.end(); err != nil {
		return nil, err
	}
	return f, f.validate()
}

// header reads the first two lines.
func (r *reader) header() (*header, error) {
	first, err := r.line(len(magic) + 12)
	if err != nil && !errors.Is(err, errLine) {
		return nil, err
	}
	if r.done == 0 {
		return nil, fmt.Errorf("file is empty, expected a prepared Hamiltonian")
	}
	number, is := strings.CutPrefix(string(first), magic)
	found, numeric := strconv.Atoi(strings.TrimSuffix(number, "\n"))
	switch {
	case !is || err != nil || numeric != nil:
		return nil, fmt.Errorf("file starts with %q, expected %q: no prepared Hamiltonian", first[:min(len(first), 20)], magic+strconv.Itoa(version))
	case found != version:
		return nil, fmt.Errorf("version %d of the prepared format, expected %d", found, version)
	}
	text, err := r.line(headerLimit - len(first))
	if errors.Is(err, errLine) {
		return nil, fmt.Errorf("header has no end within %d bytes: cut off or damaged", r.done)
	}
	if err != nil {
		return nil, err
	}
	if r.done%alignment != 0 {
		return nil, fmt.Errorf("header ends at byte %d, expected a multiple of %d: damaged", r.done, alignment)
	}
	decoder := json.NewDecoder(bytes.NewReader(text))
	decoder.DisallowUnknownFields()
	var head header
	if err := decoder.Decode(&head); err != nil {
		return nil, fmt.Errorf("header: %w", err)
	}
	if rest := text[decoder.InputOffset():]; len(bytes.Trim(rest, " \n")) > 0 {
		return nil, fmt.Errorf("header: %.20q after the end", rest)
	}
	if err := head.validate(); err != nil {
		return nil, fmt.Errorf("header: %w", err)
	}
	return &head, nil
}

var errLine = errors.New("line has no end")

// line reads up to a line feed, of limit bytes at most.
func (r *reader) line(limit int) ([]byte, error) {
	var line []byte
	for len(line) < limit {
		c, err := r.in.ReadByte()
		if err == io.EOF {
			break
		} else if err != nil {
			return nil, err
		}
		line = append(line, c)
		r.done++
		if c == '\n' {
			r.sum.Write(line)
			return line, nil
		}
	}
	return line, errLine
}

// numbers reads n numbers in pieces, so that what it allocates is in proportion to
// what is there.
func (r *reader) numbers(n int) []float64 {
	var out []float64
	for len(out) < n && r.err == nil {
		if r.err = r.ctx.Err(); r.err != nil {
			break
		}
		b := r.buffer[:8*min(piece, n-len(out))]
		got, err := io.ReadFull(r.in, b)
		r.done += int64(got)
		if err == io.EOF || err == io.ErrUnexpectedEOF {
			err = fmt.Errorf("file ends after %d bytes, expected %d: cut off", r.done, r.total)
		}
		if err != nil {
			r.err = err
			break
		}
		r.sum.Write(b)
		if len(out)+piece > cap(out) {
			grown := make([]float64, len(out), min(n, max(2*cap(out), piece)))
			copy(grown, out)
			out = grown
		}
		for i := 0; i < len(b); i += 8 {
			out = append(out, math.Float64frombits(binary.LittleEndian.Uint64(b[i:])))
		}
		if r.progress != nil {
			r.progress(r.done, r.total)
		}
	}
	return out
}

// dense reads a matrix row by row; nil where it has no elements.
func (r *reader) dense(rows, columns int) *mat.Dense {
	data := r.numbers(rows * columns)
	if r.err != nil || len(data) == 0 {
		return nil
	}
	return mat.NewDense(rows, columns, data)
}

// end reads the checksum and returns the fingerprint.
func (r *reader) end() (string, error) {
	want := r.sum.Sum(nil)
	found := make([]byte, sha256.Size)
	got, err := io.ReadFull(r.in, found)
	r.done += int64(got)
	switch {
	case err == io.EOF || err == io.ErrUnexpectedEOF:
		return "", fmt.Errorf("file ends after %d bytes, expected %d: cut off", r.done, r.total)
	case err != nil:
		return "", err
	case !bytes.Equal(found, want):
		return "", fmt.Errorf("checksum is %x…, expected %x…: the file is damaged", found[:8], want[:8])
	}
	if _, err := r.in.ReadByte(); err == nil {
		return "", fmt.Errorf("bytes after the checksum, expected the end after %d", r.total)
	} else if err != io.EOF {
		return "", err
	}
	r.sum.Write(found)
	if r.progress != nil {
		r.progress(r.done, r.total)
	}
	return hex.EncodeToString(r.sum.Sum(nil)), nil
}
