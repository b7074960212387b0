package afqmc

import (
	"math"
	"math/cmplx"
	"testing"

	"gonum.org/v1/gonum/mat"

	"leadline/hamiltonian"
	"leadline/trial"
	"leadline/trial/determinant"
)

// One closed-form case through overlap, field expectations, local energy and a
// propagation step: M = 6, signs ++−+, three up and two down electrons, complex
// walker and complex determinant. The expected numbers come from an independent
// implementation, verified there by brute-force expansion to 1e-14.

func goldenHamiltonian() *hamiltonian.Hamiltonian {
	const m, ng = 6, 4
	h := &hamiltonian.Hamiltonian{
		Sector:   hamiltonian.Sector{Orbitals: m, Up: 3, Down: 2},
		Constant: 0.7,
		Factors:  hamiltonian.NewFactors(m, ng),
	}
	h.Factors.Sign[2] = -1
	one := mat.NewSymDense(m, nil)
	for p := range m {
		for q := range p + 1 {
			one.SetSym(p, q, -math.Cos(0.5*float64(p+q))/(1+float64(p-q)))
			for g := range ng {
				v := 0.3 * math.Cos(0.37*float64(g+1)*float64(p+q+1))
				if p == q {
					v += 0.2 * math.Sin(float64(g+p))
				}
				h.Factors.Row(g, hamiltonian.Up)[hamiltonian.Pair(p, q)] = v
			}
		}
	}
	h.OneBody = [2]*mat.SymDense{one, one}
	return h
}

func goldenWalker(w trial.Walkers) {
	for p := range 6 {
		x := float64(p)
		for j := range 3 {
			i := float64(j)
			w.Set(0, hamiltonian.Up, p, j, complex(math.Cos(0.7*x*(i+1)), math.Sin(0.4*x+i)))
			if j < 2 {
				w.Set(0, hamiltonian.Down, p, j, complex(math.Sin(0.9*(x+1)*(i+1)), math.Cos(0.3*x*i+0.2)))
			}
		}
	}
}

// goldenTrial returns orthonormal columns spanning the trial's and the
// logarithm of the determinant that the orthonormalisation took out.
func goldenTrial(t *testing.T) (trial.Orbitals, float64) {
	t.Helper()
	columns := trial.NewWalkers(hamiltonian.Sector{Orbitals: 6, Up: 3, Down: 2}, false, 1)
	for p := range 6 {
		x := float64(p)
		for j := range 3 {
			i := float64(j)
			gauss := math.Exp(-0.2 * (x - i) * (x - i))
			columns.Set(0, hamiltonian.Up, p, j, complex(gauss, 0.5*math.Sin(x*i)))
			if j < 2 {
				columns.Set(0, hamiltonian.Down, p, j, complex(gauss, 0.3*math.Cos(x+i)))
			}
		}
	}
	logDet, err := orthonormalise(columns, 0, newGram(6, 3))
	if err != nil {
		t.Fatal(err)
	}
	var o trial.Orbitals
	for spin, n := range [2]int{3, 2} {
		o.Re[spin], o.Im[spin] = mat.NewDense(6, n, nil), mat.NewDense(6, n, nil)
		for p := range 6 {
			for j := range n {
				v := columns.At(0, spin, p, j)
				o.Re[spin].Set(p, j, real(v))
				o.Im[spin].Set(p, j, imag(v))
			}
		}
	}
	return o, logDet
}

func TestGoldenStep(t *testing.T) {
	const tau, ng = 0.05, 4
	near := func(what string, got, want complex128) {
		t.Helper()
		if d := cmplx.Abs(got - want); !(d < 1e-10*(1+cmplx.Abs(want))) {
			t.Errorf("%s: got %.14g, want %.14g, difference %.2g", what, got, want, d)
		}
	}
	h := goldenHamiltonian()
	columns, logDet := goldenTrial(t)
	source, err := determinant.New(6, columns)
	if err != nil {
		t.Fatal(err)
	}
	guide, err := trial.NewGuide(h, source, 1<<30)
	if err != nil {
		t.Fatal(err)
	}
	w := trial.NewWalkers(h.Sector, false, 1)
	goldenWalker(w)
	m := guide.NewMixed(1)
	guide.Evaluate(m, w)
	guide.LocalEnergies(m, w)
	before := m.Overlap[0]
	near("overlap", before.Value()*cmplx.Exp(complex(logDet, 0)), 3.3727041509277536+13.588964855728861i)
	for g, want := range []complex128{
		-0.46648763422644784 - 0.22302382068500548i,
		0.18912295372305912 - 0.1010052484422565i,
		-0.6458862840375683 - 1.255646543073572i,
		-0.39654093901996146 - 1.3967582721722138i,
	} {
		near("field expectation", complex(m.Fields[g], m.Fields[ng+g]), want)
	}
	near("local energy", m.Energy[0], -0.6681124253808959+1.0058471190548253i)

	shift := []float64{0.1, 0.2, 0.3, 0.4}
	p, err := NewPropagator(h, tau, shift, false)
	if err != nil {
		t.Fatal(err)
	}
	p.Order = 14
	near("constant", complex(p.Constant, 0), 0.64)
	half, err := exponentialOf(meanFieldOneBody(h, hamiltonian.Up, shift), -0.5*tau)
	if err != nil {
		t.Fatal(err)
	}
	near("trace of the half step", complex(mat.Trace(half), 0), 6.039194972835112)

	// The stated shifted fields are z = y − x̄ with a complex y: the bias that
	// draw uses is read off from its coefficients at y = 0.
	a := p.newArea(1, w.Columns())
	p.draw(a, 0, m.Fields[:ng], m.Fields[ng:])
	var number, importance complex128
	for g, want := range []complex128{
		-0.0498696423653396 + 0.12667048585433738i,
		-0.022585460160114028 + 0.0024321814869650827i,
		0.2115066030092677 + 0.2807711026025124i,
		-0.31232464447122227 + 0.17811196865101486i,
	} {
		root, eta := complex(math.Sqrt(tau), 0), complex128(1i)
		if h.Factors.Sign[g] < 0 {
			eta = 1
		}
		bias := -complex(a.coefficients[g], a.coefficients[ng+g]) / (root * eta)
		near("force bias", bias, want)
		z := complex(math.Sin(float64(g+1)), 0)
		c := root * z * eta
		a.coefficients[g], a.coefficients[ng+g] = real(c), imag(c)
		number += c * complex(shift[g], 0)
		importance += (z+bias)*bias - bias*bias/2
	}
	p.advance(a, w.Data, 1, w.Up, w.Down)
	guide.Evaluate(m, w)
	ratio := m.Overlap[0].Over(before) * cmplx.Exp(-number)
	near("R", ratio, 0.8821203890258523-0.03989458010452484i)
	weight := ratio * cmplx.Exp(importance)
	near("I", weight, 1.092055045317243-0.03734403066865123i)
	near("hybrid energy", complex(p.Constant-math.Log(cmplx.Abs(weight))/tau, 0), -1.132912582209906)
	for i, want := range []complex128{
		1.2011755418572538 + 0.3667206458963922i,
		0.8816554402475203 + 0.6224463697127078i,
		0.2807794859193906 + 0.6364268154542788i,
		-0.2978363991998727 + 0.7335777510334418i,
		-0.7330282399507673 + 0.9586248134925707i,
		-0.8584842422259809 + 1.0099874201166648i,
	} {
		near("first column", w.At(0, hamiltonian.Up, i, 0), want)
	}
}
