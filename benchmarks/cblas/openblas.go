package main

// #cgo LDFLAGS: -lopenblas
// #include <cblas.h>
// char *openblas_get_corename(void);
import "C"

func coreName() string { return C.GoString(C.openblas_get_corename()) }

// dgemm computes C ← A·B, row-major.
func dgemm(m, n, k int, a, b, c []float64) {
	C.cblas_dgemm(C.CblasRowMajor, C.CblasNoTrans, C.CblasNoTrans, C.blasint(m), C.blasint(n), C.blasint(k),
		1, (*C.double)(&a[0]), C.blasint(k), (*C.double)(&b[0]), C.blasint(n), 0, (*C.double)(&c[0]), C.blasint(n))
}

// sgemm is dgemm in single precision.
func sgemm(m, n, k int, a, b, c []float32) {
	C.cblas_sgemm(C.CblasRowMajor, C.CblasNoTrans, C.CblasNoTrans, C.blasint(m), C.blasint(n), C.blasint(k),
		1, (*C.float)(&a[0]), C.blasint(k), (*C.float)(&b[0]), C.blasint(n), 0, (*C.float)(&c[0]), C.blasint(n))
}
