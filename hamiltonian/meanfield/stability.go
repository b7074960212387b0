package meanfield

import (
	"context"
	"math"
	"math/rand/v2"
	"sort"

	"gonum.org/v1/gonum/floats"
	"gonum.org/v1/gonum/mat"
)

const (
	denseHessian   = 48   // sizes up to which the Hessian is diagonalised whole
	unstable       = 1e-6 // a lowest eigenvalue below minus this is an instability
	davidsonLimit  = 80   // iterations
	davidsonSpace  = 30   // vectors before a restart
	davidsonTarget = 1e-5 // residual; the eigenvalue is then right to about its square over the gap
)

// lowestMode returns the lowest eigenvalue of the orbital Hessian at a canonical
// point and its normalised eigenvector, by full diagonalisation or by
// Davidson's method (J. Comput. Phys. 17, 87 (1975)). The starting vectors are
// the two smallest orbital-energy differences and a fixed random vector, which
// has a part in every symmetry.
func (p *problem) lowestMode(ctx context.Context, pt *point) (float64, []float64, error) {
	if p.size == 0 {
		return math.Inf(1), nil, nil
	}
	if p.size <= denseHessian {
		return p.lowestDense(ctx, pt)
	}
	return p.lowestDavidson(ctx, pt)
}

func (p *problem) lowestDavidson(ctx context.Context, pt *point) (float64, []float64, error) {
	diagonal := make([]float64, p.size)
	p.diagonal(pt, diagonal)
	order := make([]int, p.size)
	for i := range order {
		order[i] = i
	}
	sort.SliceStable(order, func(i, j int) bool { return diagonal[order[i]] < diagonal[order[j]] })
	random := rand.New(rand.NewPCG(1, uint64(p.size)))
	noise := make([]float64, p.size)
	for i := range noise {
		noise[i] = random.NormFloat64() / max(0.1, math.Abs(diagonal[i]))
	}
	var basis, images [][]float64
	add := func(v []float64) bool {
		for range 2 {
			for _, b := range basis {
				floats.AddScaled(v, -floats.Dot(b, v), b)
			}
			norm := floats.Norm(v, 2)
			if norm < 1e-12 {
				return false
			}
			floats.Scale(1/norm, v)
		}
		image := make([]float64, p.size)
		p.hessian(pt, v, image)
		basis, images = append(basis, v), append(images, image)
		return true
	}
	add(noise)
	for _, i := range order[:2] {
		unit := make([]float64, p.size)
		unit[i] = 1
		add(unit)
	}
	var value float64
	var vector []float64
	for range davidsonLimit {
		if err := ctx.Err(); err != nil {
			return 0, nil, err
		}
		n := len(basis)
		small := mat.NewSymDense(n, nil)
		for i := range n {
			for j := range i + 1 {
				small.SetSym(i, j, floats.Dot(basis[i], images[j]))
			}
		}
		values, v, ok := eigenvectors(small)
		if !ok {
			return math.NaN(), nil, nil
		}
		value = values[0]
		combine := func(of [][]float64, k int) []float64 {
			sum := make([]float64, p.size)
			for i := range n {
				floats.AddScaled(sum, v.At(i, k), of[i])
			}
			return sum
		}
		vector = combine(basis, 0)
		residual := combine(images, 0)
		floats.AddScaled(residual, -value, vector)
		if norm := floats.Norm(residual, 2); norm < davidsonTarget || value < 0 && norm < 0.02*-value {
			return value, vector, nil
		}
		if n >= davidsonSpace {
			var b, im [][]float64
			for k := range 4 {
				b, im = append(b, combine(basis, k)), append(im, combine(images, k))
			}
			basis, images = b, im
		}
		for i := range residual {
			gap := diagonal[i] - value
			residual[i] /= math.Copysign(max(0.05, math.Abs(gap)), gap)
		}
		if !add(residual) {
			return value, vector, nil
		}
	}
	return value, vector, nil
}

func (p *problem) lowestDense(ctx context.Context, pt *point) (float64, []float64, error) {
	x, hx := make([]float64, p.size), make([]float64, p.size)
	full := mat.NewSymDense(p.size, nil)
	for i := range p.size {
		if err := ctx.Err(); err != nil {
			return 0, nil, err
		}
		x[i] = 1
		p.hessian(pt, x, hx)
		x[i] = 0
		for j := range i + 1 {
			full.SetSym(i, j, hx[j])
		}
	}
	values, v, ok := eigenvectors(full)
	if !ok {
		return math.NaN(), nil, nil
	}
	return values[0], mat.Col(nil, 0, v), nil
}

// downhill returns the lowest of a few points along a direction and its
// opposite, or nil if none lies below the start.
func (p *problem) downhill(pt *point, direction []float64) *point {
	var best *point
	x := make([]float64, p.size)
	for _, angle := range []float64{0.6, 0.2, 0.05, 0.01} {
		for _, sign := range []float64{1, -1} {
			floats.ScaleTo(x, sign*angle, direction)
			next := p.at(p.rotate(pt.c, x))
			limit := pt.energy
			if best != nil {
				limit = best.energy
			}
			if next.energy < limit-1e-13*max(1, math.Abs(limit)) {
				best = next
			}
		}
		if best != nil {
			return best
		}
	}
	return nil
}
