package main

import (
	"fmt"
	"math"
	"strings"
)

// quoted writes a value with its standard error in the last digits, as
// −15.7031(4): one digit of error, two where it starts with a 1.
func quoted(value, err float64) string {
	if math.IsNaN(value) {
		return "none"
	}
	if !(err > 0) || math.IsInf(err, 0) {
		return minus(fmt.Sprintf("%.8f", value))
	}
	digits := -int(math.Floor(math.Log10(err)))
	last := math.Round(err * math.Pow(10, float64(digits)))
	if last == 1 {
		digits++
		last = math.Round(err * math.Pow(10, float64(digits)))
	}
	if digits <= 0 {
		return minus(fmt.Sprintf("%.0f(%.0f)", value, err))
	}
	return minus(fmt.Sprintf("%.*f(%.0f)", digits, value, last))
}

// minus sets a true minus sign.
func minus(s string) string { return strings.Replace(s, "-", "−", 1) }

// symbol returns the sign of an energy unit.
func symbol(unit string) string {
	if unit == "hartree" {
		return "E_h"
	}
	return unit
}
