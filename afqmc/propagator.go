package afqmc

import (
	"fmt"
	"math"
	"math/rand/v2"

	"gonum.org/v1/gonum/mat"

	"leadline/hamiltonian"
	"leadline/hamiltonian/linalg"
)

// Propagator holds the constant operands of one step.
type Propagator struct {
	TimeStep float64
	// Shift holds l_g, one per factor.
	Shift []float64
	// Constant is e0.
	Constant float64
	// Order is the number of terms of the Taylor series of exp(X).
	Order int

	orbitals  int
	spins     int               // 1 where both spins are moved by the same X
	imaginary []bool            // η_g = i (s_g = +1) or 1 (s_g = −1)
	half      [2]*linalg.Packed // exp(−τT/2), M×M
	exponent  exponential
}

const (
	taylorError    = 1e-7 // bound on the series' remainder, relative
	taylorSamples  = 8
	largestNorm    = 4
	normIterations = 20
)

// NewPropagator prepares the operands for a time step and mean-field shift l_g;
// single says that fields and exponential are of single precision.
//
// The order of the series is the smallest with ‖X‖^(k+1)/(k+1)! < 1e-7, where
// ‖X‖ is the largest 2-norm met in eight draws of the fields without force bias:
// a typical norm, not a bound.
func NewPropagator(h *hamiltonian.Hamiltonian, timeStep float64, shift []float64, single bool) (*Propagator, error) {
	p := &Propagator{
		TimeStep: timeStep,
		Shift:    shift,
		Constant: h.Constant,
		orbitals: h.Orbitals,
		spins:    2,
	}
	if h.SpinFree() {
		p.spins = 1
	}
	f := h.Factors
	p.imaginary = make([]bool, f.Count())
	for g, s := range f.Sign {
		p.imaginary[g] = s > 0
		p.Constant -= 0.5 * s * shift[g] * shift[g]
	}
	p.exponent = newExponent(f, h.Orbitals, p.spins)
	if single {
		p.exponent = newSingleExponent(f, h.Orbitals, p.spins)
	}
	for spin := range p.spins {
		half, err := exponentialOf(meanFieldOneBody(h, spin, shift), -0.5*timeStep)
		if err != nil {
			return nil, err
		}
		p.half[spin] = linalg.Pack(false, h.Orbitals, h.Orbitals, half.RawMatrix().Data, h.Orbitals)
	}
	norm := p.typicalNorm()
	if !(norm < largestNorm) {
		return nil, fmt.Errorf("time step %g is too large: the exponent of one step has norm %.3g, expected less than %d", timeStep, norm, largestNorm)
	}
	p.Order = 2
	for term := norm * norm * norm / 6; term > taylorError; term *= norm / float64(p.Order+1) {
		p.Order++
	}
	return p, nil
}

// meanFieldOneBody returns T = t + Σ_g s_g l_g L_g of one spin. An antisymmetric
// factor has l_g = 0 in a real trial and is left out.
func meanFieldOneBody(h *hamiltonian.Hamiltonian, spin int, shift []float64) *mat.SymDense {
	t := h.SquareOneBody(spin)
	f := h.Factors
	for g, s := range f.Sign[:f.Symmetric()] {
		k, row := 0, f.Row(g, spin)
		for p := range h.Orbitals {
			for q := range p + 1 {
				t.SetSym(p, q, t.At(p, q)+s*shift[g]*row[k])
				k++
			}
		}
	}
	return t
}

// exponentialOf returns exp(scale·a) through the eigenvalues of a.
func exponentialOf(a *mat.SymDense, scale float64) (*mat.Dense, error) {
	var eigen mat.EigenSym
	if !eigen.Factorize(a, true) {
		return nil, fmt.Errorf("the one-body matrix could not be diagonalised")
	}
	var v, scaled, out mat.Dense
	eigen.VectorsTo(&v)
	values := eigen.Values(nil)
	scaled.Apply(func(_, j int, x float64) float64 { return x * math.Exp(scale*values[j]) }, &v)
	out.Mul(&scaled, v.T())
	return &out, nil
}

// area is the scratch of one tile: a worker owns one and allocates nothing else.
type area struct {
	deviates     []float64 // y of one walker
	coefficients []float64 // √τ z η: rows 2i, 2i+1 are real and imaginary parts
	columns      []float64 // the tile's columns between the two half steps
	exponential  exponentialArea
}

func (p *Propagator) newArea(walkers, columns int) *area {
	ng := len(p.Shift)
	return &area{
		deviates:     make([]float64, ng),
		coefficients: make([]float64, 2*walkers*ng),
		columns:      make([]float64, walkers*columns*2*p.orbitals),
		exponential:  p.exponent.newArea(walkers, columns),
	}
}

