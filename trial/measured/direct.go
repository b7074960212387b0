package measured

import (
	"fmt"
	"io"
	"math"
	"math/bits"

	"leadline/hamiltonian"
	"leadline/hamiltonian/linalg"
	"leadline/hamiltonian/strings"
	"leadline/trial"
	"leadline/trial/measured/calibrate"
	"leadline/trial/measured/clifford"
	"leadline/trial/measured/matchgate"
	"leadline/trial/measured/record"
	"leadline/trial/measured/snapshot"
)

// Direct is the trial source that asks every snapshot of a record for its
// estimate of the overlap and takes the mean: Pfaffians for the Gaussian
// ensembles, the affine form and the minors of the walker for the Clifford
// group. It gives what the collapsed record gives, at a cost that grows with the
// number of shots, by other formulas; it serves to check the collapse, and
// Gaussian records whose sector is too large to enumerate.
type Direct struct {
	sector   hamiltonian.Sector
	core     int
	header   *record.Header
	settings []*record.Setting
	shots    float64
	inverse  []float64
	scratch  trial.Scratch[direct]
	dets     []uint64 // of a Clifford record: the sector, as masks of modes
}

// direct is the work area of one call.
type direct struct {
	gaussian *matchgate.Gaussian
	basis    clifford.Basis
	planes   [2][]float64 // columns of the walkers on the modes
	column   []float64
	blocks   []float64
	log      []float64
	phase    []complex128
	minors   []complex128 // of the determinants, by walker
	one, sum []complex128
	scale    []trial.Overlap
}

// maxMinors bounds the table of minors of a Clifford record.
const maxMinors = 1 << 22

// NewDirect reads a record into memory. Its orbitals follow core doubly occupied
// ones in a basis of the given number; the calibration may be nil.
func NewDirect(source record.Source, orbitals, core int, c *calibrate.Channel) (*Direct, error) {
	st, err := source()
	if err != nil {
		return nil, err
	}
	h := *st.Header()
	if h.Kind != record.Trial {
		return nil, fmt.Errorf("record holds a calibration, expected a trial state")
	}
	m := h.Modes() / 2
	if core < 0 || core+m > orbitals {
		return nil, fmt.Errorf("core of %d and %d measured orbitals do not fit into %d orbitals", core, m, orbitals)
	}
	if n := h.Up + h.Down; !h.Ensemble.Clifford() && h.Occupied == nil && !h.Ancilla && n%2 != 0 {
		return nil, fmt.Errorf("record measures %d electrons in the vacuum row of ensemble %s without an ancilla: every estimate of an odd number is zero", n, h.Ensemble)
	}
	d := &Direct{sector: hamiltonian.Sector{Orbitals: orbitals, Up: core + h.Up, Down: core + h.Down}, core: core, header: &h}
	channel := calibrate.Ideal(h.Ensemble, h.Qubits)
	if c != nil {
		if err := c.Fits(&h); err != nil {
			return nil, err
		}
		channel = c.Kept
	}
	d.inverse = matchgate.Inverse(channel)
	if h.Ensemble.Clifford() {
		if err := d.listSector(); err != nil {
			return nil, err
		}
	}
	for {
		s := new(record.Setting)
		if err := st.Next(s); err == io.EOF {
			break
		} else if err != nil {
			return nil, err
		}
		d.settings = append(d.settings, s)
		d.shots += float64(s.Count())
	}
	if d.shots == 0 {
		return nil, fmt.Errorf("record has no shots")
	}
	d.scratch.New = func() *direct {
		a := new(direct)
		if !h.Ensemble.Clifford() {
			a.gaussian = matchgate.NewGaussian(h.Qubits, d.inverse)
		}
		return a
	}
	return d, nil
}

// listSector enumerates the determinants of a Clifford record.
func (d *Direct) listSector() error {
	h := d.header
	m := h.Modes() / 2
	if n := float64(strings.Count(m, h.Up)) * float64(strings.Count(m, h.Down)); n > maxMinors {
		return fmt.Errorf("sector has %.3g determinants, at most %d for overlaps from a Clifford record", n, maxMinors)
	}
	for _, u := range strings.New(m, h.Up).Masks() {
		for _, v := range strings.New(m, h.Down).Masks() {
			d.dets = append(d.dets, h.Determinant(u, v))
		}
	}
	return nil
}

// Sector implements trial.Source.
func (d *Direct) Sector() hamiltonian.Sector { return d.sector }

