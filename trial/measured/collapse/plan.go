// Package collapse compresses a record of measurements into amplitudes. The
// mean of the single-shot estimates is linear in the trial ket, so it can be
// taken once, determinant by determinant; afterwards the trial is an ordinary
// expansion, at a cost that no longer depends on the number of shots.
//
// Snapshots of all stabilizer ensembles reduce to one shape, the quadratic form
// of package snapshot: a setting is evaluated once for each string of α and of
// β electrons, and a pair of strings then costs about ten operations. Settings
// go through in chunks; the rows of the accumulator are shared out among the
// cores, and every amplitude sums the settings in the order of the record, so
// the result has the same bits on any number of cores.
package collapse

import (
	"fmt"
	"math"
	"runtime"

	"leadline/trial/measured/calibrate"
	"leadline/trial/measured/matchgate"
	"leadline/trial/measured/record"
)

// Options of a collapse. The zero value is the sector of the header, 32
// batches, no calibration, all cores.
type Options struct {
	// Batches is the number of batches of consecutive settings, 0 for 32.
	Batches int
	// Calibration, if any, stands in for the noiseless channel.
	Calibration *calibrate.Channel
	// Workers is the number of goroutines, 0 for GOMAXPROCS. The result does
	// not depend on it.
	Workers int
	// MemoryLimit refuses sectors that would take more bytes; 0 for 8 GiB.
	MemoryLimit float64
	// Reading reads the record otherwise than its header says.
	Reading Reading
	// Progress is called now and then from one goroutine.
	Progress func(done, total int64)
}

// Reading is another way to read a record than its header says, to find out
// whether the header is wrong.
type Reading struct {
	// ReverseBits takes the bits of every outcome the other way round.
	ReverseBits bool
	// Order, if not empty, replaces the order of the spin orbitals.
	Order record.Order
}

const (
	defaultBatches     = 32
	defaultMemoryLimit = 8 << 30
	// maxMatchgateModes bounds the table of weights of a matching, which has
	// up to 3^{n/3} entries.
	maxMatchgateModes = 40
	// maxOrthogonalModes bounds the table of Pfaffians, 2^n numbers.
	maxOrthogonalModes = 20
)

// plan is what all settings of a collapse have in common.
type plan struct {
	header  *record.Header
	row     uint64
	target  target
	rows    []uint64 // target.rows ⊕ row
	cols    []uint64
	reverse bool
	workers int

	// inverse is 1/f_k of the matchgate channel, symmetric if snapshots of odd
	// parity cancel exactly.
	inverse   []float64
	symmetric bool
	// gain is 1/f of the Clifford channel.
	gain float64
	// scale turns the accumulator into amplitudes.
	scale float64
}

// newPlan checks that the record can be estimated and sets up the channel.
func newPlan(h *record.Header, t target, row uint64, opt *Options) (*plan, error) {
	n := h.Qubits
	p := &plan{header: h, row: row, target: t, reverse: opt.Reading.ReverseBits, workers: opt.Workers}
	if p.workers <= 0 {
		p.workers = runtime.GOMAXPROCS(0)
	}
	if h.Kind != record.Trial {
		return nil, fmt.Errorf("record holds a calibration, expected a trial state")
	}
	if electrons := h.Up + h.Down; !h.Ensemble.Clifford() && h.Occupied == nil && !h.Ancilla && electrons%2 != 0 {
		return nil, fmt.Errorf("record measures %d electrons in the vacuum row of ensemble %s without an ancilla: every estimate of an odd number is zero", electrons, h.Ensemble)
	}
	if limit := maxMatchgateModes; h.Ensemble == record.Matching && n > limit {
		return nil, fmt.Errorf("record of ensemble matching has %d qubits, at most %d can be collapsed", n, limit)
	}
	if limit := maxOrthogonalModes; h.Ensemble == record.Orthogonal && n > limit {
		return nil, fmt.Errorf("record of ensemble orthogonal has %d qubits, at most %d can be collapsed", n, limit)
	}
	channel := calibrate.Ideal(h.Ensemble, n)
	p.symmetric = true
	if opt.Calibration != nil {
		if err := opt.Calibration.Fits(h); err != nil {
			return nil, err
		}
		channel = opt.Calibration.Kept
		p.symmetric = false
	}
	p.setChannel(matchgate.Inverse(channel))
	r := row
	for _, mask := range t.rows {
		p.rows = append(p.rows, mask^r&t.rowModes)
	}
	for _, mask := range t.cols {
		p.cols = append(p.cols, mask^r&^t.rowModes)
	}
	return p, nil
}

// setChannel takes the inverse channel.
func (p *plan) setChannel(inverse []float64) {
	p.inverse = inverse
	p.scale = 1
	if p.header.Ensemble.Clifford() {
		p.gain = inverse[0]
		p.scale = math.Ldexp(p.gain, -p.header.Qubits)
	}
	if p.row == 0 {
		p.scale *= 2
	}
}

// finish turns an accumulator over shots into amplitudes of the ket in blocked
// order, row-major.
func (p *plan) finish(dst []complex128, acc []float64, shots float64) {
	clifford := p.header.Ensemble.Clifford()
	scale := p.scale / shots
	nc := len(p.target.cols)
	turned := p.target.orderSign(p.row&p.target.rowModes, p.row&^p.target.rowModes)
	for i, row := range p.target.rows {
		for j, col := range p.target.cols {
			at := i*nc + j
			re, im := scale*acc[2*at], scale*acc[2*at+1]
			det := row | col
			if clifford {
				// <D|M^{-1}(s)|r> = g<D|s><s|r> − δ_{Dr}(g−1)/d
				if det == p.row && p.row != 0 {
					re -= (p.gain - 1) * math.Ldexp(1, -p.header.Qubits)
				}
			} else {
				// The form gives <r|M^{-1}(G)|D>.
				im = -im
				if matchgate.RowSign(det, p.row) {
					re, im = -re, -im
				}
			}
			// Ψ_D and conj(Ψ_r) both change to blocked order.
			if p.target.orderSign(row, col) != turned {
				re, im = -re, -im
			}
			dst[at] = complex(re, im)
		}
	}
}
