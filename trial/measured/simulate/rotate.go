package simulate

import (
	"math"
	"math/rand/v2"
)

// rotated draws the shots of an orthogonal setting.
func (d *device) rotated(q []float64, shots int, rng *rand.Rand) {
	if len(d.vector) != 1<<d.h.Qubits {
		d.vector = make([]complex128, 1<<d.h.Qubits)
	}
	clear(d.vector)
	for _, c := range d.state {
		d.vector[c.det] = c.amplitude
	}
	flips := circuit(d.vector, q)
	cumulative := make([]float64, len(d.vector))
	sum := 0.0
	for i, v := range d.vector {
		sum += real(v)*real(v) + imag(v)*imag(v)
		cumulative[i] = sum
	}
	for range shots {
		d.read(uint64(pick(cumulative, rng))^flips, rng)
	}
}

// circuit runs the circuit of rotation q on a state vector. Rotations of
// neighbouring columns bring Q to diagonal form; each is the gate
// exp(θ/2 g_μ g_{μ+1}), a rotation about Z for even μ and about XX for odd μ. The
// signs left over flip bits, and are returned.
func circuit(v []complex128, q []float64) (flips uint64) {
	m := int(math.Round(math.Sqrt(float64(len(q)))))
	a := append([]float64(nil), q...)
	for r := range m {
		for c := m - 1; c > r; c-- {
			theta := math.Atan2(a[r*m+c], a[r*m+c-1])
			sin, cos := math.Sincos(theta)
			for i := r; i < m; i++ {
				x, y := a[i*m+c-1], a[i*m+c]
				a[i*m+c-1], a[i*m+c] = cos*x+sin*y, cos*y-sin*x
			}
			rotate(v, c-1, theta)
		}
	}
	for j := range m / 2 {
		if a[2*j*m+2*j]*a[(2*j+1)*m+2*j+1] < 0 {
			flips |= 1 << j
		}
	}
	return flips
}

// rotate applies exp(θ/2 g_μ g_{μ+1}): g_{2p} g_{2p+1} = iZ_p and
// g_{2p+1} g_{2p+2} = iX_pX_{p+1}.
func rotate(v []complex128, mu int, theta float64) {
	sin, cos := math.Sincos(theta / 2)
	if mu%2 == 0 {
		bit := 1 << (mu / 2)
		phases := [2]complex128{complex(cos, sin), complex(cos, -sin)}
		for i := range v {
			one := 0
			if i&bit != 0 {
				one = 1
			}
			v[i] *= phases[one]
		}
		return
	}
	flip := 3 << (mu / 2)
	low := 1 << (mu / 2)
	for i := range v {
		if i&low != 0 {
			continue
		}
		x, y := v[i], v[i^flip]
		v[i] = complex(cos, 0)*x + complex(0, sin)*y
		v[i^flip] = complex(cos, 0)*y + complex(0, sin)*x
	}
}