// Overlaps implements trial.Source.
func (d *Direct) Overlaps(dst []trial.Overlap, w trial.Walkers) {
	if w.Sector != d.sector {
		panic("measured: walkers of another sector")
	}
	a := d.scratch.Get()
	defer d.scratch.Put(a)
	d.embed(a, w)
	d.average(a, w.Count)
	for i, v := range a.sum {
		dst[i] = a.scale[i].Times(trial.OverlapOf(v))
	}
}

// average sets a.sum to the mean estimates for the columns in a.planes.
func (d *Direct) average(a *direct, count int) {
	a.sum = trial.Grow(a.sum, count)
	clear(a.sum)
	row := d.header.ReferenceMask()
	factor := complex(1/d.shots, 0)
	if row == 0 {
		factor *= 2
	} else if up, down := d.header.Reference(); d.header.OrderSign(up, down) {
		factor = -factor // conj(Ψ_r) in blocked order
	}
	if d.header.Ensemble.Clifford() {
		d.affine(a, row)
	} else {
		d.gaussian(a, row)
	}
	for i := range a.sum {
		a.sum[i] *= factor
	}
}

// gaussian sums the estimates of all snapshots.
func (d *Direct) gaussian(a *direct, row uint64) {
	electrons := d.measured()
	a.one = trial.Grow(a.one, len(a.sum))
	for _, s := range d.settings {
		for _, o := range s.Shots {
			if d.header.Ensemble == record.Matching {
				a.gaussian.SetMatching(s.Pairs, o.Bits, row)
			} else {
				a.gaussian.SetOrthogonal(s.Q, o.Bits, row)
			}
			clear(a.one)
			a.gaussian.Overlaps(a.one, row, a.planes, electrons)
			for i, v := range a.one {
				a.sum[i] += complex(float64(o.Count), 0) * v
			}
		}
	}
}

// affine sums (1/f)<r|s><s|φ> − (1/f − 1)/d <r|φ> over the shots, where <s|φ> is
// the sum over the sector's part of the snapshot's coset.
func (d *Direct) affine(a *direct, row uint64) {
	d.allMinors(a)
	count := len(a.sum)
	gain := d.inverse[0]
	for _, s := range d.settings {
		if err := a.basis.FromSetting(d.header, s); err != nil {
			panic("measured: setting was not validated")
		}
		for _, o := range s.Shots {
			t, u := a.basis.Decode(o.Bits)
			yr, coset := a.basis.Coordinates(row)
			for i, det := range d.dets {
				var value complex128
				y, v := a.basis.Coordinates(det)
				if coset == u && v == u {
					power := a.basis.Phase(yr) - a.basis.Phase(y) + 2*uint32(bits.OnesCount64(t&(y^yr)))
					value = snapshot.Power(power) * complex(math.Ldexp(gain, -a.basis.K), 0)
				}
				if det == row {
					value -= complex(math.Ldexp(gain-1, -d.header.Qubits), 0)
				}
				if value == 0 {
					continue
				}
				value *= complex(float64(o.Count), 0)
				for w := range count {
					a.sum[w] += value * a.minors[i*count+w]
				}
			}
		}
	}
}

// allMinors sets <D|φ> for every determinant of the sector and walker.
func (d *Direct) allMinors(a *direct) {
	count, n := len(a.sum), d.measured()
	a.minors = trial.Grow(a.minors, len(d.dets)*count)
	a.blocks = trial.Grow(a.blocks, 2*n*n*count)
	a.log, a.phase = trial.Grow(a.log, count), trial.Grow(a.phase, count)
	columns := count * n
	for i, det := range d.dets {
		for w := range count {
			block := a.blocks[2*n*n*w:]
			at := 0
			for rest := det; rest != 0; rest &= rest - 1 {
				p := bits.TrailingZeros64(rest)
				for k := range n {
					block[at*n+k] = a.planes[0][p*columns+w*n+k]
					block[n*n+at*n+k] = a.planes[1][p*columns+w*n+k]
				}
				at++
			}
		}
		linalg.LogDetBatch(n, count, a.blocks[:2*n*n*count], a.log, a.phase)
		for w := range count {
			a.minors[i*count+w] = trial.Overlap{Log: a.log[w], Phase: a.phase[w]}.Value()
		}
	}
}

// measured is the number of electrons on the qubits, the ancilla included.
func (d *Direct) measured() int {
	n := d.header.Up + d.header.Down
	if d.header.Ancilla {
		n++
	}
	return n
}
