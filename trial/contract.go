package trial

import (
	"gonum.org/v1/gonum/mat"

	"leadline/hamiltonian"
)

// Source is a trial state. Its one duty is to give overlaps; the abilities
// below are optional. All methods may be called from several goroutines at
// once, keep no reference to their arguments, and allocate nothing once warm
// ([Completed] excepted). A walker's results do not depend on the batch it comes in.
type Source interface {
	// Sector returns the orbitals and electron numbers of the trial state.
	Sector() hamiltonian.Sector
	// Overlaps sets dst[i] = ⟨Ψ_T|φ_i⟩ for the w.Count walkers.
	Overlaps(dst []Overlap, w Walkers)
}

// Support lists the orbitals that a trial can occupy, orthonormal columns for
// each spin: the N occupied orbitals of a determinant, core and active orbitals
// of an expansion.
type Support = Orbitals

// DensitySource gives overlaps and, with them, the mixed one-body density half
// rotated onto the support.
type DensitySource interface {
	Source
	Support() Support
	// Densities sets dst[i] = ⟨Ψ_T|φ_i⟩ and rows 2i (real) and 2i+1 (imaginary
	// part) of density, each Σ_σ n_σ·M long: D_jq = ⟨Ψ_T|s†_j c_q|φ⟩/⟨Ψ_T|φ⟩,
	// j over the support of up, then of down. Where the overlap is zero the
	// density is zero.
	Densities(dst []Overlap, density []float64, w Walkers)
}

// EnergySource gives local energies faster than overlaps alone can.
type EnergySource interface {
	DensitySource
	// Energies prepares local energies for a Hamiltonian, once; r holds its
	// factors half rotated onto the source's support and memory bounds in bytes
	// what tables may take.
	Energies(h *hamiltonian.Hamiltonian, r *Rotated, memory int64) Energies
}

// Energies computes local energies E_L = ⟨Ψ_T|H|φ⟩/⟨Ψ_T|φ⟩, constant included.
type Energies interface {
	// LocalEnergies sets m.Energy[i] for the w.Count walkers, from the walkers
	// and their overlaps, densities and field expectations in m.
	LocalEnergies(m *Mixed, w Walkers)
}

// Expectations gives expectation values in the trial state itself.
type Expectations interface {
	// OneBodyDensity returns the real part of ⟨Ψ_T|c†_p c_q|Ψ_T⟩/⟨Ψ_T|Ψ_T⟩, M×M
	// for each spin.
	OneBodyDensity() [2]*mat.SymDense
	// Energy returns ⟨Ψ_T|H|Ψ_T⟩/⟨Ψ_T|Ψ_T⟩.
	Energy(h *hamiltonian.Hamiltonian) float64
	// SpinSquared returns ⟨Ψ_T|S²|Ψ_T⟩/⟨Ψ_T|Ψ_T⟩.
	SpinSquared() float64
}

// Mixed holds what a guide computes for a batch of walkers.
type Mixed struct {
	// Overlap, one per walker.
	Overlap []Overlap
	// Density holds rows 2i and 2i+1: real and imaginary part of the half-rotated
	// density of walker i; see [DensitySource].
	Density []float64
	// Fields holds rows 2i and 2i+1, ng numbers each: ⟨v_g⟩ of walker i.
	Fields []float64
	// Energy holds local energies, one per walker.
	Energy []complex128

	summed []float64 // density summed over spins, where both share one support
	both   []float64 // products with real and imaginary rotated factors

	singleDensity, singleFields []float32
}
