package pairing

import (
	"context"
	"errors"
	"fmt"
	"math"
	"math/cmplx"

	"gonum.org/v1/gonum/mat"
)

// Exact returns the exact ground-state energy of the attractive model (G ≥ 0,
// d > 0) from the equations of Richardson, Phys. Lett. 3, 277 (1963) (also
// Richardson & Sherman, Nucl. Phys. 52, 221 (1964)) for the energies E_α of N pairs,
//
//	1/G = Σ_i 1/(2ε_i − E_α) − 2 Σ_{β≠α} 1/(E_β − E_α),   E = Σ_α E_α.
//
// At critical couplings pairs of E_α meet on a level and turn complex; there, and
// near them, the equations are singular, though E(G) is analytic. So they are
// followed from weak coupling through the complex plane, at Im G = ρ, and
//
//	E(G) = (1/K) Σ_k E(G + ρ e^{iθ_k}),   θ_k = (k + ½) 2π/K,
//
// Cauchy's formula by the trapezoidal rule, never meets the real axis. The radius ρ
// must be below the distance to the exceptional points of E(G): it is halved until
// two radii, on paths of their own, agree to 1e-12 of the largest term in E. Costs
// some hundred solutions of N complex linear equations: 60 levels take a second,
// 100 some ten.
func (m Model) Exact(ctx context.Context) (float64, error) {
	if err := m.Validate(); err != nil {
		return 0, err
	}
	if !(m.Spacing > 0) || m.Coupling < 0 {
		return 0, fmt.Errorf("spacing %v and coupling %v, expected distinct levels and attraction", m.Spacing, m.Coupling)
	}
	n, g := float64(m.Pairs), m.Coupling/m.Spacing
	centre := n * float64(m.Levels+1) // levels are counted from their mean
	if g == 0 {
		return m.Spacing * n * (n + 1), nil
	}
	scale := max(1, centre, g*n*float64(m.Levels-m.Pairs+1))
	previous, last := math.NaN(), error(nil)
	for radius := 0.2; radius > 0.005; radius /= 2 {
		e, err := newPairs(m).circle(ctx, g, radius)
		if ctx.Err() != nil {
			return 0, ctx.Err()
		}
		if err != nil {
			last = err
			continue
		}
		if math.Abs(e-previous) < 1e-12*scale {
			return m.Spacing * (centre + e), nil
		}
		last = fmt.Errorf("radii %g and %g of the coupling differ by %.3g", 2*radius, radius, math.Abs(e-previous))
		previous = e
	}
	return 0, fmt.Errorf("equations of the pairing model at coupling %g of the spacing: %w", g, last)
}

// pairs holds the state of the equations in units of the spacing.
type pairs struct {
	level  []complex128 // 2ε_i/d from their mean
	energy []complex128 // E_α
	g      complex128

	equation []complex128 // F_α = 1 − G S_α
	jacobian *mat.Dense   // ∂F_α/∂E_β as 2×2 real blocks
	lu       mat.LU
	step     []complex128
	tangent  []complex128 // dE_α/dG
	distance []float64    // from E_α to the nearest level or other pair
}

func newPairs(m Model) *pairs {
	p := &pairs{level: make([]complex128, m.Levels), jacobian: mat.NewDense(2*m.Pairs, 2*m.Pairs, nil)}
	for i := range p.level {
		p.level[i] = complex(float64(2*(i+1)-(m.Levels+1)), 0)
	}
	for _, v := range []*[]complex128{&p.energy, &p.equation, &p.step, &p.tangent} {
		*v = make([]complex128, m.Pairs)
	}
	p.distance = make([]float64, m.Pairs)
	return p
}

var errPath = errors.New("the path cannot be followed")

