package linalg

import (
	"math"
	"math/rand/v2"
	"testing"

	"gonum.org/v1/gonum/blas"
	"gonum.org/v1/gonum/blas/blas64"
	"gonum.org/v1/gonum/blas/gonum"
	"gonum.org/v1/gonum/mat"
)

// TestBLAS installs the product in gonum: products and factorisations of gonum
// must come out as before to rounding.
func TestBLAS(t *testing.T) {
	eachTier(t, func(t *testing.T, _ tier) {
		blas64.Use(BLAS())
		defer blas64.Use(gonum.Implementation{})
		const n = 150
		rng := rand.New(rand.NewPCG(11, 1))
		a := mat.NewDense(n, n, random[float64](rng, n*n))
		var lu mat.LU
		lu.Factorize(a)
		var x, back mat.Dense
		b := mat.NewDense(n, 7, random[float64](rng, n*7))
		if err := lu.SolveTo(&x, false, b); err != nil {
			t.Fatal(err)
		}
		back.Mul(a, &x)
		if !mat.EqualApprox(&back, b, 1e-9) {
			t.Error("A·(A⁻¹b) is not b")
		}
		var qr mat.QR
		var q, r mat.Dense
		qr.Factorize(a)
		qr.QTo(&q)
		qr.RTo(&r)
		back.Reset()
		back.Mul(&q, &r)
		if !mat.EqualApprox(&back, a, 1e-11) {
			t.Error("QR is not A")
		}
		var want, got mat.Dense
		got.Mul(a.T(), a)
		blas64.Use(gonum.Implementation{})
		want.Mul(a.T(), a)
		if !mat.EqualApprox(&got, &want, 1e-12) {
			t.Error("AᵀA differs from gonum's")
		}
	})
}

func TestBLASArguments(t *testing.T) {
	c := []float64{math.NaN()}
	BLAS().Dgemm(blas.ConjTrans, blas.NoTrans, 1, 1, 2, 2, []float64{1, 2}, 1, []float64{3, 4}, 1, 0, c, 1)
	if c[0] != 22 {
		t.Errorf("%v, expected 22", c[0])
	}
	defer func() {
		if recover() != "linalg: bad transpose" {
			t.Error("a wrong transpose passed")
		}
	}()
	BLAS().Dgemm('x', blas.NoTrans, 1, 1, 1, 1, c, 1, c, 1, 0, c, 1)
}
