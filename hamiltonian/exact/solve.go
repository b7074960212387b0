package exact

import (
	"context"
	"fmt"
	"math"
	"runtime"

	"gonum.org/v1/gonum/mat"

	"leadline/hamiltonian"
	"leadline/hamiltonian/strings"
)

// Options says what [Solve] is to find. The zero value asks for the ground state.
type Options struct {
	// States is the number of states, the lowest ones; 1 where zero.
	States int
	// Spin restricts the search to total spin S (0, ½, 1, …); nil for all spins.
	// It needs a Hamiltonian that commutes with S².
	Spin *float64
	// Tolerance is the largest norm of Hx − Ex left, in units of the Hamiltonian;
	// the energy is then right to about its square over the gap. 1e-7 where zero.
	Tolerance float64
	// MaxIterations bounds the growth steps of the subspace, 1000 where zero.
	MaxIterations int
	// MemoryLimit is the most bytes that may be used by the estimate of [Estimate],
	// checked before anything is allocated; DefaultMemoryLimit where zero.
	MemoryLimit int64
	// Progress, where not nil, is told the largest residual after every growth
	// step, from the goroutine that called Solve.
	Progress func(iteration int, residual float64)
}

// DefaultMemoryLimit is 8 GB.
const DefaultMemoryLimit = 8e9

// State is an eigenstate of a Hamiltonian.
type State struct {
	// Energy is ⟨x|H|x⟩, Residual the norm of Hx − Ex.
	Energy, Residual float64
	// SpinSquared is ⟨S²⟩.
	SpinSquared float64
	// Coefficients holds x, S_up × S_down row-major (see the package comment), of
	// unit norm, its largest element positive. It belongs to the caller.
	Coefficients []float64
}

// Result is what [Solve] has found.
type Result struct {
	// Space numbers the coefficients.
	Space *Space
	// States are the lowest states, ascending in energy.
	States []State
	// Iterations is the number of growth steps of the subspace.
	Iterations int
}

// TooLargeError reports a space that would not fit in memory.
type TooLargeError struct {
	Determinants int // math.MaxInt: that many or more
	Bytes, Limit int64
}

func (e *TooLargeError) Error() string {
	if e.Bytes == math.MaxInt64 {
		return fmt.Sprintf("full CI has more determinants than can be numbered, the memory limit is %.3g GB", float64(e.Limit)/1e9)
	}
	return fmt.Sprintf("full CI of %d determinants needs %.3g GB of memory, the limit is %.3g GB", e.Determinants, float64(e.Bytes)/1e9, float64(e.Limit)/1e9)
}

// NotConvergedError reports that the iterations ended before the residuals had
// fallen to the tolerance.
type NotConvergedError struct {
	Iterations          int
	Residual, Tolerance float64
}

func (e *NotConvergedError) Error() string {
	return fmt.Sprintf("full CI did not converge: residual %.2g after %d iterations, expected %.2g", e.Residual, e.Iterations, e.Tolerance)
}

// Solve finds the lowest eigenstates of h. The result is the same on any number
// of processors. Where h commutes with S², states of one energy (to a tenth of the
// tolerance) are rotated among each other to make it diagonal; only a degenerate
// group that the number of states cuts in two may be left without definite spin.
//
// Errors: h not valid; options that cannot be met; *TooLargeError; the error of
// ctx, looked at between products with H; *NotConvergedError, with the result so
// far beside it.
func Solve(ctx context.Context, h *hamiltonian.Hamiltonian, options Options) (*Result, error) {
	if err := h.Validate(); err != nil {
		return nil, err
	}
	o := options
	if err := o.complete(); err != nil {
		return nil, err
	}
	if h.Orbitals > strings.MaxOrbitals {
		return nil, fmt.Errorf("full CI in %d orbitals, expected at most %d", h.Orbitals, strings.MaxOrbitals)
	}
	determinants, bytes := Estimate(h.Sector, o.States)
	if bytes > o.MemoryLimit {
		return nil, &TooLargeError{determinants, bytes, o.MemoryLimit}
	}
	if available, err := o.available(h); err != nil {
		return nil, err
	} else if o.States > available {
		return nil, fmt.Errorf("full CI of %d states, but there are only %d", o.States, available)
	}
	operator, err := NewOperator(h)
	if err != nil {
		return nil, err
	}
	iterations := 0
	d := &davidson{
		operator: operator.Apply, diagonal: operator.diagonal,
		states: o.States, tolerance: o.Tolerance, iterations: o.MaxIterations,
		progress: func(iteration int, residual float64) {
			iterations = iteration
			if o.Progress != nil {
				o.Progress(iteration, residual)
			}
		},
	}
	if o.Spin != nil {
		d.project = newSpinProjector(operator.Space, *o.Spin).project
	}
	energies, converged, err := d.run(ctx)
	if err != nil {
		return nil, err
	}
	vectors := d.space.basis[:o.States]
	if o.Spin == nil && CommutesWithSpin(h) {
		purify(operator.Space, energies, vectors, 0.1*o.Tolerance)
	}
	result := &Result{Space: operator.Space, Iterations: iterations}
	worst := 0.0
	for _, x := range vectors {
		fixSign(x)
		operator.Apply(d.work, x)
		state := State{Energy: dot(x, d.work), SpinSquared: operator.SpinSquared(x, nil), Coefficients: x}
		for i, v := range x {
			d.work[i] -= state.Energy * v
		}
		state.Residual = math.Sqrt(dot(d.work, d.work))
		worst = max(worst, state.Residual)
		result.States = append(result.States, state)
	}
	// The residuals of the iteration come from images that were rotated at every
	// restart; these ones are fresh.
	if !converged || !(worst <= 2*o.Tolerance) {
		return result, &NotConvergedError{iterations, worst, o.Tolerance}
	}
	return result, nil
}

