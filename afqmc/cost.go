package afqmc

import (
	"leadline/hamiltonian"
	"leadline/trial"
)

// Cost is what a projection will take.
type Cost struct {
	// Bytes of memory in the walk: walkers, constant operands, work areas and the
	// tables of a single determinant for the local energy.
	Bytes int64
	// Flops of the whole run, local energies of a single determinant included.
	Flops float64
	// StepFlops is the part of one walker and step.
	StepFlops float64
	// Steps of all walkers together.
	Steps int64
}

// ExchangeMemory bounds the tables that a trial may keep for the local energy,
// in bytes. It is fixed, not a share of the machine's memory, so that a job
// takes the same path everywhere.
const ExchangeMemory = 256 << 20

// EstimateCost returns the cost of a projection before anything is allocated,
// in double precision and with six terms in the series of the exponential.
// paired says that one spin stands for both.
func EstimateCost(h *hamiltonian.Hamiltonian, support trial.Support, paired bool, o Options) Cost {
	const order = 6
	o = o.withDefaults()
	m, ng := float64(h.Orbitals), float64(h.Factors.Count())
	pairs := float64(hamiltonian.Pairs(h.Orbitals))
	columns := float64(h.Up + h.Down)
	if paired {
		columns = float64(h.Up)
	}
	spins := 2.0
	if h.SpinFree() {
		spins = 1
	}
	rotated := float64(support.Columns(0)+support.Columns(1)) * m
	summed := rotated
	if h.SpinFree() && support.Equal() {
		summed /= 2
	}
	walkers := float64(o.Walkers)
	equilibration, sampling := o.steps()
	steps := int64(equilibration + sampling)

	fields := spins * 4 * ng * pairs
	series := 8 * m * m * columns * order
	half := 8 * m * m * columns
	bias := 4 * ng * summed
	density := 12 * m * columns * columns
	planes := 1.0
	if !support.Real() {
		planes = 2
	}
	energy := (4 * rotated * rotated / 2) / float64(o.every(MeasureInterval))
	c := Cost{StepFlops: fields + series + half + bias + density + energy, Steps: steps * int64(o.Walkers)}
	c.Flops = c.StepFlops * float64(c.Steps)

	tile := min(walkers, tileSize)
	area := 2*tile*pairs + 2*tile*ng + 2*m*m + 4*m*columns*tile + 2*tile*(rotated+summed)
	tables := rotated * rotated / 2
	if 8*planes*tables > ExchangeMemory {
		tables = ng * summed
	}
	tables *= planes
	c.Bytes = int64(8 * (walkers*(2*m*columns+2*ng) + spins*2*ng*pairs + planes*ng*summed + tables + float64(min(o.Cores, len(tiles(o.Walkers))))*area))
	return c
}
