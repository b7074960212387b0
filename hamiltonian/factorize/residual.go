package factorize

import (
	"context"
	"math"
	"sync"

	"leadline/hamiltonian"
	"leadline/hamiltonian/linalg"
)

// LargestError returns max_ij |V_ij − Σ_g s_g L^g_i L^g_j|, the proof of a
// factorisation: it reads every element of V and costs n²·ng flops, which is
// n/ng ≈ M/10 times the factorisation itself.
func LargestError(ctx context.Context, v Matrix, f *hamiltonian.Factors) (float64, error) {
	n, count := v.Dim(), f.Count()
	const rows = 64
	blocks := (n + rows - 1) / rows
	worst := make([]float64, blocks)
	buffers := sync.Pool{New: func() any { return make([]float64, rows*n+rows*count) }}
	parallel(blocks, func(b int) {
		if ctx.Err() != nil {
			return
		}
		buffer := buffers.Get().([]float64)
		defer buffers.Put(buffer)
		rest, signed := buffer[:rows*n], buffer[rows*n:]
		from, to := b*rows, min(n, (b+1)*rows)
		for i := from; i < to; i++ {
			v.Column(i, rest[(i-from)*n:(i-from+1)*n])
		}
		if count > 0 {
			for g, s := range f.Sign {
				for i, x := range f.Row(g, hamiltonian.Up)[from:to] {
					signed[i*count+g] = s * x
				}
			}
			linalg.Gemm(false, false, to-from, to, count, -1, signed, count, f.Packed[hamiltonian.Up], n, 1, rest, n)
		}
		for i := from; i < to; i++ {
			for _, r := range rest[(i-from)*n : (i-from)*n+i+1] {
				worst[b] = math.Max(worst[b], math.Abs(r)) // keeps NaN
			}
		}
	})
	largest := 0.0
	for _, w := range worst {
		largest = math.Max(largest, w)
	}
	return largest, ctx.Err()
}
