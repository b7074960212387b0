package job

import "math"

// atomLimit is the largest number of atoms.
const atomLimit = 1000

// atoms reads [["Be", 0, 0, 0], …] and reports every row at fault.
func (f *field) atoms(raw any, r *report) []Atom {
	list, ok := raw.([]any)
	if !ok || len(list) == 0 || len(list) > atomLimit {
		r.add(f.key, "found %s, expected a list of 1 to %d rows [\"element\", x, y, z]", show(raw), atomLimit)
		return nil
	}
	atoms := make([]Atom, len(list))
	for i, each := range list {
		if !atoms[i].read(each) {
			r.addElement(f.key, i, "found %s as atom %d, expected [\"element\", x, y, z]", show(each), i+1)
		}
	}
	return atoms
}

// read takes one row of the file.
func (a *Atom) read(raw any) bool {
	row, ok := raw.([]any)
	if !ok || len(row) != 4 {
		return false
	}
	for k := range a.X {
		x, ok := number(row[k+1])
		if a.X[k] = x; !ok || !(math.Abs(x) <= 1e6) {
			return false
		}
	}
	a.Symbol, ok = row[0].(string)
	return ok && symbol(a.Symbol)
}

// symbol reports whether s looks like the symbol of an element.
func symbol(s string) bool {
	letter := func(c byte) bool { return c|0x20 >= 'a' && c|0x20 <= 'z' }
	return (len(s) == 1 || len(s) == 2) && letter(s[0]) && letter(s[len(s)-1])
}

// bohr is the Bohr radius in angstrom (CODATA 2018).
const bohr = 0.529177210903

// closest is the least distance of two atoms, in bohr.
const closest = 0.1

// distances reports atoms on top of an earlier one.
func (h *Hamiltonian) distances(key string, r *report) {
	unit := 1.0
	if h.Unit == "angstrom" {
		unit = bohr
	}
	for i, a := range h.Atoms {
		for k, b := range h.Atoms[:i] {
			d := math.Hypot(math.Hypot(a.X[0]-b.X[0], a.X[1]-b.X[1]), a.X[2]-b.X[2])
			if d < closest*unit {
				r.addElement(key, i, "found atoms %d and %d at a distance of %.3g %s, expected at least %.3g",
					k+1, i+1, d, h.Unit, closest*unit)
				break
			}
		}
	}
}
