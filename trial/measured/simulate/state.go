// Package simulate makes the record that a device without gate errors would
// return for a given trial state: settings drawn from the ensemble, outcomes
// drawn from the exact distribution, optionally misread. A record is a function
// of state, options and seed alone; every setting has its own random stream, so
// the number of cores does not matter.
package simulate

import (
	"fmt"
	"math"
	"slices"

	"leadline/hamiltonian/strings"
	"leadline/trial/measured/record"
)

// MaxQubits bounds the register: state vectors have 2^n numbers.
const MaxQubits = 16

// State is a trial state on m measured orbitals: amplitudes of the ket on up
// strings × down strings, row-major, both lists as package hamiltonian/strings orders them.
// It need not be normalised.
type State struct {
	Orbitals, Up, Down int
	Amplitudes         []complex128
}

// Flip is the readout error of a qubit: the probability of reading 1 for 0, and
// of reading 0 for 1.
type Flip struct{ Zero, One float64 }

// Options of a simulated record.
type Options struct {
	Ensemble record.Ensemble
	// Reference asks for the row of a determinant (up, down); nil for the
	// vacuum row.
	Reference *[2]uint64
	// Calibration measures the vacuum instead of the state.
	Calibration bool
	// Twirl defaults to full.
	Twirl record.Twirl
	Order record.Order    // default blocked
	Bits  record.BitOrder // default qubit 0 first
	// Settings is the number of bases, ShotsPerSetting (default 1) the number
	// of shots in each.
	Settings, ShotsPerSetting int
	Seed                      uint64
	// Readout holds the errors of each qubit; nil for none.
	Readout []Flip
	// Depolarizing is the probability that a shot returns random bits.
	Depolarizing float64
	// Identity of the orbitals, and what else the header should say.
	HamiltonianSHA256, OrbitalsSHA256, Trial, CalibrationID string
	Active                                                  *record.Window
	TrialEnergy                                             *float64
	// Workers is the number of goroutines, 0 for GOMAXPROCS.
	Workers int
}

// NewHeader returns the header of the record that Run makes. An odd number of
// electrons in the vacuum row of a matchgate ensemble gets an ancilla.
func NewHeader(st *State, opt *Options) (*record.Header, error) {
	if st.Orbitals < 1 || st.Up < 0 || st.Up > st.Orbitals || st.Down < 0 || st.Down > st.Orbitals {
		return nil, fmt.Errorf("state of %d up and %d down electrons in %d orbitals", st.Up, st.Down, st.Orbitals)
	}
	h := &record.Header{Ensemble: opt.Ensemble, Qubits: 2 * st.Orbitals, Kind: record.Trial, Up: st.Up, Down: st.Down,
		Order: opt.Order, Bits: opt.Bits, HamiltonianSHA256: opt.HamiltonianSHA256, OrbitalsSHA256: opt.OrbitalsSHA256,
		Trial: opt.Trial, Twirl: opt.Twirl, Active: opt.Active, CalibrationID: opt.CalibrationID,
		Device: "simulated", Seed: fmt.Sprint(opt.Seed), TrialEnergy: opt.TrialEnergy}
	if h.Order == "" {
		h.Order = record.Blocked
	}
	if h.Bits == "" {
		h.Bits = record.Q0First
	}
	if h.Twirl == "" {
		h.Twirl = record.TwirlFull
	}
	if h.HamiltonianSHA256 == "" {
		h.HamiltonianSHA256 = record.UnknownHash
	}
	if h.OrbitalsSHA256 == "" {
		h.OrbitalsSHA256 = h.HamiltonianSHA256
	}
	if !opt.Ensemble.Clifford() && opt.Reference == nil && (st.Up+st.Down)%2 != 0 {
		h.Ancilla = true
		h.Qubits++
	}
	if opt.Calibration {
		h.Kind, h.Up, h.Down, h.Ancilla, h.Active, h.TrialEnergy = record.Calibration, 0, 0, false, nil, nil
	} else if opt.Reference != nil {
		for p := range st.Orbitals {
			for spin, occupied := range opt.Reference {
				if occupied>>p&1 != 0 {
					h.Occupied = append(h.Occupied, h.Mode(p, spin))
				}
			}
		}
		slices.Sort(h.Occupied)
		if h.Occupied == nil {
			return nil, fmt.Errorf("reference determinant is empty")
		}
	}
	if h.Qubits > MaxQubits {
		return nil, fmt.Errorf("state needs %d qubits, at most %d can be simulated", h.Qubits, MaxQubits)
	}
	if opt.Readout != nil && len(opt.Readout) != h.Qubits {
		return nil, fmt.Errorf("readout errors of %d qubits, expected %d", len(opt.Readout), h.Qubits)
	}
	for j, f := range opt.Readout {
		if !(f.Zero >= 0 && f.Zero <= 1 && f.One >= 0 && f.One <= 1) {
			return nil, fmt.Errorf("readout errors of qubit %d are %g and %g, expected probabilities", j, f.Zero, f.One)
		}
	}
	if !(opt.Depolarizing >= 0 && opt.Depolarizing <= 1) {
		return nil, fmt.Errorf("depolarizing probability is %g", opt.Depolarizing)
	}
	if err := h.Validate(); err != nil {
		return nil, err
	}
	return h, nil
}

// component is one basis state of the measured state.
type component struct {
	det       uint64
	amplitude complex128
}

// components returns the measured state of a header in the record's own order:
// the vacuum, the trial state, or (|0> + |Ψ>)/√2.
func components(st *State, h *record.Header) ([]component, error) {
	if h.Kind == record.Calibration {
		return []component{{0, 1}}, nil
	}
	up, down := strings.New(st.Orbitals, st.Up).Masks(), strings.New(st.Orbitals, st.Down).Masks()
	if len(st.Amplitudes) != len(up)*len(down) {
		return nil, fmt.Errorf("state has %d amplitudes, its sector %d determinants", len(st.Amplitudes), len(up)*len(down))
	}
	norm := 0.0
	for _, a := range st.Amplitudes {
		norm += real(a)*real(a) + imag(a)*imag(a)
	}
	if !(norm > 0) || math.IsInf(norm, 0) {
		return nil, fmt.Errorf("norm of the state is %g", math.Sqrt(norm))
	}
	scale := 1 / math.Sqrt(norm)
	var list []component
	if h.Occupied == nil {
		scale *= math.Sqrt(0.5)
		list = append(list, component{0, complex(math.Sqrt(0.5), 0)})
	}
	for i, u := range up {
		for j, d := range down {
			a := st.Amplitudes[i*len(down)+j] * complex(scale, 0)
			if a == 0 {
				continue
			}
			if h.OrderSign(u, d) {
				a = -a
			}
			list = append(list, component{h.Determinant(u, d), a})
		}
	}
	return list, nil
}
