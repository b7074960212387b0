package expansion

import (
	"cmp"
	"fmt"
	"math"
	"math/rand/v2"
	"slices"

	"gonum.org/v1/gonum/mat"

	"leadline/hamiltonian"
	"leadline/hamiltonian/strings"
)

// Expansion is a CI expansion over core and active orbitals,
//
//	|Ψ⟩ = Σ_D Amplitude_D Π_{core,up} c† Π_{I_D} c† Π_{core,down} c† Π_{J_D} c† |0⟩,
//
// orbitals ascending left to right. Its norm is free. It is a plain value;
// methods return new expansions that share nothing but Columns with the old one.
type Expansion struct {
	// Orbitals is M, the number of orbitals of the Hamiltonian.
	Orbitals int
	// Core orbitals are doubly occupied in every determinant, Active orbitals
	// are occupied as the determinants say; the others are empty.
	Core, Active int
	// Up and Down are the numbers of active electrons of each spin.
	Up, Down int
	// Determinants lists the expansion, each determinant once, in any order.
	Determinants []Determinant
	// Columns holds the orthonormal orbitals of the expansion in the
	// Hamiltonian's basis, M×M′ with M′ ≥ Core+Active: core first, active next.
	// nil stands for the Hamiltonian's own orbitals.
	Columns *mat.Dense
	// Basis is the fingerprint of the file that fixes the orbitals, empty if it
	// is not known. Comparing it is left to the caller.
	Basis string
	// Origin is free text: where the expansion comes from.
	Origin string
}

// Determinant is one term of an expansion.
type Determinant struct {
	// Up and Down are the occupied active orbitals: bit p set for active orbital p.
	Up, Down uint64
	// Amplitude is the coefficient of the ket.
	Amplitude complex128
	// Error is one standard error of each part of a measured amplitude; 0 if
	// there is none.
	Error float64
}

// maxOrbitals bounds M, since sources hold M×(core+active) matrices.
const maxOrbitals = 4096

// FromMatrix returns the expansion with coefficients re + i·im, element (I, J)
// of up string I and down string J at I·S_down + J; im is nil for a real one.
// Zeros are left out.
func FromMatrix(orbitals, core int, up, down *strings.Table, re, im []float64) *Expansion {
	n := up.Len() * down.Len()
	if up.Orbitals() != down.Orbitals() || len(re) != n || (im != nil && len(im) != n) {
		panic("expansion: matrix and strings do not fit")
	}
	e := &Expansion{Orbitals: orbitals, Core: core, Active: up.Orbitals(), Up: up.Electrons(), Down: down.Electrons()}
	for i, a := range up.Masks() {
		for j, b := range down.Masks() {
			v := complex(re[i*down.Len()+j], 0)
			if im != nil {
				v += complex(0, im[i*down.Len()+j])
			}
			if v != 0 {
				e.Determinants = append(e.Determinants, Determinant{Up: a, Down: b, Amplitude: v})
			}
		}
	}
	return e
}

// Sector returns M and all electrons, core included.
func (e *Expansion) Sector() hamiltonian.Sector {
	return hamiltonian.Sector{Orbitals: e.Orbitals, Up: e.Core + e.Up, Down: e.Core + e.Down}
}

// Validate checks numbers of orbitals and electrons, every determinant and the
// norm.
func (e *Expansion) Validate() error {
	if err := e.validateShape(); err != nil {
		return err
	}
	order := make([]int, len(e.Determinants))
	for i, d := range e.Determinants {
		if err := e.validateDeterminant(d); err != nil {
			return fmt.Errorf("determinant %d: %w", i+1, err)
		}
		order[i] = i
	}
	slices.SortFunc(order, func(a, b int) int { return compare(e.Determinants[a], e.Determinants[b]) })
	for k := 1; k < len(order); k++ {
		if compare(e.Determinants[order[k-1]], e.Determinants[order[k]]) == 0 {
			a, b := min(order[k-1], order[k]), max(order[k-1], order[k])
			return fmt.Errorf("determinant %d repeats determinant %d", b+1, a+1)
		}
	}
	if e.largest() == 0 {
		return fmt.Errorf("expansion of %d determinants has norm zero", len(e.Determinants))
	}
	return nil
}

