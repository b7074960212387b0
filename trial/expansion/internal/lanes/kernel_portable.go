//go:build !amd64 || noasm

package lanes

func multiply(out []float64, _ int, start []int32, list []Term, a, b []float64, keep bool) {
	multiplyPortable(out, start, list, a, b, keep)
}

func combine(w *Weights, out, b []float64) { combinePortable(w, out, b) }