// complete fills in defaults and refuses what makes no sense.
func (o *Options) complete() error {
	if o.States == 0 {
		o.States = 1
	}
	if o.Tolerance == 0 {
		o.Tolerance = 1e-7
	}
	if o.MaxIterations == 0 {
		o.MaxIterations = 1000
	}
	if o.MemoryLimit == 0 {
		o.MemoryLimit = DefaultMemoryLimit
	}
	if o.States < 0 || o.MaxIterations < 0 || o.MemoryLimit < 0 || !(o.Tolerance > 0) {
		return fmt.Errorf("full CI of %d states to tolerance %v in %d iterations with %d bytes, expected positive numbers", o.States, o.Tolerance, o.MaxIterations, o.MemoryLimit)
	}
	return nil
}

// available returns the number of states to be had, and refuses a total spin
// that the sector or the Hamiltonian does not have.
func (o *Options) available(h *hamiltonian.Hamiltonian) (int, error) {
	if o.Spin == nil {
		return strings.Count(h.Orbitals, h.Up) * strings.Count(h.Orbitals, h.Down), nil
	}
	low, high := spinRange(h.Sector)
	if s := *o.Spin; !(s >= low && s <= high) || s-low != math.Trunc(s-low) {
		return 0, fmt.Errorf("total spin %v, expected %v to %v in steps of 1 (%d up and %d down electrons in %d orbitals)", s, low, high, h.Up, h.Down, h.Orbitals)
	}
	if !CommutesWithSpin(h) {
		return 0, fmt.Errorf("total spin %v asked for, but the Hamiltonian does not commute with the total spin", *o.Spin)
	}
	return multiplets(h.Sector, *o.Spin), nil
}

// Estimate returns the number of determinants of a sector and the memory that
// [Solve] needs at most for a number of states, in bytes; math.MaxInt and
// math.MaxInt64 where they are beyond all bounds. Nothing is allocated.
func Estimate(sector hamiltonian.Sector, states int) (determinants int, bytes int64) {
	m, ups, downs := sector.Orbitals, strings.Count(sector.Orbitals, sector.Up), strings.Count(sector.Orbitals, sector.Down)
	if m > strings.MaxOrbitals || ups > math.MaxInt32 || downs > math.MaxInt32 {
		return math.MaxInt, math.MaxInt64
	}
	determinants = ups * downs
	dim := float64(determinants)
	// Basis and images; one work vector, diagonal, next vector of the projector.
	vectors := dim * float64(2*subspaceSize(max(states, 1), determinants)+3)
	// S₊x, whose strings have one more up and one less down electron.
	vectors += float64(strings.Count(m, sector.Up+1)) * float64(strings.Count(m, sector.Down-1))
	// Masks, and those with one or two electrons less or more.
	var tables float64
	for _, n := range []int{sector.Up, sector.Down} {
		for k := n - 2; k <= n+1; k++ {
			tables += float64(strings.Count(m, k))
		}
	}
	// Down excitations (8 bytes each and 24 while they are being listed).
	tables += 1.5 * float64(downs) * float64(sector.Down*(m-sector.Down+1))
	// Tensors: three of Pairs², G of each spin, V over channels, at most M⁴.
	pairs := float64(m*(m+1)) / 2
	tensors := 12 * pairs * pairs
	// Blocks of each goroutine: transposed rows, gathered rows, channels.
	free := func(n int) float64 { return float64((m - n + 2) * (m - n + 1) / 2) }
	block := 2*min(dim, rowsPerItem*float64(downs)) + free(0)*columnsPerPart +
		2*max(free(sector.Up), free(sector.Down))*columnsPerPart + 2*pairs*float64(m*m) + 2*pairs*columnsPerPart
	total := 8 * (vectors + tables + tensors + float64(runtime.GOMAXPROCS(0))*block)
	if total > math.MaxInt64/2 {
		return determinants, math.MaxInt64
	}
	return determinants, int64(total)
}

// purify rotates states with energies less than tolerance apart so that S² is
// diagonal between them, ascending.
func purify(space *Space, energies []float64, vectors [][]float64, tolerance float64) {
	square := newSpinSquare(space)
	for first, last := 0, 0; first < len(vectors); first = last {
		last = first + 1
		for last < len(vectors) && energies[last]-energies[last-1] < tolerance {
			last++
		}
		n := last - first
		if n == 1 {
			continue
		}
		group := vectors[first:last]
		y, image := square.workspace(), make([]float64, space.Dim())
		matrix := mat.NewSymDense(n, nil)
		for j, x := range group {
			square.apply(image, x, y)
			for i := range j + 1 {
				matrix.SetSym(i, j, dot(group[i], image))
			}
		}
		var eigen mat.EigenSym
		if !eigen.Factorize(matrix, true) {
			continue
		}
		var rotation mat.Dense
		eigen.VectorsTo(&rotation)
		old := make([]float64, n)
		for i := range space.Dim() {
			for k, x := range group {
				old[k] = x[i]
			}
			for k, x := range group {
				x[i] = 0
				for j, v := range old {
					x[i] += rotation.At(j, k) * v
				}
			}
		}
	}
}

// fixSign makes the largest element positive, of equal ones the first.
func fixSign(x []float64) {
	var largest float64
	for _, v := range x {
		// Elements equal by symmetry differ by rounding; the first one counts.
		if math.Abs(v) > math.Abs(largest)*(1+1e-9) {
			largest = v
		}
	}
	if largest < 0 {
		for i := range x {
			x[i] = -x[i]
		}
	}
}
