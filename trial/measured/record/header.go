package record

import "math/bits"

// Version is the version of the format that this package reads and writes.
const Version = 1

// MaxQubits is the largest register: masks are 64-bit words.
const MaxQubits = 64

// Ensemble is the family that the measurement bases are drawn from.
type Ensemble string

const (
	// Lagrangian is a global Clifford basis written as an affine quadratic form.
	Lagrangian Ensemble = "lagrangian"
	// Tableau is a global Clifford basis written as the images U†Z_jU.
	Tableau Ensemble = "tableau"
	// Matching is a signed permutation of the Majorana operators, written as
	// ordered pairs.
	Matching Ensemble = "matching"
	// Orthogonal is a matchgate circuit with any orthogonal matrix.
	Orthogonal Ensemble = "orthogonal"
)

// Clifford reports whether the bases are stabilizer bases of the full Clifford
// group, as opposed to fermionic Gaussian ones.
func (e Ensemble) Clifford() bool { return e == Lagrangian || e == Tableau }

// Kind tells a record of the trial state from one of the vacuum.
type Kind string

const (
	Trial       Kind = "trial"
	Calibration Kind = "calibration"
)

// Order is the order of the spin orbitals on the qubits.
type Order string

const (
	// Blocked puts all α modes before all β modes.
	Blocked Order = "alpha-then-beta"
	// Interleaved alternates α0, β0, α1, β1, …
	Interleaved Order = "interleaved"
)

// BitOrder is the order in which a text record prints the bits of an outcome.
type BitOrder string

const (
	Q0First BitOrder = "q0-first"
	Q0Last  BitOrder = "q0-last"
)

// Twirl says how far the circuits were randomised beyond the basis itself.
type Twirl string

const (
	TwirlNone Twirl = "none"
	TwirlX    Twirl = "x"
	TwirlFull Twirl = "full"
)

// Window names the orbitals that were measured, as numbers of spin orbitals in
// the record's own spin order.
type Window struct {
	Core   []int `json:"core"`
	Active []int `json:"active"`
}

// Amplitude is one amplitude of the state that the circuit was meant to
// prepare, for comparison with what was measured.
type Amplitude struct {
	// Mask is the occupation: bit p is mode p in the record's own order.
	Mask  uint64
	Value complex128
}

// UnknownHash stands for a fingerprint that nobody knows.
const UnknownHash = "0000000000000000000000000000000000000000000000000000000000000000"

// Header is the first line of a record.
type Header struct {
	Ensemble Ensemble
	Qubits   int
	Kind     Kind
	// Occupied lists the modes of the reference determinant of a reference
	// row, ascending; nil for the vacuum row.
	Occupied []int
	// Up and Down are the numbers of α and β electrons on the qubits, an
	// occupied ancilla not counted.
	Up, Down int
	Order    Order
	Bits     BitOrder
	// HamiltonianSHA256 and OrbitalsSHA256 are 64 lower-case hexadecimal
	// digits; UnknownHash where unknown.
	HamiltonianSHA256, OrbitalsSHA256 string
	// Trial is free text about the state and its circuit.
	Trial string

	// Ancilla reports that the highest qubit is an always occupied extra mode.
	Ancilla       bool
	Twirl         Twirl // "" if the record does not say
	Active        *Window
	CalibrationID string
	Device, Date  string
	// Seed is the seed of the settings, digits as written; "" if absent.
	Seed string
	// TrialEnergy is the energy of the state as its maker knows it, hartree.
	TrialEnergy   *float64
	TopAmplitudes []Amplitude
}

// Modes returns the number of modes that carry orbitals: the qubits without
// the ancilla. Half of them are α, half β.
func (h *Header) Modes() int {
	if h.Ancilla {
		return h.Qubits - 1
	}
	return h.Qubits
}

// AncillaMask is the bit of the occupied ancilla, 0 without one.
func (h *Header) AncillaMask() uint64 {
	if h.Ancilla {
		return 1 << (h.Qubits - 1)
	}
	return 0
}

// ReferenceMask is the determinant of the row that the record estimates: 0 for
// the vacuum row, else the occupied modes (with the ancilla).
func (h *Header) ReferenceMask() uint64 {
	if h.Occupied == nil {
		return 0
	}
	m := h.AncillaMask()
	for _, p := range h.Occupied {
		m |= 1 << p
	}
	return m
}

// Reference returns the up and down electrons of the reference determinant.
func (h *Header) Reference() (up, down uint64) {
	m := h.ReferenceMask()
	for p := range h.Modes() / 2 {
		up |= m >> h.Mode(p, 0) & 1 << p
		down |= m >> h.Mode(p, 1) & 1 << p
	}
	return up, down
}

// Mode returns the mode of spatial orbital p (zero-based, within the measured
// window) and spin (0 α, 1 β) in the record's own order.
func (h *Header) Mode(p, spin int) int {
	if h.Order == Interleaved {
		return 2*p + spin
	}
	return p + spin*h.Modes()/2
}

