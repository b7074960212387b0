package job

import (
	"fmt"
	"maps"
	"slices"
	"strings"
)

// pointLimit is the largest number of points of a survey.
const pointLimit = 10000

// Survey is a series of jobs that differ in a few settings.
type Survey struct {
	Title   string
	Job     string // name of the job file that the points start from
	Vary    []Variation
	Combine string // "grid": every combination; "zip": the first values, the second values, …
}

// Variation is one key and the values it takes, as [Setting] holds them.
type Variation struct {
	Key    string
	Values []any
}

// ParseSurvey reads a survey file as [Parse] reads a job. Whether the values suit
// the job shows when each point is made with [Job.With].
func ParseSurvey(data []byte, name string) (*Survey, error) {
	doc, content, err := readDocument(data, name)
	if err != nil {
		return nil, err
	}
	r := &report{doc: doc}
	s := &Survey{Combine: "grid"}
	for _, key := range doc.sorted("", content) {
		switch raw := content[key]; key {
		case "title":
			readText(raw, key, &s.Title, r)
		case "job":
			readText(raw, key, &s.Job, r)
		case "combine":
			readText(raw, key, &s.Combine, r, "grid", "zip")
		case "vary":
			s.Vary = doc.variations(raw, r)
		default:
			r.add(key, "unknown key%s", surveySuggestion(key))
		}
	}
	if s.Job == "" && r.fine("job") {
		r.add("job", "missing, expected the name of a job file")
	}
	if len(s.Vary) == 0 && len(r.problems) == 0 {
		r.add("vary", `missing, expected a table of job keys and lists, such as "trial.noise" = [0, 0.1]`)
	}
	if len(r.problems) == 0 {
		s.check(r)
	}
	if err := r.err(); err != nil {
		return nil, err
	}
	return s, nil
}

// readText reads a text as the key of the same kind in a job would be.
func readText(raw any, key string, to *string, r *report, of ...string) {
	f := field{key: key, of: of}
	s, ok := raw.(string)
	switch {
	case !ok && of != nil:
		r.add(key, "found %s, expected %s", show(raw), or(quoted(of)))
	case !ok:
		r.add(key, "found %s, expected a text", show(raw))
	case f.text(s, r):
		*to = s
	}
}

// surveySuggestion is the second half of a message about an unknown key.
func surveySuggestion(key string) string {
	if f := lookup(key); f != nil || slices.Contains(tables, key) {
		return `; keys of the job go into [vary], as "table.key" = [values]`
	}
	if best := nearest(key, []string{"title", "job", "vary", "combine"}); best != "" {
		return "; did you mean " + best + "?"
	}
	return "; expected job, vary, combine or title"
}

// variations reads [vary] in the order of the file; keys may be quoted or not.
func (d *document) variations(raw any, r *report) (all []Variation) {
	content, ok := raw.(map[string]any)
	if !ok {
		r.add("vary", "found %s, expected a table of job keys and lists", show(raw))
		return nil
	}
	flat := make(map[string]any)
	flatten(flat, "", content)
	place := make(map[string]int)
	for i, k := range slices.Backward(d.keys) {
		place[strings.Join(k, ".")] = i
	}
	order := slices.SortedFunc(maps.Keys(flat), func(a, b string) int {
		return place[join("vary", a)] - place[join("vary", b)]
	})
	for _, key := range order {
		at := join("vary", key)
		f := lookup(key)
		if f == nil {
			r.add(at, "unknown key%s", suggestion(key))
			continue
		}
		list, ok := flat[key].([]any)
		if !ok || len(list) == 0 {
			r.add(at, "found %s, expected a list of values", show(flat[key]))
			continue
		}
		v := Variation{Key: key}
		for i, each := range list {
			j, trial := new(Job), &report{doc: d}
			if f.assign(j, each, trial); len(trial.problems) > 0 {
				r.addElement(at, i, "value %d: %s", i+1, trial.problems[0].Text)
				continue
			}
			v.Values = append(v.Values, f.raw(j))
		}
		all = append(all, v)
	}
	return all
}

// flatten gathers the values of nested tables by dotted key.
func flatten(flat map[string]any, table string, content map[string]any) {
	for name, raw := range content {
		key := join(table, name)
		if inner, ok := raw.(map[string]any); ok && lookup(key) == nil && len(inner) > 0 {
			flatten(flat, key, inner)
			continue
		}
		flat[key] = raw
	}
}

// check counts the points and looks for one that comes twice.
func (s *Survey) check(r *report) {
	total := 1
	for _, v := range s.Vary {
		n, first := len(v.Values), s.Vary[0]
		if s.Combine == "zip" && n != len(first.Values) {
			r.add(join("vary", v.Key), `found %d values, expected %d, as %s has: combine is "zip"`, n, len(first.Values), first.Key)
			return
		}
		if s.Combine == "zip" {
			total = n
		} else {
			total *= n
		}
		if total > pointLimit {
			r.add("vary", "found more than %d points, expected fewer", pointLimit)
			return
		}
	}
	seen := make(map[string]int)
	for i, point := range s.Points() {
		label := fmt.Sprint(point)
		if before := seen[label]; before > 0 {
			r.add("vary", "found points %d and %d alike, %s, expected each once", before, i+1, printable(label))
			return
		}
		seen[label] = i + 1
	}
}

// Points returns the settings of each point in order; of a grid, the last key
// varies fastest.
func (s *Survey) Points() [][]Setting {
	if s.Combine == "zip" {
		points := make([][]Setting, len(s.Vary[0].Values))
		for i := range points {
			for _, v := range s.Vary {
				points[i] = append(points[i], Setting{v.Key, v.Values[i]})
			}
		}
		return points
	}
	points := [][]Setting{nil}
	for _, v := range s.Vary {
		var next [][]Setting
		for _, p := range points {
			for _, value := range v.Values {
				next = append(next, append(slices.Clone(p), Setting{v.Key, value}))
			}
		}
		points = next
	}
	return points
}