func compare(a, b Determinant) int {
	return cmp.Or(cmp.Compare(a.Up, b.Up), cmp.Compare(a.Down, b.Down))
}

func (e *Expansion) validateShape() error {
	switch {
	case e.Orbitals < 1 || e.Orbitals > maxOrbitals:
		return fmt.Errorf("%d orbitals, expected 1 to %d", e.Orbitals, maxOrbitals)
	case e.Active < 1 || e.Active > strings.MaxOrbitals:
		return fmt.Errorf("%d active orbitals, expected 1 to %d", e.Active, strings.MaxOrbitals)
	case e.Core < 0 || e.Core > e.Orbitals-e.Active:
		return fmt.Errorf("core of %d and %d active orbitals do not fit into %d orbitals", e.Core, e.Active, e.Orbitals)
	case e.Up < 0 || e.Up > e.Active:
		return fmt.Errorf("%d up electrons in %d active orbitals", e.Up, e.Active)
	case e.Down < 0 || e.Down > e.Active:
		return fmt.Errorf("%d down electrons in %d active orbitals", e.Down, e.Active)
	case e.Core+e.Up+e.Down == 0:
		return fmt.Errorf("expansion has no electrons")
	}
	if e.Columns != nil {
		if rows, columns := e.Columns.Dims(); rows != e.Orbitals || columns < e.Core+e.Active || columns > e.Orbitals {
			return fmt.Errorf("orbitals of the expansion are %d×%d, expected %d rows and %d to %d columns", rows, columns, e.Orbitals, e.Core+e.Active, e.Orbitals)
		}
	}
	return nil
}

func (e *Expansion) validateDeterminant(d Determinant) error {
	for spin, mask := range [2]uint64{d.Up, d.Down} {
		name, want := "up", e.Up
		if spin == hamiltonian.Down {
			name, want = "down", e.Down
		}
		if e.Active < 64 && mask>>e.Active != 0 {
			return fmt.Errorf("occupies a %s orbital beyond the %d active ones", name, e.Active)
		}
		if n := electrons(mask); n != want {
			return fmt.Errorf("has %d active %s electrons, expected %d", n, name, want)
		}
	}
	// The square of the norm must not overflow.
	if a := math.Hypot(real(d.Amplitude), imag(d.Amplitude)); !(a <= 1e100) {
		return fmt.Errorf("amplitude is %v, expected finite numbers below 1e100", d.Amplitude)
	}
	if !(d.Error >= 0 && d.Error <= 1e100) {
		return fmt.Errorf("standard error is %v, expected a finite number that is not negative", d.Error)
	}
	return nil
}

// largest returns the largest |amplitude|.
func (e *Expansion) largest() float64 {
	var most float64
	for _, d := range e.Determinants {
		most = max(most, magnitude(d))
	}
	return most
}

func magnitude(d Determinant) float64 { return math.Hypot(real(d.Amplitude), imag(d.Amplitude)) }

// Norm returns √⟨Ψ|Ψ⟩.
func (e *Expansion) Norm() float64 {
	scale := e.largest()
	if scale == 0 {
		return 0
	}
	var sum float64
	for _, d := range e.Determinants {
		a := magnitude(d) / scale
		sum += a * a
	}
	return scale * math.Sqrt(sum)
}

// with returns a copy with other determinants.
func (e *Expansion) with(determinants []Determinant) *Expansion {
	out := *e
	out.Determinants = determinants
	return &out
}

// Normalize returns the expansion with norm 1, standard errors scaled alike. The
// norm must not be zero.
func (e *Expansion) Normalize() *Expansion {
	norm := e.Norm()
	if norm == 0 {
		panic("expansion: norm is zero")
	}
	list := slices.Clone(e.Determinants)
	for i, d := range list {
		list[i].Amplitude = complex(real(d.Amplitude)/norm, imag(d.Amplitude)/norm)
		list[i].Error = d.Error / norm
	}
	return e.with(list)
}

