package linalg

import (
	"sync"
	"unsafe"
)

// Numbers in the two parts of a buffer: a block of A with its rows padded, and a
// block of B.
const (
	leftSize  = maxRows * (maxDepth + 8)
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
