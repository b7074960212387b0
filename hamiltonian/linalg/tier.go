package linalg

import "unsafe"

// tier is a family of product kernels.
type tier int

const (
	portable tier = iota // gonum
	avx2                 // AVX2 and FMA
	avx512               // AVX-512F
)

func (t tier) String() string { return [...]string{"gonum", "avx2", "avx512"}[t] }

// active is the tier of this process, set once at start. Only tests change it,
// with nothing else running.
var active = best()

func best() tier {
	t := tiers()
	return t[len(t)-1]
}

// rows returns the height of a kernel's full tile.
func (t tier) rows() int {
	if t == avx512 {
		return 8
	}
	return 4
}

// lanes returns the number of elements in a vector.
func lanes[T float](t tier) int {
	var x T
	if t == avx512 {
		return 64 / int(unsafe.Sizeof(x))
	}
	return 32 / int(unsafe.Sizeof(x))
}

// panel is what a kernel is asked to do: C ← alpha·A·B + beta·C for m rows and
// one, two or three vectors of columns. Strides are in bytes. The generator
// knows the layout.
type panel[T float] struct {
	m, k     int            // both positive
	a        unsafe.Pointer // element (i, k) of A at i·aRow + k·aCol
	aRow     int
	aCol     int
	aTile    int // from one full tile of rows to the next
	b        unsafe.Pointer
	bRow     int
	c        unsafe.Pointer
	cRow     int
	mask     unsafe.Pointer // lanes of the last vector, for the edge kernels
	next     uintptr        // to be prefetched, line by line
	nextRow  int            // step of next with k
	nextTile int            // step of next after a full tile
	alpha    T
	beta     T
}