// Determinant returns the mask of the modes that hold the given up and down
// electrons of the measured orbitals, and the ancilla.
func (h *Header) Determinant(up, down uint64) uint64 {
	mask := h.AncillaMask()
	for spin, s := range [2]uint64{up, down} {
		for ; s != 0; s &= s - 1 {
			mask |= 1 << h.Mode(bits.TrailingZeros64(s), spin)
		}
	}
	return mask
}

// OrderSign reports whether the amplitude of the determinant of the given up and
// down electrons changes sign between the record's order of the spin orbitals
// and blocked order: in interleaved order by (−1)^{number of pairs of an up
// electron with a down electron in a lower orbital}.
func (h *Header) OrderSign(up, down uint64) bool {
	if h.Order != Interleaved {
		return false
	}
	n := 0
	for ; up != 0; up &= up - 1 {
		n += bits.OnesCount64(down & (up&-up - 1))
	}
	return n&1 != 0
}

// Validate refuses a header that says something impossible. A Reader and a
// Writer have called it already.
func (h *Header) Validate() error {
	if e := h.validate(); e != nil {
		return e
	}
	return nil
}

func (h *Header) validate() *Error {
	switch h.Ensemble {
	case Lagrangian, Tableau, Matching, Orthogonal:
	default:
		return refusef(CodeUnsupported, "ensemble is %q, expected lagrangian, tableau, matching or orthogonal", h.Ensemble)
	}
	if h.Qubits < 1 || h.Qubits > MaxQubits {
		return refusef(CodeUnsupported, "qubits is %d, expected 1 to %d", h.Qubits, MaxQubits)
	}
	if h.Kind != Trial && h.Kind != Calibration {
		return refusef(CodeHeader, "kind is %q, expected trial or calibration", h.Kind)
	}
	if h.Order != Blocked && h.Order != Interleaved {
		return refusef(CodeConvention, "order is %q, expected alpha-then-beta or interleaved", h.Order)
	}
	if h.Bits != Q0First && h.Bits != Q0Last {
		return refusef(CodeConvention, "bits is %q, expected q0-first or q0-last", h.Bits)
	}
	switch h.Twirl {
	case "", TwirlNone, TwirlX, TwirlFull:
	default:
		return refusef(CodeHeader, "twirl is %q, expected none, x or full", h.Twirl)
	}
	for _, hash := range []struct{ key, value string }{
		{"hamiltonian_sha256", h.HamiltonianSHA256}, {"orbitals_sha256", h.OrbitalsSHA256}} {
		if !isHash(hash.value) {
			return refusef(CodeHeader, "%s is %.80q, expected 64 lower-case hexadecimal digits", hash.key, hash.value)
		}
	}
	if h.Kind == Calibration {
		if h.Occupied != nil {
			return refusef(CodeHeader, "a calibration has row \"vacuum\", found a reference row")
		}
		if h.Up != 0 || h.Down != 0 {
			return refusef(CodeHeader, "a calibration measures the vacuum, found %d alpha and %d beta electrons", h.Up, h.Down)
		}
		return nil
	}
	return h.validateSector()
}

// validateSector checks electrons, reference row and window against each other.
func (h *Header) validateSector() *Error {
	modes := h.Modes()
	if modes%2 != 0 {
		return refusef(CodeConvention, "%d qubits without the ancilla, expected an even number: half alpha, half beta", modes)
	}
	if h.Up < 0 || h.Up > modes/2 || h.Down < 0 || h.Down > modes/2 {
		return refusef(CodeHeader, "%d alpha and %d beta electrons, expected 0 to %d of each", h.Up, h.Down, modes/2)
	}
	if h.Up+h.Down == 0 {
		return refusef(CodeHeader, "no electrons, expected at least one in a record of a trial state")
	}
	if h.Occupied != nil {
		var count [2]int
		last := -1
		for _, p := range h.Occupied {
			if p <= last || p >= modes {
				return refusef(CodeHeader, "row.occupied is %v, expected ascending modes below %d", h.Occupied, modes)
			}
			last = p
			count[h.spinOf(p)]++
		}
		if count != [2]int{h.Up, h.Down} {
			return refusef(CodeHeader, "row.occupied holds %d alpha and %d beta electrons, header says %d and %d", count[0], count[1], h.Up, h.Down)
		}
	}
	for _, a := range h.TopAmplitudes {
		var count [2]int
		for p := range modes {
			count[h.spinOf(p)] += int(a.Mask >> p & 1)
		}
		if a.Mask>>modes != 0 || count != [2]int{h.Up, h.Down} {
			return refusef(CodeHeader, "top_amplitudes holds a determinant with %d alpha and %d beta electrons, header says %d and %d", count[0], count[1], h.Up, h.Down)
		}
	}
	if h.Active != nil {
		if _, _, err := h.SpatialWindow(); err != nil {
			return refusef(CodeHeader, "%v", err)
		}
	}
	return nil
}

// spinOf is the spin of a mode below Modes().
func (h *Header) spinOf(mode int) int {
	if h.Order == Interleaved {
		return mode & 1
	}
	return mode / max(1, h.Modes()/2)
}

func isHash(s string) bool {
	if len(s) != 64 {
		return false
	}
	for _, c := range []byte(s) {
		if (c < '0' || c > '9') && (c < 'a' || c > 'f') {
			return false
		}
	}
	return true
}
