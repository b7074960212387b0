package integral

import (
	"math"

	"gonum.org/v1/gonum/mat"
)

// contract adds to a symmetric matrix Σ_h E_h·value(h) of every pair and
// primitive; value holds the integrals of the Hermite Gaussians without the
// factor 1/p and chargeScale that E carries.
func (f *Functions) contract(out *mat.SymDense, value func(p *pair, primitive int, dst []float64)) {
	dst := make([]float64, hermites(2*maxL))
	for _, p := range f.pairs {
		n := hermites(p.order)
		sum := make([]float64, len(p.rows))
		for v := range p.p {
			value(p, v, dst[:n])
			for h := range n {
				if dst[h] == 0 {
					continue
				}
				for r, e := range p.e[(v*n+h)*len(p.rows) : (v*n+h+1)*len(p.rows)] {
					sum[r] += dst[h] * e
				}
			}
		}
		for r, ij := range p.rows {
			out.SetSym(int(ij[0]), int(ij[1]), sum[r])
		}
	}
}

// Overlap returns ∫ χ_p χ_q.
func (f *Functions) Overlap() *mat.SymDense {
	s := mat.NewSymDense(f.count, nil)
	f.contract(s, func(p *pair, v int, dst []float64) {
		clear(dst)
		dst[0] = math.Pow(math.Pi/p.p[v], 1.5) * p.p[v] / chargeScale
	})
	return s
}

// Dipole returns ∫ χ_p r χ_q for the three axes, bohr, about the origin.
func (f *Functions) Dipole() [3]*mat.SymDense {
	var d [3]*mat.SymDense
	for axis := range d {
		d[axis] = mat.NewSymDense(f.count, nil)
		f.contract(d[axis], func(p *pair, v int, dst []float64) {
			clear(dst)
			volume := math.Pow(math.Pi/p.p[v], 1.5) * p.p[v] / chargeScale
			dst[0] = volume * p.center[v][axis]
			if p.order > 0 {
				dst[1+axis] = volume
			}
		})
	}
	return d
}

// Attraction returns −Σ_C Z_C ∫ χ_p χ_q / |r−C|.
func (f *Functions) Attraction(nuclei []Nucleus) *mat.SymDense {
	out := mat.NewSymDense(f.count, nil)
	c := coulomb{tables: f.tables}
	f.contract(out, func(p *pair, v int, dst []float64) {
		clear(dst)
		c.grow(len(nuclei), p.order)
		c.count = len(nuclei)
		for i, nucleus := range nuclei {
			c.alpha[i] = p.p[v]
			c.scale[i] = -nucleus.Charge * 2 * math.Pi / chargeScale
			for axis := range 3 {
				c.r[axis][i] = p.center[v][axis] - nucleus.Position[axis]
			}
		}
		c.evaluate(p.order)
		for i := range nuclei {
			for h := range dst {
				dst[h] += c.out[i*len(dst)+h]
			}
		}
	})
	return out
}

// Kinetic returns −½ ∫ χ_p ∇² χ_q, from the one-dimensional overlaps s_ij:
//
//	t_ij = −½ [ j(j−1)·s_{i,j−2} − 2b(2j+1)·s_ij + 4b²·s_{i,j+2} ]
//
// with b the exponent of the second function (the second derivative of
// x^j exp(−bx²), written out).
func (f *Functions) Kinetic() *mat.SymDense {
	out := mat.NewSymDense(f.count, nil)
	for ga := range f.groups {
		for gb := range ga + 1 {
			a, b := &f.groups[ga], &f.groups[gb]
			// The expansion reaches two beyond the second group's momentum.
			higher := *b
			higher.l += 2
			e := newExpander(f, a, &higher)
			for i, x := range a.exponents {
				for j, y := range b.exponents {
					e.axes(x, y)
					f.addKinetic(out, e, a, b, i, j)
				}
			}
		}
	}
	return out
}

func (f *Functions) addKinetic(out *mat.SymDense, e *expander, a, b *group, i, j int) {
	y := b.exponents[j]
	root := math.Sqrt(math.Pi / (a.exponents[i] + y))
	s := func(axis, k, l int) float64 { return root * e.one[axis][k][l][0] }
	t := func(axis, k, l int) float64 {
		v := -2*y*float64(2*l+1)*s(axis, k, l) + 4*y*y*s(axis, k, l+2)
		if l > 1 {
			v += float64(l*(l-1)) * s(axis, k, l-2)
		}
		return -0.5 * v
	}
	for _, sa := range a.shells {
		for _, sb := range b.shells {
			ma, mb := monomials(sa.l), monomials(sb.l)
			e.monomial = e.monomial[:0]
			for _, p := range ma {
				for _, q := range mb {
					v := t(0, p[0], q[0])*s(1, p[1], q[1])*s(2, p[2], q[2]) +
						s(0, p[0], q[0])*t(1, p[1], q[1])*s(2, p[2], q[2]) +
						s(0, p[0], q[0])*s(1, p[1], q[1])*t(2, p[2], q[2])
					e.monomial = append(e.monomial, v)
				}
			}
			block := e.angular(sa.l, sb.l, 1)
			c := sa.coef[i] * sb.coef[j]
			nb := f.angles[sb.l].count
			for k, v := range block {
				p, q := sa.first+k/nb, sb.first+k%nb
				// Of two shells of one group only one order is counted.
				if a != b || p >= q {
					out.SetSym(p, q, out.At(p, q)+c*v)
				}
			}
		}
	}
}
