package exact

import (
	"context"
	"errors"
	"fmt"
	"math"
	"math/rand/v2"
)

// davidson finds the lowest eigenstates of a real symmetric operator by the
// method of Davidson, J. Comput. Phys. 17, 87 (1975): a subspace grown by the
// preconditioned residuals of all unconverged states, restarted from its lowest
// Ritz vectors when full.
//
// A subspace started with good symmetry never leaves it, so converged states
// need not be the lowest. They are therefore put to the test: a random vector,
// orthogonal to them and with a part in every symmetry, is relaxed as one more
// state until its residual is guardTolerance. If it falls below a converged state
// it takes that state's place, and the test starts anew.
type davidson struct {
	operator   func(dst, x []float64)
	diagonal   []float64
	project    func(x []float64) // onto the wanted symmetry; nil for all
	states     int
	tolerance  float64
	iterations int // at most
	progress   func(iteration int, residual float64)

	space  *subspace
	work   []float64
	random *rand.Rand
}

const (
	// guardTolerance is the residual to which the test state is relaxed: its
	// energy is then right to about 1e-8/gap.
	guardTolerance = 1e-4
	// guardIterations bounds one test. A test state among many near-degenerate
	// ones converges slowly, but falls below a missed state early.
	guardIterations = 150
	// noise is the norm of the random part of the start vectors.
	noise = 0.1
	// smallestDenominator bounds the preconditioner, in hartree (the number of
	// iterations hardly depends on it between 0.05 and 0.5).
	smallestDenominator = 0.1
)

var errNotFinite = errors.New("full CI broke down: the Hamiltonian between its vectors is not finite")

// subspaceSize returns the limit of the subspace for a number of states in a
// space of dim dimensions.
func subspaceSize(states, dim int) int { return min(max(16, 6*(states+1)), dim) }

// run leaves the states in the first vectors of d.space.basis and returns their
// energies, ascending. An error means that ctx was cancelled or that H is not
// finite.
func (d *davidson) run(ctx context.Context) (energies []float64, converged bool, err error) {
	dim := len(d.diagonal)
	d.space = newSubspace(dim, subspaceSize(d.states, dim), d.operator)
	d.work = make([]float64, dim)
	d.random = rand.New(rand.NewPCG(0x6c6561646c696e65, 0x6578616374)) // any fixed seed
	if err := d.start(ctx); err != nil {
		return nil, false, err
	}
	var guarding bool
	var guardStart int
	var reference float64
	for iteration := 1; ; iteration++ {
		if err := ctx.Err(); err != nil {
			return nil, false, err
		}
		values, vectors, ok := d.space.ritz()
		if ok && d.space.size+d.states+1 > d.space.limit && d.space.limit < dim {
			d.space.restart(d.space.limit/2, values, vectors)
			values, vectors, ok = d.space.ritz()
		}
		if !ok {
			return nil, false, errNotFinite
		}
		var largest, sum float64
		var added bool
		for k := range d.states {
			residual := d.space.residual(d.work, values[k], vectors, k)
			largest, sum = max(largest, residual), sum+values[k]
			if residual > d.tolerance {
				added = d.grow(values[k]) || added
			}
			if err := ctx.Err(); err != nil {
				return nil, false, err
			}
		}
		if d.progress != nil {
			d.progress(iteration, largest)
		}
		if largest > d.tolerance {
			if !added || iteration >= d.iterations {
				d.space.restart(d.states, values, vectors)
				return values[:d.states], false, nil
			}
			continue
		}
		if guarding && d.space.size > d.states && iteration-guardStart < guardIterations {
			k := d.states
			if d.space.residual(d.work, values[k], vectors, k) > max(guardTolerance, d.tolerance) && d.grow(values[k]) {
				continue
			}
		}
		d.space.restart(d.states, values, vectors)
		if guarding && sum > reference-1e-9*(1+math.Abs(reference)) {
			return values[:d.states], true, nil
		}
		guarding, guardStart, reference = true, iteration, sum
		d.randomise()
		if !d.accept(d.work) { // the states span everything
			return values[:d.states], true, nil
		}
	}
}

// start fills the subspace with one vector per state: the determinants lowest on
// the diagonal, with some noise.
func (d *davidson) start(ctx context.Context) error {
	for _, lowest := range lowestOf(d.diagonal, d.states) {
		if err := ctx.Err(); err != nil {
			return err
		}
		d.randomise()
		for i := range d.work {
			d.work[i] *= noise
		}
		d.work[lowest]++
		d.accept(d.work)
	}
	for try := 0; d.space.size < d.states; try++ {
		if err := ctx.Err(); err != nil {
			return err
		}
		if try == 100 {
			return fmt.Errorf("full CI broke down: no start for state %d of %d", d.space.size+1, d.states)
		}
		d.randomise()
		d.accept(d.work)
	}
	return nil
}

// randomise fills the work vector with random numbers of unit norm, larger where
// the diagonal is low: low in energy, and with a part in every symmetry.
func (d *davidson) randomise() {
	lowest := math.Inf(1)
	for _, v := range d.diagonal {
		lowest = min(lowest, v)
	}
	var norm float64
	for i, v := range d.diagonal {
		x := d.random.NormFloat64() * (1e-4 + 1/((0.5+v-lowest)*(0.5+v-lowest)))
		d.work[i] = x
		norm += x * x
	}
	scale := 1 / math.Sqrt(norm)
	for i := range d.work {
		d.work[i] *= scale
	}
}

// accept projects x, makes it orthonormal to the subspace and adds it; false
// where next to nothing was left.
func (d *davidson) accept(x []float64) bool {
	if d.space.size == d.space.limit {
		return false
	}
	if d.project != nil {
		d.project(x)
	}
	if !d.space.orthogonalise(x) {
		return false
	}
	d.space.add(x)
	return true
}

// grow adds the preconditioned residual in the work vector, r/(D − θ), with
// denominators kept positive. So it never lies in the subspace, to which r is
// orthogonal, and determinants below a high start are raised, not suppressed:
// with D − θ of either sign a start among excited determinants converges there.
func (d *davidson) grow(value float64) bool {
	parts := pieces(len(d.work), chunk)
	each(parts, func(item int) {
		from, to := piece(len(d.work), parts, item)
		for i := from; i < to; i++ {
			d.work[i] /= max(d.diagonal[i]-value, smallestDenominator)
		}
	})
	return d.accept(d.work)
}

// lowestOf returns the places of the count smallest elements, ascending, of equal
// ones the first.
func lowestOf(x []float64, count int) []int {
	var places []int
	for i, v := range x {
		if len(places) == count && v >= x[places[count-1]] {
			continue
		}
		k := len(places)
		for k > 0 && x[places[k-1]] > v {
			k--
		}
		places = append(places, 0)
		copy(places[k+1:], places[k:])
		places[k] = i
		places = places[:min(len(places), count)]
	}
	return places
}
