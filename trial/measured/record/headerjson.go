package record

import (
	"encoding/json"
	"errors"
	"math"
	"strings"
)

// headerFile is the header as JSON, in the order in which it is written.
type headerFile struct {
	Record            string          `json:"record"`
	Version           int             `json:"version"`
	Ensemble          Ensemble        `json:"ensemble"`
	Qubits            int             `json:"qubits"`
	Kind              Kind            `json:"kind"`
	Row               json.RawMessage `json:"row"`
	Electrons         electronsFile   `json:"electrons"`
	Order             Order           `json:"order"`
	Encoding          string          `json:"encoding"`
	Bits              BitOrder        `json:"bits"`
	HamiltonianSHA256 string          `json:"hamiltonian_sha256"`
	OrbitalsSHA256    string          `json:"orbitals_sha256"`
	Trial             string          `json:"trial"`
	Ancilla           *int            `json:"ancilla,omitempty"`
	Twirl             Twirl           `json:"twirl,omitempty"`
	Active            *Window         `json:"active,omitempty"`
	CalibrationID     string          `json:"calibration_id,omitempty"`
	Device            string          `json:"device,omitempty"`
	Date              string          `json:"date,omitempty"`
	Seed              json.Number     `json:"seed,omitempty"`
	TrialEnergy       *float64        `json:"trial_energy,omitempty"`
	TopAmplitudes     [][]any         `json:"top_amplitudes,omitempty"`
}

type electronsFile struct {
	Alpha int `json:"alpha"`
	Beta  int `json:"beta"`
}

// headerKeys lists the keys of a header and whether each must be there.
var headerKeys = map[string]bool{
	"record": true, "version": true, "ensemble": true, "qubits": true, "kind": true, "row": true,
	"electrons": true, "order": true, "encoding": true, "bits": true, "hamiltonian_sha256": true,
	"orbitals_sha256": true, "trial": true, "ancilla": false, "twirl": false, "active": false,
	"calibration_id": false, "device": false, "date": false, "seed": false, "trial_energy": false,
	"top_amplitudes": false,
}

// parseHeader reads and validates a header.
func parseHeader(line []byte) (*Header, *Error) {
	members, e := object(line)
	if e != nil {
		return nil, e
	}
	// The version comes first: a later one may name other keys.
	var name string
	if json.Unmarshal(members["record"], &name) != nil || name != "overlap-shots" {
		return nil, refusef(CodeHeader, "record is %.40q, expected \"overlap-shots\"", members["record"])
	}
	if v := string(members["version"]); v != "1" {
		if v == "" {
			return nil, refusef(CodeHeader, "header lacks key \"version\"")
		}
		return nil, refusef(CodeVersion, "version is %.40s, expected %d", v, Version)
	}
	for key, required := range headerKeys {
		if value, ok := members[key]; !ok && required {
			return nil, refusef(CodeHeader, "header lacks key %q", key)
		} else if ok && required && string(value) == "null" {
			return nil, refusef(CodeHeader, "%s is null", key)
		}
	}
	for key := range members {
		if _, ok := headerKeys[key]; !ok {
			return nil, refusef(CodeHeader, "header has unknown key %.80q (free text belongs in trial or device)", key)
		}
	}
	if e := exactKeys(members["electrons"], "electrons", "alpha", "beta"); e != nil {
		return nil, e
	}
	if v, ok := members["active"]; ok && string(v) != "null" {
		if e := exactKeys(v, "active", "core", "active"); e != nil {
			return nil, e
		}
	}
	var f headerFile
	if err := json.Unmarshal(line, &f); err != nil {
		var kind *json.UnmarshalTypeError
		if errors.As(err, &kind) {
			return nil, refusef(CodeHeader, "%s is a %s, expected %s", kind.Field, kind.Value, kind.Type)
		}
		return nil, refusef(CodeHeader, "%v", err)
	}
	if f.Encoding != "jordan-wigner" {
		return nil, refusef(CodeConvention, "encoding is %.40q, expected jordan-wigner", f.Encoding)
	}
	h := &Header{Ensemble: f.Ensemble, Qubits: f.Qubits, Kind: f.Kind, Up: f.Electrons.Alpha, Down: f.Electrons.Beta,
		Order: f.Order, Bits: f.Bits, HamiltonianSHA256: f.HamiltonianSHA256, OrbitalsSHA256: f.OrbitalsSHA256,
		Trial: f.Trial, Twirl: f.Twirl, Active: f.Active, CalibrationID: f.CalibrationID, Device: f.Device,
		Date: f.Date, Seed: string(f.Seed), TrialEnergy: f.TrialEnergy}
	if strings.ContainsAny(h.Seed, ".eE") {
		return nil, refusef(CodeHeader, "seed is %.40s, expected a whole number", h.Seed)
	}
	if f.Ancilla != nil {
		if *f.Ancilla != f.Qubits-1 {
			return nil, refusef(CodeUnsupported, "ancilla is mode %d, expected the highest mode %d: elsewhere its sign depends on the determinant", *f.Ancilla, f.Qubits-1)
		}
		h.Ancilla = true
	}
	if e := h.parseRow(f.Row); e != nil {
		return nil, e
	}
	for i, a := range f.TopAmplitudes {
		if len(a) != 3 {
			return nil, refusef(CodeHeader, "top_amplitudes[%d] has %d entries, expected [occupation, real part, imaginary part]", i, len(a))
		}
		text, ok := a[0].(string)
		re, okRe := a[1].(float64)
		im, okIm := a[2].(float64)
		if !ok || !okRe || !okIm {
			return nil, refusef(CodeHeader, "top_amplitudes[%d] is not [occupation, real part, imaginary part]", i)
		}
		mask, e := parseBits([]byte(text), min(max(h.Modes(), 0), MaxQubits), Q0First)
		if e != nil {
			return nil, refusef(CodeHeader, "top_amplitudes[%d]: %s", i, e.Text)
		}
		h.TopAmplitudes = append(h.TopAmplitudes, Amplitude{mask, complex(re, im)})
	}
	return h, h.validate()
}

