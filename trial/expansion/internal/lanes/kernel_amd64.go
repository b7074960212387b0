//go:build amd64 && !noasm

package lanes

import "unsafe"

func multiply(out []float64, outputs int, start []int32, list []Term, a, b []float64, keep bool) {
	flag := 0
	if keep {
		flag = 1
	}
	switch tier {
	case "avx512":
		multiplyAVX512(&out[0], outputs, &start[0], (*byte)(unsafe.Pointer(&list[0])), &a[0], &b[0], flag)
	case "avx2":
		multiplyAVX2(&out[0], outputs, &start[0], (*byte)(unsafe.Pointer(&list[0])), &a[0], &b[0], flag)
	default:
		multiplyPortable(out, start, list, a, b, keep)
	}
}

func combine(w *Weights, out, b []float64) {
	outputs, list := len(w.Start)-1, (*byte)(unsafe.Pointer(&w.List[0]))
	switch {
	case tier == "avx512" && w.Real:
		combineRealAVX512(&out[0], outputs, &w.Start[0], list, &b[0])
	case tier == "avx512":
		combineAVX512(&out[0], outputs, &w.Start[0], list, &b[0])
	case tier == "avx2" && w.Real:
		combineRealAVX2(&out[0], outputs, &w.Start[0], list, &b[0])
	case tier == "avx2":
		combineAVX2(&out[0], outputs, &w.Start[0], list, &b[0])
	default:
		combinePortable(w, out, b)
	}
}
