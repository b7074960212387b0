package integral

import "math"

// tables are the index tables of Hermite orders, made once and constant.
// Hermite indices h = (t,u,v) are ordered by degree t+u+v, so that the indices
// up to a lower order are a prefix.
type tables struct {
	steps []step
	sum   [][][]int32 // sum[L][L'][h'·H(L)+h] = place of h+h'
	sign  []float64   // (−1)^(t+u+v)
	boys  *boys
}

// step says how R_h follows from two lower ones:
// R^n_h = x_axis·R^{n+1}_a + factor·R^{n+1}_b.
type step struct {
	axis   int
	a, b   int
	factor float64
}

// hermites returns H(L) = (L+1)(L+2)(L+3)/6, the number of indices up to order L.
func hermites(order int) int { return (order + 1) * (order + 2) * (order + 3) / 6 }

// hermite returns the place of (t,u,v).
func hermite(t, u, v int) int { return hermites(t+u+v-1) + place(t, u, v) }

// newTables makes the tables for pairs up to the order.
func newTables(order int) *tables {
	t := &tables{boys: boysTable()}
	var index [][3]int
	for l := range 2*order + 1 {
		index = append(index, monomials(l)...)
	}
	for _, e := range index {
		s := step{axis: -1}
		// The axis with the lowest non-zero power: one means a single product.
		for axis := range 3 {
			if e[axis] > 0 && (s.axis < 0 || e[axis] < e[s.axis]) {
				s.axis = axis
			}
		}
		if s.axis >= 0 {
			a := e
			a[s.axis]--
			s.a = hermite(a[0], a[1], a[2])
			if a[s.axis] > 0 {
				s.factor = float64(a[s.axis])
				a[s.axis]--
				s.b = hermite(a[0], a[1], a[2])
			}
		}
		t.steps = append(t.steps, s)
		t.sign = append(t.sign, 1-2*float64((e[0]+e[1]+e[2])%2))
	}
	t.sum = make([][][]int32, order+1)
	for bra := range t.sum {
		t.sum[bra] = make([][]int32, order+1)
		for ket := range t.sum[bra] {
			list := make([]int32, 0, hermites(bra)*hermites(ket))
			for _, k := range index[:hermites(ket)] {
				for _, b := range index[:hermites(bra)] {
					list = append(list, int32(hermite(k[0]+b[0], k[1]+b[1], k[2]+b[2])))
				}
			}
			t.sum[bra][ket] = list
		}
	}
	return t
}

// coulomb evaluates the Hermite Coulomb integrals
//
//	R_tuv = ∂^t_x ∂^u_y ∂^v_z F_0(α r²)·scale,   r = (x, y, z)
//
// of a batch (McMurchie and Davidson 1978, eqs. 4.1–4.8): R^n_000 = (−2α)^n
// F_n(αr²), R^n_{t+1,u,v} = x·R^{n+1}_tuv + t·R^{n+1}_{t−1,u,v}. The batch is the
// inner loop of every step.
type coulomb struct {
	tables *tables
	size   int // capacity of the batch
	count  int // members of the batch
	alpha  []float64
	scale  []float64
	r      [3][]float64
	out    []float64 // members × H(order)
	power  []float64
	boys   []float64
	levels [2][]float64
}

// grow makes room for a batch of the size and order.
func (c *coulomb) grow(size, order int) {
	if size > c.size {
		c.size = size
		c.alpha, c.scale, c.power = make([]float64, size), make([]float64, size), make([]float64, size)
		for axis := range 3 {
			c.r[axis] = make([]float64, size)
		}
	}
	if n := c.size * hermites(order); n > len(c.out) {
		c.out = make([]float64, n)
		c.levels[0], c.levels[1] = make([]float64, n), make([]float64, n)
	}
	if n := c.size * (order + 1); n > len(c.boys) {
		c.boys = make([]float64, n)
	}
}

// evaluate fills out for the first count members of the batch.
func (c *coulomb) evaluate(order int) {
	n := c.count
	x, y, z := c.r[0][:n], c.r[1][:n], c.r[2][:n]
	power, alpha := c.power[:n], c.alpha[:n]
	for i := range n {
		c.tables.boys.fill(c.boys[i:], n, order, alpha[i]*(x[i]*x[i]+y[i]*y[i]+z[i]*z[i]))
	}
	copy(power, c.scale[:n])
	for m := range order + 1 {
		row := c.boys[m*n : m*n+n]
		for i := range row {
			row[i] *= power[i]
			power[i] *= -2 * alpha[i]
		}
	}
	current, previous := c.levels[0], c.levels[1]
	copy(current, c.boys[order*n:order*n+n])
	for m := order - 1; m >= 0; m-- {
		current, previous = previous, current
		copy(current, c.boys[m*n:m*n+n])
		for h := 1; h < hermites(order-m); h++ {
			s := &c.tables.steps[h]
			r := c.r[s.axis][:n]
			dst, a := current[h*n:h*n+n], previous[s.a*n:s.a*n+n]
			switch {
			case s.factor == 0:
				for i := range dst {
					dst[i] = r[i] * a[i]
				}
			case s.factor == 1:
				b := previous[s.b*n : s.b*n+n]
				for i := range dst {
					dst[i] = r[i]*a[i] + b[i]
				}
			default:
				b := previous[s.b*n : s.b*n+n]
				for i := range dst {
					dst[i] = r[i]*a[i] + s.factor*b[i]
				}
			}
		}
	}
	total := hermites(order)
	for h := range total {
		row := current[h*n : h*n+n]
		for i, v := range row {
			c.out[i*total+h] = v
		}
	}
}

// chargeScale makes the product of two expansions carry 2π^{5/2}/(pq): each is
// multiplied by it and by 1/p.
var chargeScale = math.Sqrt2 * math.Pow(math.Pi, 1.25)
