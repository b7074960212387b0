package meanfield

import (
	"context"
	"math"

	"gonum.org/v1/gonum/floats"
)

// smallestRadius is the trust radius, in scaled angles, at which Newton's method
// gives up.
const smallestRadius = 1e-9

// newton goes downhill by a trust-region Newton method whose steps come from
// conjugate gradients truncated at the region's edge or at negative curvature
// (Steihaug, SIAM J. Numer. Anal. 20, 626 (1983)), in angles scaled by the
// orbital-energy differences. The energy never rises by more than rounding. It
// returns the last point and the number of Newton steps; the caller looks at
// the gradient.
func (p *problem) newton(ctx context.Context, start *point, tolerance float64, limit int) (*point, int, error) {
	pt := p.canonical(start)
	g, scale := make([]float64, p.size), make([]float64, p.size)
	step, hstep := make([]float64, p.size), make([]float64, p.size)
	radius := 0.5
	for iteration := range limit {
		if err := ctx.Err(); err != nil {
			return nil, iteration, err
		}
		p.gradient(pt, g)
		norm := floats.Norm(g, 2)
		if norm < tolerance || math.IsNaN(norm) {
			return pt, iteration, nil
		}
		p.diagonal(pt, scale)
		for i, d := range scale {
			scale[i] = 1 / math.Sqrt(max(math.Abs(d), 0.1))
		}
		edge := p.steihaug(pt, g, scale, radius, step, hstep)
		predicted := floats.Dot(g, step) + 0.5*floats.Dot(step, hstep)
		next := p.at(p.rotate(pt.c, step))
		change := next.energy - pt.energy
		if math.Abs(predicted) < 1e-12*max(1, math.Abs(pt.energy)) {
			// The change drowns in rounding: judge by the gradient.
			p.gradient(next, hstep)
			if floats.Norm(hstep, 2) < norm {
				pt = p.canonical(next)
			} else if radius = 0.25 * min(radius, scaledNorm(step, scale)); radius < smallestRadius {
				return pt, iteration, nil
			}
			continue
		}
		ratio := change / predicted
		switch {
		case !(ratio >= 0.25):
			radius = 0.25 * min(radius, scaledNorm(step, scale))
		case ratio > 0.75 && edge:
			radius = min(2*radius, 3)
		}
		if ratio > 1e-3 {
			pt = p.canonical(next)
		} else if radius < smallestRadius {
			return pt, iteration, nil
		}
	}
	return pt, limit, nil
}

func scaledNorm(x, scale []float64) float64 {
	sum := 0.0
	for i, v := range x {
		sum += v * v / (scale[i] * scale[i])
	}
	return math.Sqrt(sum)
}

// steihaug minimises g·x + ½ x·Hx over |x/scale| ≤ radius, roughly, into x, with
// Hx in hx. It reports whether the edge was reached.
func (p *problem) steihaug(pt *point, g, scale []float64, radius float64, x, hx []float64) bool {
	n := p.size
	z, hz := make([]float64, n), make([]float64, n) // scaled solution and H z
	r, d, hd := make([]float64, n), make([]float64, n), make([]float64, n)
	for i := range r {
		r[i] = -scale[i] * g[i]
	}
	copy(d, r)
	rr := floats.Dot(r, r)
	target := math.Sqrt(rr) * min(0.1, math.Sqrt(math.Sqrt(rr)))
	edge := false
	for range 40 {
		for i := range d {
			x[i] = scale[i] * d[i]
		}
		p.hessian(pt, x, hd)
		floats.Mul(hd, scale)
		curvature := floats.Dot(d, hd)
		alpha := rr / curvature
		zd, dd, zz := floats.Dot(z, d), floats.Dot(d, d), floats.Dot(z, z)
		if curvature <= 0 || zz+2*alpha*zd+alpha*alpha*dd >= radius*radius {
			alpha = (-zd + math.Sqrt(zd*zd+dd*(radius*radius-zz))) / dd
			floats.AddScaled(z, alpha, d)
			floats.AddScaled(hz, alpha, hd)
			edge = true
			break
		}
		floats.AddScaled(z, alpha, d)
		floats.AddScaled(hz, alpha, hd)
		floats.AddScaled(r, -alpha, hd)
		next := floats.Dot(r, r)
		if math.Sqrt(next) < target {
			break
		}
		floats.Scale(next/rr, d)
		floats.Add(d, r)
		rr = next
	}
	for i := range z {
		x[i], hx[i] = scale[i]*z[i], hz[i]/scale[i]
	}
	return edge
}
