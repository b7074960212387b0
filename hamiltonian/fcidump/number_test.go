package fcidump

import (
	"math"
	"math/rand/v2"
	"strconv"
	"strings"
	"testing"
)

func TestNumber(t *testing.T) {
	for text, want := range map[string]float64{
		"0": 0, "-0": math.Copysign(0, -1), "1": 1, "1.": 1, ".5": 0.5, "+1.5": 1.5, "-2.5e0": -2.5, "1E2": 100, "1d-2": 0.01, "1.5D+03": 1500,
		"1.5-100": 1.5e-100, "1.5+100": 1.5e100, "123456789012345678901234567890": 123456789012345678901234567890,
		"0.000000000000000000000000000001": 1e-30, "1e-400": 0, "0e99999999999": 0, "9007199254740993": 9007199254740992,
		"18446744073709551615": 18446744073709551615, "1.7976931348623157e308": math.MaxFloat64,
	} {
		got, after, ok := number([]byte(text+"\n"), 0)
		if !ok || after != len(text) || math.Float64bits(got) != math.Float64bits(want) {
			t.Errorf("%s: %v %v, %d bytes, expected %v", text, got, ok, after, want)
		}
	}
	for _, text := range []string{"", "-", ".", "e5", "1e", "1e+", "1-", "nan", "inf", "1e309", "-.e1", "--1"} {
		if got, after, ok := number([]byte(text+"\n"), 0); ok && after == len(text) {
			t.Errorf("%q is taken for %v", text, got)
		}
	}
}

// TestNumberRounding compares with strconv on random numbers in many prints.
func TestNumberRounding(t *testing.T) {
	random := rand.New(rand.NewPCG(1, 2))
	for i := range 300000 {
		x := math.Float64frombits(random.Uint64())
		if math.IsNaN(x) || math.IsInf(x, 0) {
			continue
		}
		if i%2 == 0 {
			x = random.NormFloat64() * math.Exp(5*random.NormFloat64())
		}
		text := strconv.FormatFloat(x, "eEfg"[i%4], -1+i/4%19, 64)
		want, err := strconv.ParseFloat(text, 64)
		if err != nil {
			continue // rounded up beyond the largest number
		}
		if i%3 == 0 {
			text = strings.NewReplacer("e", "d", "E", "D").Replace(text)
		}
		if got, after, ok := number([]byte(text+"\n"), 0); !ok || after != len(text) || got != want {
			t.Fatalf("%s: %v %v, %d bytes, expected %v", text, got, ok, after, want)
		}
	}
}
