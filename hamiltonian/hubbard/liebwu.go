package hubbard

import (
	"fmt"
	"math"

	"gonum.org/v1/gonum/mat"
)

// LiebWu returns the exact ground-state energy of the repulsive model on a ring of
// L sites with N = up + down electrons, from the equations of Lieb & Wu, Phys. Rev.
// Lett. 20, 1445 (1968), with t = 1 and u = U/t:
//
//	L k_j = 2π I_j − 2 Σ_α atan(4 (sin k_j − Λ_α)/u)
//	2 Σ_j atan(4 (Λ_α − sin k_j)/u) = 2π J_α + 2 Σ_β atan(2 (Λ_α − Λ_β)/u)
//	E = −2 Σ_j cos k_j
//
// with consecutive quantum numbers I_j (integers for an even number of down
// electrons, else half-odd) and J_α (integers for odd N − N_down, else half-odd),
// α = 1 … N_down. They are real and symmetric about zero, and the state not
// degenerate, for odd numbers of up and of down electrons and for half filling of
// an even ring; other fillings are refused. The energy scales with t.
func LiebWu(sites, up, down int, hopping, repulsion float64) (float64, error) {
	n := up + down
	switch {
	case sites < 3:
		return 0, fmt.Errorf("ring has %d sites, expected at least 3", sites)
	case !(hopping > 0) || !(repulsion > 0) || !finite(hopping) || !finite(repulsion):
		return 0, fmt.Errorf("hopping %v and repulsion %v, expected positive numbers", hopping, repulsion)
	case up < down || down < 1 || n > sites:
		return 0, fmt.Errorf("%d up and %d down electrons, expected up ≥ down ≥ 1 and at most %d (one per site) together", up, down, sites)
	case !(up%2 == 1 && down%2 == 1) && !(up == down && n == sites):
		return 0, fmt.Errorf("%d up and %d down electrons on %d sites, expected odd numbers of both or half filling", up, down, sites)
	}
	r := &roots{sites: float64(sites), charge: consecutive(n, down%2 != 0), spin: consecutive(down, (n-down)%2 == 0)}
	k := make([]float64, n)
	for j := range k {
		k[j] = 2 * math.Pi * r.charge[j] / r.sites
	}
	x := append(k, make([]float64, down)...)
	// Strong repulsion is the easy end: Λ scales with u. Go down from there.
	target := repulsion / hopping
	for u := max(16, target); ; u = max(target, 0.7*u) {
		r.u = u
		if err := r.newton(x); err != nil {
			return 0, err
		}
		if u == target {
			break
		}
	}
	energy := 0.0
	for _, k := range x[:n] {
		energy -= 2 * hopping * math.Cos(k)
	}
	return energy, nil
}

// consecutive returns n numbers one apart, symmetric about zero where their kind,
// integers or half-odd, allows it, else shifted up by one half.
func consecutive(n int, half bool) []float64 {
	first := -float64(n-1) / 2
	if (n%2 == 0) != half {
		first += 0.5
	}
	out := make([]float64, n)
	for i := range out {
		out[i] = first + float64(i)
	}
	return out
}

// roots holds the equations for x = (k, 4Λ/u).
type roots struct {
	sites, u     float64
	charge, spin []float64 // I, J
}

// residual writes the equations' left minus right sides, and their derivatives if
// the matrix is not nil.
func (r *roots) residual(x, out []float64, d *mat.Dense) float64 {
	n, m := len(r.charge), len(r.spin)
	k, lambda := x[:n], x[n:]
	if d != nil {
		d.Zero()
	}
	add := func(i, j int, v float64) {
		if d != nil {
			d.Set(i, j, d.At(i, j)+v)
		}
	}
	for j := range k {
		out[j] = r.sites*k[j] - 2*math.Pi*r.charge[j]
		add(j, j, r.sites)
	}
	for a := range m {
		out[n+a] = -2 * math.Pi * r.spin[a]
		for b := range m {
			z := (lambda[a] - lambda[b]) / 2
			out[n+a] -= 2 * math.Atan(z)
			if a != b {
				add(n+a, n+a, -1/(1+z*z))
				add(n+a, n+b, 1/(1+z*z))
			}
		}
		for j := range k {
			z := 4*math.Sin(k[j])/r.u - lambda[a]
			out[j] += 2 * math.Atan(z)
			out[n+a] -= 2 * math.Atan(z)
			by, dk := 2/(1+z*z), 4*math.Cos(k[j])/r.u
			add(j, j, by*dk)
			add(j, n+a, -by)
			add(n+a, j, -by*dk)
			add(n+a, n+a, by)
		}
	}
	norm := 0.0
	for _, v := range out {
		norm = max(norm, math.Abs(v))
	}
	return norm
}

// newton solves the equations from x, in place, by Newton steps halved until the
// residual falls.
func (r *roots) newton(x []float64) error {
	n := len(x)
	out, trial := make([]float64, n), make([]float64, n)
	d := mat.NewDense(n, n, nil)
	// Sums of n terms of order π, rounded.
	goal := 1e-14 * r.sites
	for range 200 {
		norm := r.residual(x, out, d)
		if norm < goal {
			return nil
		}
		var step mat.VecDense
		if err := step.SolveVec(d, mat.NewVecDense(n, out)); err != nil {
			return fmt.Errorf("roots of the ring at u = %g: %w", r.u, err)
		}
		scale := 1.0
		for ; ; scale /= 2 {
			for i := range trial {
				trial[i] = x[i] - scale*step.AtVec(i)
			}
			if r.residual(trial, out, nil) < norm {
				break
			}
			if scale < 1e-6 {
				if norm < 100*goal { // rounding
					return nil
				}
				return fmt.Errorf("roots of the ring at u = %g do not converge: residual %.3g", r.u, norm)
			}
		}
		copy(x, trial)
	}
	return fmt.Errorf("roots of the ring at u = %g do not converge", r.u)
}
