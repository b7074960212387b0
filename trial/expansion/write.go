package expansion

import (
	"bufio"
	"fmt"
	"io"
	"math/bits"
	"strconv"
	"strings"
)

func electrons(mask uint64) int { return bits.OnesCount64(mask) }

// Write writes the expansion in the format of FORMAT.md, determinants in their
// order. It refuses an expansion that is not valid, one with Columns, which the
// format has no place for, and text that does not fit on a line.
func (e *Expansion) Write(w io.Writer) error {
	if err := e.Validate(); err != nil {
		return err
	}
	if e.Columns != nil {
		return fmt.Errorf("expansion has orbitals of its own, which its file cannot hold: write it with a Hamiltonian in those orbitals")
	}
	basis := e.Basis
	if basis == "" {
		basis = "-"
	}
	if len(strings.Fields(basis)) != 1 || len(basis) > 256 {
		return fmt.Errorf("fingerprint %q, expected one word", basis)
	}
	if strings.ContainsAny(e.Origin, "\r\n") || len(e.Origin) > maxLine/2 {
		return fmt.Errorf("source text is not one line of at most %d bytes", maxLine/2)
	}
	out := bufio.NewWriter(w)
	fmt.Fprintf(out, "# expansion 1\n# orbitals %d  core %d  active %d  up %d  down %d\n# basis %s\n", e.Orbitals, e.Core, e.Active, e.Up, e.Down, basis)
	if e.Origin != "" {
		fmt.Fprintf(out, "# source %s\n", e.Origin)
	}
	fmt.Fprintf(out, "# determinants %d\n", len(e.Determinants))
	line := make([]byte, 0, 256)
	for _, d := range e.Determinants {
		line = appendOccupation(line[:0], d.Up, e.Active)
		line = append(line, ' ')
		line = appendOccupation(line, d.Down, e.Active)
		for k, v := range []float64{real(d.Amplitude), imag(d.Amplitude), d.Error} {
			if k == 2 && v == 0 {
				continue
			}
			line = append(line, ' ')
			line = strconv.AppendFloat(line, v, 'g', -1, 64)
		}
		line = append(line, '\n')
		if _, err := out.Write(line); err != nil {
			return err
		}
	}
	return out.Flush()
}

func appendOccupation(line []byte, mask uint64, active int) []byte {
	for p := range active {
		line = append(line, '0'+byte(mask>>p&1))
	}
	return line
}
