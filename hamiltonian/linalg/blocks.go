package linalg

import "unsafe"

// Blocking, after Goto and van de Geijn, ACM Trans. Math. Softw. 34, 12 (2008)
// and Van Zee and van de Geijn, ibid. 41, 14 (2015), from memory: a panel of B,
// 128×three vectors (24 KiB), stays in the first-level cache while tiles of A go
// past it; a block of A, 128×128 numbers, stays in the second. A is read where it
// lies, whether transposed or not: copying it was measured to be slower.
const (
	maxDepth   = 128
	maxRows    = 128
	blockBytes = 480 * 8 // row of a copied block of B
)

// depth returns the length of the pieces that a sum over k is cut into: each is
// summed in order with fused multiply-adds, the pieces are added up in order. It
// must depend on nothing but k, see the package comment.
func depth(k int) int {
	pieces := (k + maxDepth - 1) / maxDepth
	return ((k+pieces-1)/pieces + 7) &^ 7
}

// vectors returns the width of the next panel when left vectors of columns
// remain: three, but even near the end.
func vectors(left int) int {
	panels := (left + 2) / 3
	return (left + panels - 1) / panels
}

// worthCopying tells whether B is to be copied into packed blocks. It is mostly
// read where it lies, with prefetching: only in large products does a copy gain a
// few per cent, and up to a third where the rows of B, apart by a multiple of
// 1 KiB, share few sets of the first-level cache. Measured.
func worthCopying[T float](t tier, m, n, k int, b operand[T]) bool {
	var x T
	if b.ld*int(unsafe.Sizeof(x))%1024 == 0 {
		return m >= 32*t.rows() && n*k >= 1<<14
	}
	return m >= 448 && n*k >= 1<<18
}

// kernelProduct is the product for the tiers with kernels; no size is zero.
func kernelProduct[T float](t tier, m, n, k int, alpha T, a, b operand[T], beta T, c []T, ldc int) {
	p := panel[T]{alpha: alpha}
	size := int(unsafe.Sizeof(alpha))
	p.cRow = ldc * size
	step, cols := depth(k), n
	var right []T
	if b.trans || worthCopying(t, m, n, k, b) {
		buffer := takeBuffer()
		defer giveBuffer(buffer)
		right = view[T](buffer)
		cols = blockBytes / size
	}
	for j := 0; j < n; j += cols {
		nb := min(cols, n-j)
		for l := 0; l < k; l += step {
			p.k, p.beta = min(step, k-l), 1
			if l == 0 {
				p.beta = beta
			}
			from := source[T]{data: right, depth: p.k}
			if right != nil {
				packRight(t, right, b, l, p.k, j, nb)
			} else {
				from = source[T]{data: b.data[l*b.ld+j:], ld: b.ld}
			}
			for i := 0; i < m; i += maxRows {
				p.m = min(maxRows, m-i)
				p.left(t, a, i, l)
				sweep(t, &p, nb, from, c[i*ldc+j:])
			}
		}
	}
}

// left points p at the rows of A from i on and the columns from l on.
func (p *panel[T]) left(t tier, a operand[T], i, l int) {
	size := int(unsafe.Sizeof(p.alpha))
	p.a, p.aRow, p.aCol = unsafe.Pointer(&a.data[at(a, i, l)]), a.ld*size, size
	if a.trans {
		p.aRow, p.aCol = p.aCol, p.aRow
	}
	p.aTile = t.rows() * p.aRow
}

// at returns the place of element (i, j) of op(A).
func at[T float](a operand[T], i, j int) int {
	if a.trans {
		return j*a.ld + i
	}
	return i*a.ld + j
}

// source is a block of B as the kernels read it: rows ld apart or, with ld zero,
// packed panel after panel, each depth×width; only rows from skip on are meant.
type source[T float] struct {
	data        []T
	ld          int
	depth, skip int
}

// sweep computes p.m rows of C, n columns wide, panel after panel.
func sweep[T float](t tier, p *panel[T], n int, b source[T], c []T) {
	size := int(unsafe.Sizeof(p.alpha))
	l := lanes[T](t)
	tiles := max(1, p.m/t.rows())
	for j, remain := 0, (n+l-1)/l; remain > 0; {
		v := vectors(remain)
		width := v * l
		p.c = unsafe.Pointer(&c[j])
		if b.ld > 0 {
			p.inPlace(b, j, width, remain == v)
		} else {
			p.packed(b, j, width, remain == v, min(64, 2*width*size/tiles))
		}
		if edge := j+width > n; edge {
			p.mask = laneMask[T](t, l-(j+width-n))
			run(t, p, v, true)
		} else {
			run(t, p, v, false)
		}
		j += width
		remain -= v
	}
}

// inPlace points p at the panel of B that starts at column j, and prefetching at
// the next one: a line of each row per tile.
func (p *panel[T]) inPlace(b source[T], j, width int, last bool) {
	size := int(unsafe.Sizeof(p.alpha))
	p.b, p.bRow = unsafe.Pointer(&b.data[j]), b.ld*size
	p.next, p.nextRow, p.nextTile = uintptr(p.b), 0, 0
	if !last {
		p.next += uintptr(width * size)
		p.nextRow, p.nextTile = p.bRow, 64-p.k*p.bRow
	}
}

// packed points p at the packed panel of B that starts at column j, and
// prefetching, row bytes per k, at the one needed next.
func (p *panel[T]) packed(b source[T], j, width int, last bool, row int) {
	size := int(unsafe.Sizeof(p.alpha))
	p.b, p.bRow = unsafe.Pointer(&b.data[j*b.depth+b.skip*width]), width*size
	p.next, p.nextRow, p.nextTile = uintptr(p.b), row, 0
	switch {
	case !last: // the same rows of the next panel
		p.next += uintptr(b.depth * width * size)
	case b.skip+p.k < b.depth: // the next rows of the first panel
		p.next = uintptr(unsafe.Pointer(&b.data[(b.skip+p.k)*width]))
	default: // what follows in memory
		p.next += uintptr((b.depth - b.skip) * width * size)
	}
}

// packRight copies rows [l, l+depth) and columns [j, j+n) of op(B) into panels.
// Numbers past the last column are left as they are: kernels do not read them.
func packRight[T float](t tier, dst []T, b operand[T], l, depth, j, n int) {
	lane := lanes[T](t)
	for remain := (n + lane - 1) / lane; remain > 0; {
		v := vectors(remain)
		width, cols := v*lane, min(v*lane, n)
		block := dst[:depth*width]
		if b.trans {
			transposeInto(block, width, b.data[j*b.ld+l:], b.ld, cols, depth)
		} else {
			for q := range depth {
				copy(block[q*width:][:cols], b.data[(l+q)*b.ld+j:])
			}
		}
		dst = dst[depth*width:]
		j, n, remain = j+width, n-width, remain-v
	}
}

// transposeInto writes the transpose of a rows×cols block to dst.
func transposeInto[T float](dst []T, dstRow int, src []T, srcRow, rows, cols int) {
	r, c := transposeBlock(dst, dstRow, src, srcRow, rows, cols)
	for i := range rows {
		from := c
		if i >= r {
			from = 0
		}
		for q := from; q < cols; q++ {
			dst[q*dstRow+i] = src[i*srcRow+q]
		}
	}
}