func (h *Header) parseRow(row json.RawMessage) *Error {
	var name string
	if json.Unmarshal(row, &name) == nil {
		if name != "vacuum" {
			return refusef(CodeHeader, "row is %.40q, expected \"vacuum\" or {\"occupied\":[…]}", name)
		}
		return nil
	}
	if e := exactKeys(row, "row", "occupied"); e != nil {
		return e
	}
	var r struct {
		Occupied []int `json:"occupied"`
	}
	if err := json.Unmarshal(row, &r); err != nil || len(r.Occupied) == 0 {
		return refusef(CodeHeader, "row is %.40q, expected \"vacuum\" or {\"occupied\":[…]}", row)
	}
	h.Occupied = r.Occupied
	return nil
}

// exactKeys refuses an object that has other keys than those named.
func exactKeys(raw json.RawMessage, name string, keys ...string) *Error {
	var members map[string]json.RawMessage
	if err := json.Unmarshal(raw, &members); err != nil || members == nil {
		return refusef(CodeHeader, "%s is %.40q, expected an object with %s", name, raw, strings.Join(keys, ", "))
	}
	for _, k := range keys {
		if _, ok := members[k]; !ok || string(members[k]) == "null" {
			return refusef(CodeHeader, "%s lacks key %q", name, k)
		}
	}
	if len(members) != len(keys) {
		return refusef(CodeHeader, "%s has %d keys, expected only %s", name, len(members), strings.Join(keys, ", "))
	}
	return nil
}

// marshal writes the header as one line of JSON without its line end.
func (h *Header) marshal() ([]byte, *Error) {
	if e := h.validate(); e != nil {
		return nil, e
	}
	f := headerFile{Record: "overlap-shots", Version: Version, Ensemble: h.Ensemble, Qubits: h.Qubits, Kind: h.Kind,
		Electrons: electronsFile{h.Up, h.Down}, Order: h.Order, Encoding: "jordan-wigner", Bits: h.Bits,
		HamiltonianSHA256: h.HamiltonianSHA256, OrbitalsSHA256: h.OrbitalsSHA256, Trial: h.Trial, Twirl: h.Twirl,
		Active: h.Active, CalibrationID: h.CalibrationID, Device: h.Device, Date: h.Date, Seed: json.Number(h.Seed),
		TrialEnergy: h.TrialEnergy, Row: json.RawMessage(`"vacuum"`)}
	if h.Ancilla {
		highest := h.Qubits - 1
		f.Ancilla = &highest
	}
	if h.Active != nil {
		f.Active = &Window{Core: append([]int{}, h.Active.Core...), Active: append([]int{}, h.Active.Active...)}
	}
	if h.Occupied != nil {
		row, err := json.Marshal(map[string][]int{"occupied": h.Occupied})
		if err != nil {
			return nil, refusef(CodeHeader, "row: %v", err)
		}
		f.Row = row
	}
	for _, a := range h.TopAmplitudes {
		re, im := real(a.Value), imag(a.Value)
		if math.IsNaN(re+im) || math.IsInf(re+im, 0) {
			return nil, refusef(CodeNumber, "top_amplitudes holds %v, expected a finite number", a.Value)
		}
		text := appendBits(nil, a.Mask, h.Modes(), Q0First)
		f.TopAmplitudes = append(f.TopAmplitudes, []any{string(text), re, im})
	}
	line, err := json.Marshal(f)
	if err != nil {
		return nil, refusef(CodeHeader, "%v", err)
	}
	if len(line) > maxHeader {
		return nil, refusef(CodeHeader, "header has %d bytes, expected at most %d", len(line), maxHeader)
	}
	return line, nil
}
