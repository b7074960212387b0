package job

import (
	"maps"
	"reflect"
	"slices"
	"strings"
)

// Setting is one value of a job by its dotted key.
type Setting struct {
	Key   string
	Value any
}

// String writes the setting as TOML: `trial.noise = 0.1`.
func (s Setting) String() string { return s.Key + " = " + literal(plainValue(s.Value)) }

// With returns the job with the settings made, checked as a whole as [Parse]
// does; j stays as it is. Values are those of a TOML file or the Go types next to
// them (any integers, floats, strings, bools, slices of these); nil stands for the
// default. Of two keys that exclude each other (atoms and xyz; active and file) the
// one set takes the place of the other; a key of j that no longer applies, because
// another source or kind is set, is dropped. The error is of type [Problems].
func (j *Job) With(settings ...Setting) (*Job, error) { return j.with(true, settings) }

// Vary is [Job.With] for the points of a survey: a setting that plays no part
// under the source or kind of its point is left out, as a key of j is.
func (j *Job) Vary(settings ...Setting) (*Job, error) { return j.with(false, settings) }

func (j *Job) with(firm bool, settings []Setting) (*Job, error) {
	doc := &document{name: "job", values: j.values(), lines: make(map[string]int), loose: true, firm: make(map[string]bool)}
	if j.origin != nil {
		doc.name = j.origin.name
		maps.Copy(doc.lines, j.origin.lines)
	}
	doc.lines[""] = 0
	r := &report{doc: doc}
	for _, s := range settings {
		for _, key := range j.displaced(s.Key) {
			doc.drop(key)
		}
	}
	for _, s := range settings {
		doc.drop(s.Key)
		doc.lines[s.Key] = 0
		switch {
		case lookup(s.Key) == nil:
			r.add(s.Key, "unknown key%s", suggestion(s.Key))
		case s.Value != nil:
			doc.values[s.Key] = plainValue(s.Value)
			doc.firm[s.Key] = firm
		}
	}
	return doc.resolve(r)
}

// drop forgets a key and the lines of its elements.
func (d *document) drop(key string) {
	delete(d.values, key)
	maps.DeleteFunc(d.lines, func(k string, _ int) bool { return k == key || strings.HasPrefix(k, key+"[") })
}

// Files returns the settings of the job that name files, as strings.
func (j *Job) Files() (files []Setting) {
	for key, value := range j.values() {
		if lookup(key).what == fileName {
			files = append(files, Setting{key, value})
		}
	}
	slices.SortFunc(files, func(a, b Setting) int { return strings.Compare(a.Key, b.Key) })
	return files
}

// Set makes one setting as [Job.With] does, in place; on an error the job stays
// as it is.
func (j *Job) Set(key string, value any) error {
	changed, err := j.With(Setting{key, value})
	if err == nil {
		*j = *changed
	}
	return err
}

// displaced returns the keys that give way where key is set.
func (j *Job) displaced(key string) []string {
	switch key {
	case "hamiltonian.atoms":
		if j.Hamiltonian.XYZ != "" {
			return []string{"hamiltonian.xyz", "hamiltonian.unit"}
		}
	case "hamiltonian.xyz":
		return []string{"hamiltonian.atoms", "hamiltonian.unit"}
	case "trial.active":
		return []string{"trial.file"}
	case "trial.file":
		return []string{"trial.active"}
	}
	return nil
}

// plainValue turns Go's numbers and slices into those of a TOML file.
func plainValue(value any) any {
	switch v := reflect.ValueOf(value); {
	case !v.IsValid():
		return value
	case v.CanInt():
		return v.Int()
	case v.CanUint() && v.Uint() <= 1<<63-1:
		return int64(v.Uint())
	case v.CanFloat():
		return v.Float()
	case v.Kind() == reflect.String:
		return v.String()
	case v.Kind() == reflect.Bool:
		return v.Bool()
	case v.Kind() == reflect.Slice, v.Kind() == reflect.Array:
		list := make([]any, v.Len())
		for i := range list {
			list[i] = plainValue(v.Index(i).Interface())
		}
		return list
	}
	return value
}
