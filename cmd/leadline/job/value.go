package job

import (
	"fmt"
	"math"
	"slices"
	"strings"
	"unicode/utf8"
)

const (
	longest    = 4096 // bytes of a text
	axisLimit  = 8    // axes of a lattice
	spaceLimit = 1000 // orbitals of an active space
)

// assign stores in j the value raw of the file: a string, bool, int64, float64
// or list of these. It reports what is wrong with it.
func (f *field) assign(j *Job, raw any, r *report) {
	switch p := f.in(j).Addr().Interface().(type) {
	case *string:
		if s, ok := raw.(string); ok {
			if f.text(s, r) {
				*p = s
			}
			return
		}
	case *bool:
		if b, ok := raw.(bool); ok {
			*p = b
			return
		}
	case **bool:
		if b, ok := raw.(bool); ok {
			*p = &b
			return
		}
	case *int:
		if n, ok := raw.(int64); ok && f.within(float64(n)) {
			*p = int(n)
			return
		}
	case *int64:
		if n, ok := raw.(int64); ok && f.within(float64(n)) {
			*p = n
			return
		}
	case *float64:
		if x, ok := number(raw); ok && f.within(x) {
			*p = x
			return
		}
	case **float64:
		if x, ok := number(raw); ok && f.within(x) {
			*p = &x
			return
		}
	case *Core:
		if n, ok := raw.(int64); ok && f.within(float64(n)) {
			*p = Core(n)
			return
		}
		if raw == "auto" {
			*p = AutoCore
			return
		}
	case *[]int:
		list, ok := listOf[int64](raw, axisLimit)
		for _, n := range list {
			*p = append(*p, int(n))
			ok = ok && f.within(float64(n))
		}
		if ok {
			return
		}
	case *[]bool:
		if list, ok := listOf[bool](raw, axisLimit); ok {
			*p = list
			return
		}
	case *Space:
		n, ok := listOf[int64](raw, 2)
		if ok && len(n) == 2 && n[1] >= 1 && n[1] <= spaceLimit && n[0] >= 1 && n[0] <= 2*n[1] {
			*p = Space{int(n[0]), int(n[1])}
			return
		}
	case *[]Atom:
		*p = f.atoms(raw, r)
		return
	default:
		panic("job: field of a type that no value is read into")
	}
	r.add(f.key, "found %s, expected %s", show(raw), f.expected())
}

// text reports what is wrong with a string, and whether nothing is.
func (f *field) text(s string, r *report) bool {
	switch {
	case len(f.of) > 0 && !slices.Contains(f.of, s):
		hint := ""
		if best := nearest(s, f.of); best != "" {
			hint = fmt.Sprintf("; did you mean %q?", best)
		}
		r.add(f.key, "found %s, expected %s%s", show(s), f.expected(), hint)
	case len(s) > longest:
		r.add(f.key, "found a text of %d bytes, expected at most %d", len(s), longest)
	case !utf8.ValidString(s) || printable(s) != s:
		r.add(f.key, "found %s, expected a text without control characters", show(s))
	case s == "" && f.table != "":
		r.add(f.key, "found an empty text, expected %s", f.expected())
	default:
		return true
	}
	return false
}

// within reports whether a number is finite and inside the bounds.
func (f *field) within(x float64) bool {
	return x > f.above && x >= f.least && x <= f.most && !math.IsInf(x, 0)
}

// expected says what the field takes.
func (f *field) expected() string {
	if len(f.of) > 0 {
		return or(quoted(f.of))
	}
	switch f.in(new(Job)).Addr().Interface().(type) {
	case *string:
		if f.what != "" {
			return f.what
		}
		return "a text"
	case *bool, **bool:
		return "true or false"
	case *int, *int64:
		return "an integer" + f.bounds()
	case *float64, **float64:
		return "a number" + f.bounds()
	case *Core:
		return "\"auto\" or an integer" + f.bounds()
	case *[]int:
		return fmt.Sprintf("a list of 1 to %d integers", axisLimit) + f.bounds()
	case *[]bool:
		return fmt.Sprintf("a list of 1 to %d of true and false", axisLimit)
	case *Space:
		return "[electrons, orbitals], at least 1 of each and at most two electrons to an orbital"
	}
	return "a list of [\"element\", x, y, z]"
}

func (f *field) bounds() string {
	var words []string
	if !math.IsInf(f.above, 0) {
		words = append(words, "above "+plain(f.above))
	}
	if !math.IsInf(f.least, 0) {
		words = append(words, "at least "+plain(f.least))
	}
	if !math.IsInf(f.most, 0) {
		words = append(words, "at most "+plain(f.most))
	}
	if len(words) == 0 {
		return ""
	}
	return " " + strings.Join(words, " and ")
}

// number returns an integer or a float of the file as a float.
func number(raw any) (float64, bool) {
	switch x := raw.(type) {
	case int64:
		return float64(x), true
	case float64:
		return x, true
	}
	return 0, false
}

// listOf returns a list of 1 to most elements of one type.
func listOf[T any](raw any, most int) ([]T, bool) {
	list, ok := raw.([]any)
	if !ok || len(list) == 0 || len(list) > most {
		return nil, false
	}
	all := make([]T, len(list))
	for i, each := range list {
		if all[i], ok = each.(T); !ok {
			return nil, false
		}
	}
	return all, true
}

// raw returns the value of the field in j as the file would hold it.
func (f *field) raw(j *Job) any {
	switch x := f.in(j).Interface().(type) {
	case *bool:
		if x != nil {
			return *x
		}
	case *float64:
		if x != nil {
			return *x
		}
	case int:
		return int64(x)
	case Core:
		if x == AutoCore {
			return "auto"
		}
		return int64(x)
	case []int:
		return anyList(x, func(n int) any { return int64(n) })
	case []bool:
		return anyList(x, func(b bool) any { return b })
	case Space:
		return []any{int64(x.Electrons), int64(x.Orbitals)}
	case []Atom:
		return anyList(x, func(a Atom) any { return []any{a.Symbol, a.X[0], a.X[1], a.X[2]} })
	default: // string, bool, int64, float64
		return x
	}
	return nil
}

func anyList[T any](list []T, each func(T) any) []any {
	all := make([]any, len(list))
	for i, x := range list {
		all[i] = each(x)
	}
	return all
}
