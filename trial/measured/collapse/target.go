package collapse

import (
	"fmt"
	"math/bits"

	"leadline/hamiltonian/strings"
	"leadline/trial/measured/record"
)

// target is the set of determinants to estimate: every row mask joined with
// every column mask. For a sector the rows are the α strings and the columns the
// β strings, as masks of modes in the record's own order.
type target struct {
	rows, cols []uint64
	// rowModes are the modes that rows may occupy; columns have the others.
	rowModes uint64
	// alpha are the α modes of a record in interleaved order, whose amplitudes
	// take a sign on the way to blocked order; 0 if there is none to take.
	alpha uint64
}

// Dimension returns the number of determinants in the sector of a header; it
// does not overflow.
func Dimension(h *record.Header) float64 {
	m := h.Modes() / 2
	return float64(strings.Count(m, h.Up)) * float64(strings.Count(m, h.Down))
}

// sectorTarget lists the determinants of (N_up, N_down).
func sectorTarget(h *record.Header, up, down *strings.Table) target {
	m := h.Modes() / 2
	all := h.Determinant(1<<m-1, 0)
	t := target{rowModes: all}
	if h.Order == record.Interleaved {
		t.alpha = all &^ h.AncillaMask()
	}
	for _, s := range up.Masks() {
		t.rows = append(t.rows, h.Determinant(s, 0))
	}
	for _, s := range down.Masks() {
		t.cols = append(t.cols, h.Determinant(0, s)&^h.AncillaMask())
	}
	return t
}

// maskTarget lists determinants one by one.
func maskTarget(h *record.Header, masks []uint64) (target, error) {
	t := target{rowModes: ^uint64(0), cols: []uint64{0}}
	for _, d := range masks {
		if h.Qubits < 64 && d>>h.Qubits != 0 {
			return t, fmt.Errorf("determinant %#x has modes beyond the record's %d qubits", d, h.Qubits)
		}
		t.rows = append(t.rows, d)
	}
	return t, nil
}

func (t *target) size() int { return len(t.rows) * len(t.cols) }

// orderSign reports whether an amplitude changes sign from interleaved to
// blocked order: (−1)^{Σ_{q∈D_α} #{p∈D_β : p<q}}. In interleaved order β mode
// 2p+1 lies below α mode 2q just if p < q.
func (t *target) orderSign(row, col uint64) bool {
	n := 0
	for a := row & t.alpha; a != 0; a &= a - 1 {
		n += bits.OnesCount64(col & (a&-a - 1))
	}
	return n&1 != 0
}
