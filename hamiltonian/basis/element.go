package basis

import "strings"

// symbols of the elements, in order of atomic number.
const symbols = "H He Li Be B C N O F Ne Na Mg Al Si P S Cl Ar " +
	"K Ca Sc Ti V Cr Mn Fe Co Ni Cu Zn Ga Ge As Se Br Kr " +
	"Rb Sr Y Zr Nb Mo Tc Ru Rh Pd Ag Cd In Sn Sb Te I Xe " +
	"Cs Ba La Ce Pr Nd Pm Sm Eu Gd Tb Dy Ho Er Tm Yb Lu Hf Ta W Re Os Ir Pt Au Hg Tl Pb Bi Po At Rn " +
	"Fr Ra Ac Th Pa U Np Pu Am Cm Bk Cf Es Fm Md No Lr Rf Db Sg Bh Hs Mt Ds Rg Cn Nh Fl Mc Lv Ts Og"

// AtomicNumber returns the number of the element with the symbol, upper or
// lower case; ok is false where there is none.
func AtomicNumber(symbol string) (z int, ok bool) {
	for _, s := range strings.Fields(symbols) {
		z++
		if strings.EqualFold(s, symbol) {
			return z, true
		}
	}
	return 0, false
}

// Symbol returns the symbol of an element, "?" where there is none.
func Symbol(z int) string {
	all := strings.Fields(symbols)
	if z < 1 || z > len(all) {
		return "?"
	}
	return all[z-1]
}
