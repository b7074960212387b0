package linalg

import (
	"sync"
	"unsafe"
)

// Numbers in the two parts of a buffer: a block of A and a block of B.
const (
	leftSize  = maxRows * maxDepth
	rightSize = maxDepth * blockBytes / 8
)

// buffer is memory for copies of blocks of A and B.
type buffer [leftSize + rightSize]float64

// buffers holds the buffers not in use: as many as there ever were concurrent
// products.
var buffers struct {
	sync.Mutex
	free []*buffer
}

func takeBuffer() *buffer {
	buffers.Lock()
	defer buffers.Unlock()
	if n := len(buffers.free); n > 0 {
		b := buffers.free[n-1]
		buffers.free = buffers.free[:n-1]
		return b
	}
	return new(buffer)
}

func giveBuffer(b *buffer) {
	buffers.Lock()
	defer buffers.Unlock()
	buffers.free = append(buffers.free, b)
}

// carve views a buffer as a block of A and a block of B.
func carve[T float](b *buffer) (left, right []T) {
	var x T
	per := 8 / int(unsafe.Sizeof(x))
	all := unsafe.Slice((*T)(unsafe.Pointer(b)), len(b)*per)
	return all[: leftSize*per : leftSize*per], all[leftSize*per:]
}

// workspace is memory for small factorisations.
type workspace struct {
	numbers       []float64
	pivots, order []int
	elimination   elimination
	lanes         laneBatch
}

var workspaces struct {
	sync.Mutex
	free []*workspace
}

func takeWorkspace() *workspace {
	workspaces.Lock()
	defer workspaces.Unlock()
	if n := len(workspaces.free); n > 0 {
		w := workspaces.free[n-1]
		workspaces.free = workspaces.free[:n-1]
		return w
	}
	return new(workspace)
}

func giveWorkspace(w *workspace) {
	workspaces.Lock()
	defer workspaces.Unlock()
	workspaces.free = append(workspaces.free, w)
}

// reserve makes room for so many numbers and pivots, and returns the numbers
// aligned to a cache line. What they hold is undefined.
func (w *workspace) reserve(numbers, pivots int) []float64 {
	if len(w.numbers) < numbers+8 {
		w.numbers = make([]float64, numbers+8)
	}
	if len(w.pivots) < pivots {
		w.pivots, w.order = make([]int, pivots), make([]int, pivots)
	}
	skip := -int(uintptr(unsafe.Pointer(&w.numbers[0]))/8) & 7
	return w.numbers[skip:][:numbers]
}
