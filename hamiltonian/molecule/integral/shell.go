package integral

import (
	"math"
	"slices"
)

// maxL is the largest angular momentum: i functions.
const maxL = 6

// Shell is a contracted shell on a centre.
type Shell struct {
	// Center is in bohr.
	Center [3]float64
	// L is the angular momentum, 0 to 6.
	L int
	// Exponents are in bohr⁻², positive.
	Exponents []float64
	// Coefficients are of normalised primitives, one per exponent, not all zero.
	Coefficients []float64
}

// Nucleus is a point charge.
type Nucleus struct {
	Charge   float64
	Position [3]float64 // bohr
}

// group is a set of shells of one centre with the same exponents.
type group struct {
	center    [3]float64
	exponents []float64
	l         int // largest angular momentum
	shells    []contraction
	functions int
}

// contraction is one shell of a group.
type contraction struct {
	l     int
	coef  []float64 // of unnormalised primitives, normalised sum
	first int       // index of its first function
}

// Functions is a set of contracted Gaussian functions with what is prepared for
// their integrals. It is not changed by its methods, which may be called from
// several goroutines.
type Functions struct {
	count  int
	groups []group
	angles []angular // by angular momentum
	tables *tables
	pairs  []*pair // by order, then falling by largest diagonal integral
	rows   int     // functions pairs that are not negligible
}

// New prepares the functions of the shells, in the order of the shells; see the
// package comment for the order within a shell. It computes the expansions of
// all shell pairs, on all processors. Shells out of the bounds documented at
// [Shell] are a bug of the caller and panic. The shells are not kept.
func New(shells []Shell, cartesian bool) *Functions {
	f := &Functions{}
	highest := 0
	for _, s := range shells {
		if s.L < 0 || s.L > maxL || len(s.Exponents) == 0 || len(s.Exponents) != len(s.Coefficients) {
			panic("integral: shell of the wrong shape")
		}
		highest = max(highest, s.L)
	}
	for l := range highest + 1 {
		f.angles = append(f.angles, newAngular(l, cartesian))
	}
	for _, s := range shells {
		f.add(s)
	}
	f.tables = newTables(2 * highest)
	f.makePairs()
	return f
}

// Count returns the number of functions.
func (f *Functions) Count() int { return f.count }

// add appends a shell, to a group that it fits or to a new one.
func (f *Functions) add(s Shell) {
	g := slices.IndexFunc(f.groups, func(g group) bool {
		return g.center == s.Center && slices.Equal(g.exponents, s.Exponents)
	})
	if g < 0 {
		g = len(f.groups)
		f.groups = append(f.groups, group{center: s.Center, exponents: slices.Clone(s.Exponents)})
	}
	to := &f.groups[g]
	to.shells = append(to.shells, contraction{l: s.L, coef: normalised(s), first: f.count})
	to.l = max(to.l, s.L)
	to.functions += f.angles[s.L].count
	f.count += f.angles[s.L].count
}

// normalised returns the coefficients of r^l exp(−a r²) that give the radial
// function norm one.
func normalised(s Shell) []float64 {
	c := make([]float64, len(s.Exponents))
	for i, a := range s.Exponents {
		if !(a > 0) {
			panic("integral: exponent is not positive")
		}
		c[i] = s.Coefficients[i] / math.Sqrt(radialNorm(s.L, 2*a))
	}
	norm := 0.0
	for i, a := range s.Exponents {
		for j, b := range s.Exponents {
			norm += c[i] * c[j] * radialNorm(s.L, a+b)
		}
	}
	if !(norm > 0) {
		panic("integral: shell has no norm")
	}
	for i := range c {
		c[i] /= math.Sqrt(norm)
	}
	return c
}