// tie is the difference between magnitudes, relative to the largest, below which
// they count as equal: amplitudes that symmetry makes equal agree only as far as
// a solver converged.
const tie = 1e-6

// Truncate returns the n determinants of largest |amplitude|, n ≥ 1, in their
// old order, and with them all that tie with the last to 1e-6 of the largest.
// The norm shrinks accordingly.
func (e *Expansion) Truncate(n int) *Expansion {
	if n < 1 {
		panic("expansion: truncation to no determinant")
	}
	if n >= len(e.Determinants) {
		return e.with(slices.Clone(e.Determinants))
	}
	sizes := make([]float64, len(e.Determinants))
	for i, d := range e.Determinants {
		sizes[i] = magnitude(d)
	}
	slices.Sort(sizes)
	least := sizes[len(sizes)-n] - tie*sizes[len(sizes)-1]
	var list []Determinant
	for _, d := range e.Determinants {
		if a := magnitude(d); a >= least && a > 0 {
			list = append(list, d)
		}
	}
	return e.with(list)
}

// maxNoisy bounds the determinants of an expansion with noise.
const maxNoisy = 1 << 24

// AddNoise returns the expansion with real Gaussian noise on every determinant
// of the window, also those not listed: the noise vector is scaled to exactly
// relative·Norm. The result is the same for the same seed, whatever the order of
// the determinants. An error says that the window has too many determinants.
func (e *Expansion) AddNoise(relative float64, seed uint64) (*Expansion, error) {
	rows, columns := strings.Count(e.Active, e.Up), strings.Count(e.Active, e.Down)
	if rows > maxNoisy || columns > maxNoisy || rows*columns > maxNoisy {
		return nil, fmt.Errorf("noise on every determinant of %d and %d electrons in %d orbitals: %d up and %d down strings are more than %d determinants",
			e.Up, e.Down, e.Active, rows, columns, maxNoisy)
	}
	up, down := strings.New(e.Active, e.Up), strings.New(e.Active, e.Down)
	rng := rand.New(rand.NewPCG(seed, 0x6e6f697365))
	noise := make([]float64, rows*columns)
	var sum float64
	for k := range noise {
		noise[k] = rng.NormFloat64()
		sum += noise[k] * noise[k]
	}
	scale := relative * e.Norm() / math.Sqrt(sum)
	list := make([]Determinant, len(noise))
	for i, a := range up.Masks() {
		for j, b := range down.Masks() {
			k := i*columns + j
			list[k] = Determinant{Up: a, Down: b, Amplitude: complex(scale*noise[k], 0)}
		}
	}
	for _, d := range e.Determinants {
		k := up.Index(d.Up)*columns + down.Index(d.Down)
		list[k].Amplitude += d.Amplitude
		list[k].Error = d.Error
	}
	return e.with(list), nil
}

// ExchangeSymmetric returns the expansion with the mean of the amplitudes of
// determinants that differ by exchanging up and down, as states of even total
// spin have them equal; sources work less for it. ok is false where the numbers
// of electrons differ or any two amplitudes differ by more than tolerance times
// the largest one: a solver's residual is a good tolerance.
func (e *Expansion) ExchangeSymmetric(tolerance float64) (symmetric *Expansion, ok bool) {
	if e.Up != e.Down {
		return nil, false
	}
	index := make(map[[2]uint64]int, len(e.Determinants))
	for k, d := range e.Determinants {
		index[[2]uint64{d.Up, d.Down}] = k
	}
	list := slices.Clone(e.Determinants)
	limit := tolerance * e.largest()
	for k, d := range e.Determinants {
		var other Determinant
		l, found := index[[2]uint64{d.Down, d.Up}]
		if found {
			other = e.Determinants[l]
		}
		difference := d.Amplitude - other.Amplitude
		if math.Hypot(real(difference), imag(difference)) > limit {
			return nil, false
		}
		mean := (d.Amplitude + other.Amplitude) / 2
		list[k].Amplitude = mean
		if !found {
			list = append(list, Determinant{Up: d.Down, Down: d.Up, Amplitude: mean, Error: d.Error})
		}
	}
	return e.with(list), true
}
