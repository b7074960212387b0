package job

import (
	"bufio"
	"fmt"
	"io"
	"slices"
)

// Write writes the job as resolved: every key that applies, defaults filled in,
// with a short comment where one helps. It parses back to the same job. A job
// that would not, because it was changed by hand, is an error of type [Problems]
// and nothing is written.
func (j *Job) Write(w io.Writer) error {
	whole, err := j.With()
	if err != nil {
		return err
	}
	out := bufio.NewWriter(w)
	whole.writeTable(out, "")
	for _, table := range tables {
		if table != "measurement" || !whole.usual(table) {
			fmt.Fprintf(out, "\n[%s]\n", table)
			whole.writeTable(out, table)
		}
	}
	return out.Flush()
}

// usual reports whether a table holds nothing but defaults.
func (j *Job) usual(table string) bool {
	return !slices.ContainsFunc(j.written(table), func(f *field) bool { return f.raw(j) != f.def })
}

// writeTable writes keys, values and comments in columns.
func (j *Job) writeTable(out io.Writer, table string) {
	const column = 14 // widest value that sets the column of the comments
	fields := j.written(table)
	keys, values := 0, 0
	for _, f := range fields {
		keys = max(keys, len(f.name))
		if n := len(literal(f.raw(j))); n <= column {
			values = max(values, n)
		}
	}
	for _, f := range fields {
		value := f.raw(j)
		switch text := literal(value); {
		case f.key == "hamiltonian.atoms":
			fmt.Fprintf(out, "%-*s = [  # %s\n", keys, f.name, f.doc)
			for _, row := range value.([]any) {
				fmt.Fprintf(out, "  %s,\n", literal(row))
			}
			fmt.Fprintln(out, "]")
		case f.doc == "":
			fmt.Fprintf(out, "%-*s = %s\n", keys, f.name, text)
		default:
			fmt.Fprintf(out, "%-*s = %-*s  # %s\n", keys, f.name, values, text, f.doc)
		}
	}
}

// written returns the fields of a table that a resolved job shows.
func (j *Job) written(table string) (fields []*field) {
	for i := range schema {
		f := &schema[i]
		if f.table == table && f.against(j, new(report)) == nil && !(f.optional && f.in(j).IsZero()) {
			fields = append(fields, f)
		}
	}
	return fields
}

// values returns the document of the job; derived defaults that no file gave
// are left out, so that they follow the keys they depend on.
func (j *Job) values() map[string]any {
	values := make(map[string]any)
	for _, table := range append([]string{""}, tables...) {
		for _, f := range j.written(table) {
			if j.origin != nil && j.origin.values[f.key] == nil && slices.Contains(derived, f.key) {
				continue
			}
			values[f.key] = f.raw(j)
		}
	}
	return values
}