// draw turns the deviates y and field expectations of walker i of a tile into
// its row of coefficients √τ z η. It returns Σ_g √τ z_g η_g l_g, the importance
// exponent Σ_g (y_g x̄_g − x̄_g²/2), and whether any |x̄_g| was bounded.
func (p *Propagator) draw(a *area, i int, re, im []float64) (c, importance complex128, bounded bool) {
	root := math.Sqrt(p.TimeStep)
	ng := len(p.Shift)
	cRe, cIm := a.coefficients[2*i*ng:(2*i+1)*ng], a.coefficients[(2*i+1)*ng:(2*i+2)*ng]
	var shiftRe, shiftIm, weightRe, weightIm float64
	for g, y := range a.deviates {
		var biasRe, biasIm float64
		if p.imaginary[g] {
			biasRe, biasIm = root*im[g], -root*(re[g]-p.Shift[g])
		} else {
			biasRe, biasIm = -root*(re[g]-p.Shift[g]), -root*im[g]
		}
		if square := biasRe*biasRe + biasIm*biasIm; square > 1 {
			scale := 1 / math.Sqrt(square)
			biasRe, biasIm = biasRe*scale, biasIm*scale
			bounded = true
		}
		zRe, zIm := root*(y-biasRe), -root*biasIm
		if p.imaginary[g] {
			zRe, zIm = -zIm, zRe
		}
		cRe[g], cIm[g] = zRe, zIm
		shiftRe += zRe * p.Shift[g]
		shiftIm += zIm * p.Shift[g]
		weightRe += y*biasRe - 0.5*(biasRe*biasRe-biasIm*biasIm)
		weightIm += y*biasIm - biasRe*biasIm
	}
	return complex(shiftRe, shiftIm), complex(weightRe, weightIm), bounded
}

// advance moves the columns of a tile (Walkers.Data, see there) by one step with
// the coefficients in the area. Flops for each walker, N columns in all:
// 2·ng·M(M+1) for the fields, 8·M²N for both half steps, 8·M²N·Order for the series.
func (p *Propagator) advance(a *area, data []float64, count, up, down int) {
	m, columns := p.orbitals, up+down
	p.applyHalf(a.columns, data, count, up, down)
	for spin := range p.spins {
		first, n := p.moved(spin, up, down)
		if n == 0 {
			continue
		}
		a.exponential.fields(a.coefficients, count, spin)
		for i := range count {
			a.exponential.unpack(i)
			a.exponential.series(a.columns[(i*columns+first)*2*m:][:n*2*m], p.Order)
		}
	}
	p.applyHalf(data, a.columns, count, up, down)
}

// moved returns the columns that the operands of one spin move: all of them
// where one set of operands serves both spins.
func (p *Propagator) moved(spin, up, down int) (first, count int) {
	switch {
	case p.spins == 1:
		return 0, up + down
	case spin == hamiltonian.Up:
		return 0, up
	}
	return up, down
}

// applyHalf sets dst = exp(−τT/2) src for the columns of count walkers.
func (p *Propagator) applyHalf(dst, src []float64, count, up, down int) {
	m, columns := p.orbitals, up+down
	if p.spins == 1 {
		p.half[0].Mul(count*2*columns, 1, src, m, 0, dst, m)
		return
	}
	for spin := range p.spins {
		first, n := p.moved(spin, up, down)
		for i := range count {
			at := (i*columns + first) * 2 * m
			p.half[spin].Mul(2*n, 1, src[at:], m, 0, dst[at:], m)
		}
	}
}

// typicalNorm returns the largest 2-norm of X in a few draws of the fields.
func (p *Propagator) typicalNorm() float64 {
	m := p.orbitals
	a := p.newArea(1, 1)
	rng := rand.New(rand.NewPCG(1, 2))
	largest := 0.0
	for range taylorSamples {
		for g := range a.deviates {
			a.deviates[g] = rng.NormFloat64()
		}
		p.draw(a, 0, p.Shift, make([]float64, len(p.Shift)))
		for spin := range p.spins {
			a.exponential.fields(a.coefficients, 1, spin)
			a.exponential.unpack(0)
			largest = max(largest, norm(a.exponential.matrix(), m))
		}
	}
	return largest
}

// norm estimates the 2-norm of a complex matrix [Re | Im], M×2M, by power
// iteration on X†X.
func norm(x []float64, m int) float64 {
	v := make([]complex128, m)
	for i := range v {
		v[i] = complex(1/math.Sqrt(float64(m)), 0.01*float64(i))
	}
	u := make([]complex128, m)
	estimate := 0.0
	for range normIterations {
		length := 0.0
		for i := range u {
			u[i] = 0
			for j := range v {
				u[i] += complex(x[i*2*m+j], x[i*2*m+m+j]) * v[j]
			}
			length += real(u[i])*real(u[i]) + imag(u[i])*imag(u[i])
		}
		before := 0.0
		for _, e := range v {
			before += real(e)*real(e) + imag(e)*imag(e)
		}
		estimate = math.Sqrt(length / before)
		if length == 0 || math.IsInf(length, 0) {
			return estimate
		}
		scale := 1 / math.Sqrt(length)
		for j := range v {
			v[j] = 0
			for i := range u {
				v[j] += complex(x[i*2*m+j], -x[i*2*m+m+j]) * u[i]
			}
			v[j] *= complex(scale, 0)
		}
	}
	return estimate
}
