package measured

import (
	"math"

	"leadline/hamiltonian/linalg"
	"leadline/trial"
	"leadline/trial/measured/amplitude"
)

// Signal compares overlaps of walkers with the shot noise of a measured trial.
// The noise of the amplitudes is white on the sector, so that of an overlap is
//
//	SE² = (Σ_D SE_D²/dim) |Pφ|²,  |Pφ|² = Σ_D |<D|φ>|² = Π_σ det(φ_σ†φ_σ),
//
// with φ_σ the active rows of the walker below its core (Cauchy–Binet), whatever
// the dimension. The noise of one record is fixed: it does not average out along
// a walk, and a walker below a few standard errors has a phase that the trial
// does not know. Safe for concurrent use.
type Signal struct {
	core, active int
	logSigma     float64
	scratch      trial.Scratch[signal]
}

type signal struct {
	column []float64
	block  []float64
	log    [1]float64
	phase  [1]complex128
}

// NewSignal takes the noise of an estimate whose orbitals follow core doubly
// occupied ones. The overlaps to compare must be those of its amplitudes as
// they are, not of normalised ones.
func NewSignal(e *amplitude.Estimate, core int) *Signal {
	return &Signal{core: core, active: e.Up.Orbitals(), logSigma: math.Log(e.Noise()/float64(e.Size())) / 2,
		scratch: trial.Scratch[signal]{New: func() *signal { return new(signal) }}}
}

// Ratios sets dst[i] = |<Ψ_T|φ_i>|/SE for the walkers and their overlaps.
func (s *Signal) Ratios(dst []float64, overlaps []trial.Overlap, w trial.Walkers) {
	a := s.scratch.Get()
	defer s.scratch.Put(a)
	for i := range w.Count {
		logError := s.logSigma
		for spin := range 2 {
			logError += s.norm(a, w, i, spin)
		}
		dst[i] = math.Exp(overlaps[i].Log - logError)
	}
}

// norm returns ln |Pφ| of one spin.
func (s *Signal) norm(a *signal, w trial.Walkers, i, spin int) float64 {
	m, electrons := w.Orbitals, w.Electrons(spin)
	a.column = trial.Grow(a.column, 2*m*electrons)
	copy(a.column, w.Spin(i, spin))
	log := eliminate(a.column, m, electrons, s.core).Log
	n := electrons - s.core
	if n == 0 {
		return log
	}
	a.block = trial.Grow(a.block, 2*n*n)
	rows := func(k, part int) []float64 { return a.column[2*m*(s.core+k)+part*m+s.core:][:s.active] }
	for k := range n {
		for l := range n {
			var re, im float64
			kr, ki, lr, li := rows(k, 0), rows(k, 1), rows(l, 0), rows(l, 1)
			for p := range s.active {
				re += kr[p]*lr[p] + ki[p]*li[p]
				im += kr[p]*li[p] - ki[p]*lr[p]
			}
			a.block[k*n+l], a.block[n*n+k*n+l] = re, im
		}
	}
	linalg.LogDetBatch(n, 1, a.block, a.log[:], a.phase[:])
	return log + a.log[0]/2
}
