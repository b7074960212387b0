package measured

import (
	"fmt"
	"math"
	"strings"

	"leadline/trial/expansion"
	"leadline/trial/measured/amplitude"
	"leadline/trial/measured/record"
)

// Expansion returns the estimated amplitudes as a CI expansion: the measured
// orbitals follow core doubly occupied ones in a basis of the given number.
// Amplitudes that are exactly zero are left out. Each carries one standard
// error of its parts: that of the real part where the imaginary parts were
// removed, the root mean square of both otherwise.
func Expansion(e *amplitude.Estimate, orbitals, core int) *expansion.Expansion {
	return expand(e, e.Mean(), e.Errors(), 1, orbitals, core, "")
}

// HalfExpansions returns the expansions of the first and the second half of the
// record, after the same steps: what a run with either differs by is what the
// shot noise does to it.
func HalfExpansions(e *amplitude.Estimate, orbitals, core int) (first, second *expansion.Expansion) {
	a, b := e.Halves()
	se := e.Errors()
	return expand(e, a, se, math.Sqrt2, orbitals, core, "first half of "), expand(e, b, se, math.Sqrt2, orbitals, core, "second half of ")
}

func expand(e *amplitude.Estimate, amplitudes, errors []complex128, scale float64, orbitals, core int, part string) *expansion.Expansion {
	x := &expansion.Expansion{Orbitals: orbitals, Core: core, Active: e.Up.Orbitals(), Up: e.Up.Electrons(), Down: e.Down.Electrons(),
		Origin: part + Origin(e)}
	if h := e.Provenance.HamiltonianSHA256; h != record.UnknownHash {
		x.Basis = h
	}
	for i, u := range e.Up.Masks() {
		for j, d := range e.Down.Masks() {
			at := i*e.Down.Len() + j
			if amplitudes[at] == 0 {
				continue
			}
			re, im := real(errors[at]), imag(errors[at])
			se := math.Sqrt((re*re + im*im) / 2)
			if im == 0 {
				se = re
			}
			if math.IsInf(se, 0) || math.IsNaN(se) {
				se = 0 // one batch knows no error
			}
			x.Determinants = append(x.Determinants, expansion.Determinant{Up: u, Down: d, Amplitude: amplitudes[at], Error: scale * se})
		}
	}
	return x
}

// Origin says in one line where amplitudes come from and what was done to them.
func Origin(e *amplitude.Estimate) string {
	p := &e.Provenance
	var b strings.Builder
	fmt.Fprintf(&b, "record of ensemble %s, %s row, %d settings, %d shots", p.Ensemble, p.Row, p.Settings, p.Shots)
	if p.Digest != "" {
		fmt.Fprintf(&b, ", sha256 %s", p.Digest)
	}
	if p.Calibration != "" {
		fmt.Fprintf(&b, ", calibrated with sha256 %s", p.Calibration)
	}
	for _, s := range e.Steps {
		fmt.Fprintf(&b, "; %s", s.Name)
	}
	if p.Trial != "" {
		fmt.Fprintf(&b, "; state: %s", strings.Join(strings.Fields(p.Trial), " "))
	}
	text := b.String()
	if len(text) > 1000 {
		text = strings.ToValidUTF8(text[:1000], "")
	}
	return text
}
