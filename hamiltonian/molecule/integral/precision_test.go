package integral

import (
	"math"
	"testing"

	"leadline/hamiltonian"
)

// Quartets of contracted g shells with exponents from 0.08 to 19, where recurrences
// lose digits first. The values were computed by a separate program in arithmetic
// of 60 decimal digits, with the lower incomplete gamma function for the Boys
// function.
func TestHighPrecision(t *testing.T) {
	f := New([]Shell{
		{Center: [3]float64{0.4649521418368253, -0.24416978141784917, 0.7171644693866445}, L: 4,
			Exponents:    []float64{2.1158323940691344, 0.5814582059882659, 19.229331024964402, 0.08241268036327241},
			Coefficients: []float64{-0.09792184930691877, 0.5245492745422626, 0.017267243948630162, 0.45143255357048856}},
		{Center: [3]float64{-0.8918581818778479, -0.011401288669780962, -1.492460345122447}, L: 4,
			Exponents:    []float64{14.485951515711733, 3.8549232871198487},
			Coefficients: []float64{-0.25449175220105474, 0.002921555079894611}},
	}, false)
	g := f.Repulsion()
	first := func(m int) int { return 4 + m }
	second := func(m int) int { return 13 + m }
	for _, c := range []struct {
		a, b, c, d    int // components m
		mixed, atomic float64
	}{ // (1a 2b|1c 2d) and (1a 1b|2c 2d)
		{-4, -4, 4, 4, 1.7656986321979129e-6, 0.26032983074390898678},
		{1, -2, 3, 0, 0.000034854290812689277446, 0.000030290845033518488349},
		{0, 0, 0, 0, 0.00021792706327375405689, 0.31253159301585949565},
		{2, 2, -1, -3, -0.000055948396847680640085, -0.000019240920519006135614},
	} {
		mixed := g.At(hamiltonian.Pair(first(c.a), second(c.b)), hamiltonian.Pair(first(c.c), second(c.d)))
		atomic := g.At(hamiltonian.Pair(first(c.a), first(c.b)), hamiltonian.Pair(second(c.c), second(c.d)))
		if e := math.Abs(mixed - c.mixed); !(e < 1e-15) {
			t.Errorf("%+v: (12|12) is %.17g, off by %.1e", c, mixed, e)
		}
		if e := math.Abs(atomic - c.atomic); !(e < 1e-14) {
			t.Errorf("%+v: (11|22) is %.17g, off by %.1e", c, atomic, e)
		}
	}
}
