package job

import (
	"cmp"
	"fmt"
	"slices"
	"strings"
)

// Problem is one violation in a job or survey file.
type Problem struct {
	File string // as named by the caller
	Line int    // from 1; 0 where the value does not come from the file
	Key  string // dotted; "" for the file as a whole
	Text string // what was found and expected, lower case
}

func (p Problem) Error() string {
	if p.Key == "" {
		return p.place() + ": " + p.Text
	}
	return p.place() + ": " + p.Key + ": " + p.Text
}

// place names the file and the line.
func (p Problem) place() string {
	if p.Line == 0 {
		return p.File
	}
	return fmt.Sprintf("%s:%d", p.File, p.Line)
}

// Problems holds every violation, in the order of the file.
type Problems []Problem

// problemLimit is the number of violations written out.
const problemLimit = 50

// Error returns one line for each violation.
func (p Problems) Error() string {
	var b strings.Builder
	for i, each := range p {
		if i == problemLimit {
			fmt.Fprintf(&b, "\n%s: and %d more", each.File, len(p)-i)
			break
		}
		if i > 0 {
			b.WriteByte('\n')
		}
		b.WriteString(each.Error())
	}
	return b.String()
}

// report gathers violations while a file is looked through.
type report struct {
	doc      *document
	problems Problems
	bad      map[string]bool // keys with a violation of their own
}

// add notes a violation at a key.
func (r *report) add(key, format string, args ...any) {
	r.note(key, r.doc.line(key), fmt.Sprintf(format, args...))
}

// addElement notes a violation at an element of a list.
func (r *report) addElement(key string, i int, format string, args ...any) {
	r.note(key, r.doc.line(element(key, i)), fmt.Sprintf(format, args...))
}

func (r *report) note(key string, line int, text string) {
	if r.bad == nil {
		r.bad = make(map[string]bool)
	}
	r.bad[key] = true
	r.problems = append(r.problems, Problem{r.doc.name, line, short(printable(key), 80), text})
}

// fine reports whether none of the keys has been found at fault.
func (r *report) fine(keys ...string) bool {
	return !slices.ContainsFunc(keys, func(k string) bool { return r.bad[k] })
}

// err returns the violations sorted by line, nil if there are none.
func (r *report) err() error {
	if len(r.problems) == 0 {
		return nil
	}
	slices.SortStableFunc(r.problems, func(a, b Problem) int { return cmp.Compare(a.Line, b.Line) })
	return r.problems
}
