package exact

import (
	"runtime"
	"sync"
	"sync/atomic"

	"leadline/hamiltonian"
	"leadline/hamiltonian/strings"
)

// Space is the space of all determinants of a sector. Its methods may be called
// from several goroutines.
type Space struct {
	Up, Down *strings.Table
}

// NewSpace enumerates the strings of a sector, which must be valid and small
// enough to be held; see [Estimate].
func NewSpace(sector hamiltonian.Sector) *Space {
	up := strings.New(sector.Orbitals, sector.Up)
	if sector.Up == sector.Down {
		return &Space{Up: up, Down: up}
	}
	return &Space{Up: up, Down: strings.New(sector.Orbitals, sector.Down)}
}

// Dim returns the number of determinants, S_up·S_down, the length of a vector.
func (s *Space) Dim() int { return s.Up.Len() * s.Down.Len() }

// Orbitals returns M.
func (s *Space) Orbitals() int { return s.Up.Orbitals() }

func (s *Space) check(x []float64) {
	if len(x) != s.Dim() {
		panic("exact: vector has the wrong length")
	}
}

// each calls work on every item 0 … n−1, on as many goroutines as there are
// processors. The partition into items is the caller's, so results do not depend
// on the number of processors as long as no two items write to the same place.
func each(n int, work func(item int)) {
	workers := min(runtime.GOMAXPROCS(0), n)
	if workers <= 1 {
		for i := range n {
			work(i)
		}
		return
	}
	var next atomic.Int64
	var wait sync.WaitGroup
	for range workers {
		wait.Go(func() {
			for {
				i := int(next.Add(1)) - 1
				if i >= n {
					return
				}
				work(i)
			}
		})
	}
	wait.Wait()
}

// pieces returns the number of parts of nearly equal length that 0 … n is cut
// into for none to be longer than size.
func pieces(n, size int) int { return (n + size - 1) / size }

// piece returns the bounds of one part.
func piece(n, parts, i int) (from, to int) { return i * n / parts, (i + 1) * n / parts }

// transpose writes the rows × columns block at src, row length ld, into dst as
// columns × rows, densely.
func transpose(dst, src []float64, rows, columns, ld int) {
	const tile = 16
	for i0 := 0; i0 < rows; i0 += tile {
		i1 := min(i0+tile, rows)
		for j0 := 0; j0 < columns; j0 += tile {
			j1 := min(j0+tile, columns)
			for i := i0; i < i1; i++ {
				row := src[i*ld : i*ld+columns]
				for j := j0; j < j1; j++ {
					dst[j*rows+i] = row[j]
				}
			}
		}
	}
}

// addTransposed adds the dense columns × rows block src to the rows × columns
// block at dst, row length ld.
func addTransposed(dst, src []float64, rows, columns, ld int) {
	const tile = 16
	for i0 := 0; i0 < rows; i0 += tile {
		i1 := min(i0+tile, rows)
		for j0 := 0; j0 < columns; j0 += tile {
			j1 := min(j0+tile, columns)
			for i := i0; i < i1; i++ {
				row := dst[i*ld : i*ld+columns]
				for j := j0; j < j1; j++ {
					row[j] += src[j*rows+i]
				}
			}
		}
	}
}
