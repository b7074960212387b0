package main

import "testing"

func TestQuoted(t *testing.T) {
	for _, c := range []struct {
		value, err float64
		want       string
	}{
		{-15.70312, 0.00042, "−15.7031(4)"},
		{-15.70312, 0.00012, "−15.70312(12)"},
		{-15.70312, 0.00096, "−15.7031(10)"},
		{-1.2345, 0.2, "−1.2(2)"},
		{31.84, 9.4, "32(9)"},
		{-31.84, 14.2, "−32(14)"},
		{0.00172, 0.00041, "0.0017(4)"},
		{-2.5, 0, "−2.50000000"},
	} {
		if got := quoted(c.value, c.err); got != c.want {
			t.Errorf("quoted(%g, %g) = %s, want %s", c.value, c.err, got, c.want)
		}
	}
}
