package linalg

import (
	"sync"
	"unsafe"
)

// buffer is memory for the copy of a block of B.
type buffer [maxDepth * blockBytes / 8]float64

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

// view returns a buffer as numbers of either precision.
func view[T float](b *buffer) []T {
	var x T
	return unsafe.Slice((*T)(unsafe.Pointer(b)), int(unsafe.Sizeof(*b)/unsafe.Sizeof(x)))
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
