package job

import (
	"fmt"
	"slices"
)

// Parse reads a job file; name is how messages call it. The error is of type
// [Problems] and lists every violation; where the text is no TOML, the first
// fault alone.
func Parse(data []byte, name string) (*Job, error) {
	doc, content, err := readDocument(data, name)
	if err != nil {
		return nil, err
	}
	r := &report{doc: doc}
	doc.fill(content, r)
	return doc.resolve(r)
}

// Where says where a dotted key, or an element of a list
// ("hamiltonian.atoms[2]"), stands: "be.toml:12", or the line of the table
// where the file does not give the key.
func (j *Job) Where(key string) string {
	if j.origin == nil {
		return "job"
	}
	return Problem{File: j.origin.name, Line: j.origin.line(key)}.place()
}

// resolve turns the values of the document into a job, defaults filled in, or
// into the violations found.
func (d *document) resolve(r *report) (*Job, error) {
	j := &Job{origin: d}
	for i := range schema {
		f := &schema[i]
		raw, given := d.values[f.key]
		against := f.against(j, r)
		switch {
		case against != nil && given && d.loose && !d.firm[f.key]:
			delete(d.values, f.key)
		case against != nil && given:
			r.add(f.key, "%s", against.explain(j))
		case against != nil:
		case given:
			f.assign(j, raw, r)
		case f.def != nil:
			f.assign(j, f.def, r)
		case f.need && r.fine(f.conditions()...):
			r.add(f.key, "missing, expected %s%s", f.expected(), f.reason(j))
		}
	}
	j.derive(d.values)
	j.check(r)
	if err := r.err(); err != nil {
		return nil, err
	}
	return j, nil
}

// conditions returns the keys on which it depends whether f applies.
func (f *field) conditions() (keys []string) {
	for _, c := range f.when {
		keys = append(keys, c.keys...)
	}
	return keys
}

// reason says why a key that is needed under conditions is needed.
func (f *field) reason(j *Job) string {
	if len(f.when) == 0 {
		return ""
	}
	at := lookup(f.when[0].keys[0])
	return fmt.Sprintf(": %s = %q needs it", at.name, at.in(j))
}

// derived lists the keys with defaults that depend on other keys.
var derived = []string{"hamiltonian.unit", "hamiltonian.periodic", "hamiltonian.decomposition"}

// derive fills in those defaults.
func (j *Job) derive(given map[string]any) {
	h := &j.Hamiltonian
	if given["hamiltonian.unit"] == nil && h.Source == "molecule" {
		h.Unit = "bohr"
		if h.XYZ != "" {
			h.Unit = "angstrom"
		}
	}
	if given["hamiltonian.periodic"] == nil && h.Source == "hubbard" {
		h.Periodic = slices.Repeat([]bool{true}, len(h.Sites))
	}
	if given["hamiltonian.decomposition"] == nil && h.Source == "hubbard" {
		h.Decomposition = "spin" // the one with real fields
		if h.Repulsion < 0 {
			h.Decomposition = "charge"
		}
	}
}