// circle returns E(G) less the centre of the levels, from a path and a circle of
// the given radius.
func (p *pairs) circle(ctx context.Context, g, radius float64) (float64, error) {
	// At weak coupling E_α = 2ε_α − G + O(G²).
	p.g = complex(0, min(radius, 0.01))
	for a := range p.energy {
		p.energy[a] = p.level[a] - p.g
	}
	if !p.correct() {
		return 0, errPath
	}
	top := complex(g, radius)
	for _, corner := range []complex128{complex(0, radius), top} {
		if err := p.follow(ctx, corner); err != nil {
			return 0, err
		}
	}
	// E(G*) = E(G)*: the upper half of the circle is enough. Go down both of its
	// quarters from the top.
	const points = 32
	start := append([]complex128(nil), p.energy...)
	sum := 0.0
	for _, side := range []float64{1, -1} {
		copy(p.energy, start)
		p.g = top
		for k := range points / 4 {
			angle := math.Pi/2 - side*(float64(k)+0.5)*2*math.Pi/points
			if err := p.follow(ctx, complex(g, 0)+cmplx.Rect(radius, angle)); err != nil {
				return 0, err
			}
			for _, e := range p.energy {
				sum += real(e)
			}
		}
	}
	return sum / (points / 2), nil
}

// evaluate fills the equations, their derivatives and the distances.
func (p *pairs) evaluate() {
	g := p.g
	for a, e := range p.energy {
		sum, own, nearest := complex128(0), complex128(0), math.Inf(1)
		for _, x := range p.level {
			r := 1 / (x - e)
			sum += r
			own -= r * r
			nearest = min(nearest, cmplx.Abs(x-e))
		}
		for b, other := range p.energy {
			if b == a {
				continue
			}
			r := 1 / (other - e)
			sum -= 2 * r
			own += 2 * r * r
			nearest = min(nearest, cmplx.Abs(other-e))
			p.set(a, b, -2*g*r*r)
		}
		p.set(a, a, g*own)
		p.equation[a], p.distance[a] = 1-g*sum, nearest
	}
	p.lu.Factorize(p.jacobian)
}

func (p *pairs) set(a, b int, v complex128) {
	p.jacobian.Set(2*a, 2*b, real(v))
	p.jacobian.Set(2*a, 2*b+1, -imag(v))
	p.jacobian.Set(2*a+1, 2*b, imag(v))
	p.jacobian.Set(2*a+1, 2*b+1, real(v))
}

// solve writes J⁻¹ right into out.
func (p *pairs) solve(out, right []complex128) bool {
	v := mat.NewVecDense(2*len(right), nil)
	for a, x := range right {
		v.SetVec(2*a, real(x))
		v.SetVec(2*a+1, imag(x))
	}
	if err := p.lu.SolveVecTo(v, false, v); err != nil {
		if condition := mat.Condition(0); !errors.As(err, &condition) || math.IsInf(float64(condition), 1) {
			return false
		}
	}
	for a := range out {
		out[a] = complex(v.AtVec(2*a), v.AtVec(2*a+1))
	}
	return true
}

// correct solves the equations by Newton's method. It reports failure, with the
// energies spoiled, where a step is not small against the distances.
func (p *pairs) correct() bool {
	for range 8 {
		p.evaluate()
		if !p.solve(p.step, p.equation) {
			return false
		}
		largest := 0.0
		for a, s := range p.step {
			largest = max(largest, cmplx.Abs(s)/p.distance[a])
			p.energy[a] -= s
		}
		switch {
		case !(largest < 0.3):
			return false
		case largest < 1e-9: // squares to less than rounding
			return true
		}
	}
	return false
}

// follow leads the energies to the coupling `to` on a straight line, by tangents
// and corrections. No step moves an energy by more than a fifth of its distance.
func (p *pairs) follow(ctx context.Context, to complex128) error {
	from := append([]complex128(nil), p.energy...)
	right := make([]complex128, len(p.energy))
	length := cmplx.Abs(to - p.g)
	for steps := 0; p.g != to; steps++ {
		if steps == 10000 || ctx.Err() != nil {
			return errPath
		}
		p.evaluate()
		for a, f := range p.equation {
			right[a] = (1 - f) / p.g // −∂F/∂G = S
		}
		if !p.solve(p.tangent, right) {
			return errPath
		}
		for a, t := range p.tangent {
			length = min(length, 0.2*p.distance[a]/cmplx.Abs(t))
		}
		copy(from, p.energy)
		for at := p.g; ; length /= 2 {
			if length < 1e-8 {
				return errPath
			}
			move := to - at
			if cmplx.Abs(move) > length {
				move *= complex(length/cmplx.Abs(move), 0)
				p.g = at + move
			} else {
				p.g = to
			}
			for a := range p.energy {
				p.energy[a] = from[a] + move*p.tangent[a]
			}
			if p.correct() {
				break
			}
		}
		length *= 2
	}
	return nil
}
