package job

import (
	"fmt"
	"math"
	"reflect"
	"slices"
	"strconv"
	"strings"
)

// field is one key of the job file, as its struct tag describes it.
type field struct {
	key      string // dotted: "trial.noise"
	table    string // "" at the top
	name     string
	index    []int  // of the struct field in Job
	what     string // of a text
	of       []string
	when     []condition
	need     bool
	def      any // value of the file, nil if none
	above    float64
	least    float64
	most     float64
	doc      string
	optional bool // absent from a resolved job where its value is zero
}

// condition holds where one of keys, in the table of the field, is one of
// values, or is set at all where there are no values.
type condition struct {
	keys   []string
	values []string
}

// fileName is what a text is that names a file.
const fileName = "a file name"

// schema holds the keys in the order of the structs; never changed.
var schema = fieldsOf(reflect.TypeFor[Job](), "", nil)

// tables holds the names of the tables, in order; never changed.
var tables = tablesOf(schema)

func fieldsOf(t reflect.Type, table string, index []int) (all []field) {
	for i := range t.NumField() {
		s := t.Field(i)
		name, at := s.Tag.Get("toml"), slices.Concat(index, s.Index)
		switch {
		case name == "":
		case table == "" && s.Type.Kind() == reflect.Struct:
			all = append(all, fieldsOf(s.Type, name, at)...)
		default:
			all = append(all, newField(s, table, name, at))
		}
	}
	return all
}

func newField(s reflect.StructField, table, name string, index []int) field {
	f := field{
		key: name, table: table, name: name, index: index,
		what: s.Tag.Get("what"), of: strings.Fields(s.Tag.Get("of")), need: s.Tag.Get("need") != "", doc: s.Tag.Get("doc"),
		above: bound(s, "above", math.Inf(-1)), least: bound(s, "least", math.Inf(-1)), most: bound(s, "most", math.Inf(1)),
	}
	if table != "" {
		f.key = table + "." + name
	}
	for _, text := range strings.Fields(s.Tag.Get("when")) {
		keys, values, valued := strings.Cut(text, "=")
		c := condition{keys: strings.Split(keys, "|")}
		if valued {
			c = condition{keys: []string{keys}, values: strings.Split(values, "|")}
		}
		for i := range c.keys {
			c.keys[i] = table + "." + c.keys[i]
		}
		f.when = append(f.when, c)
	}
	if text, ok := s.Tag.Lookup("default"); ok {
		f.def = defaultValue(s.Type, text)
	}
	f.optional = !f.need && f.def == nil
	return f
}

func bound(s reflect.StructField, tag string, none float64) float64 {
	text, ok := s.Tag.Lookup(tag)
	if !ok {
		return none
	}
	x, err := strconv.ParseFloat(text, 64)
	if err != nil {
		panic("job: bound in a struct tag is no number")
	}
	return x
}

// defaultValue returns what the file would hold.
func defaultValue(t reflect.Type, text string) any {
	switch t.Kind() {
	case reflect.Bool:
		return text == "true"
	case reflect.Int, reflect.Int64:
		n, _ := strconv.ParseInt(text, 10, 64)
		return n
	case reflect.Float64:
		x, _ := strconv.ParseFloat(text, 64)
		return x
	}
	return text
}

func tablesOf(fields []field) (names []string) {
	for _, f := range fields {
		if f.table != "" && !slices.Contains(names, f.table) {
			names = append(names, f.table)
		}
	}
	return names
}

// lookup returns the field of a dotted key, nil if there is none.
func lookup(key string) *field {
	for i := range schema {
		if schema[i].key == key {
			return &schema[i]
		}
	}
	return nil
}

// in returns the value of the field in j, addressable.
func (f *field) in(j *Job) reflect.Value { return reflect.ValueOf(j).Elem().FieldByIndex(f.index) }

// against returns the first condition that keeps the field from playing a part
// in j, nil if there is none; conditions on keys at fault are passed over.
func (f *field) against(j *Job, r *report) *condition {
	for i := range f.when {
		if c := &f.when[i]; r.fine(c.keys...) && !c.holds(j) {
			return c
		}
	}
	return nil
}

// explain says what stands against the condition in j, and what was expected.
func (c *condition) explain(j *Job) string {
	if c.values == nil {
		return fmt.Sprintf("found with no %s, expected only beside %[1]s", or(bare(c.keys)))
	}
	at := lookup(c.keys[0])
	return fmt.Sprintf("found with %s = %q, expected only with %[1]s = %[3]s", at.name, at.in(j), or(quoted(c.values)))
}

func (c *condition) holds(j *Job) bool {
	for _, key := range c.keys {
		v := lookup(key).in(j)
		if c.values == nil && !v.IsZero() || slices.Contains(c.values, v.String()) {
			return true
		}
	}
	return false
}

// bare strips the table off keys.
func bare(keys []string) []string {
	names := make([]string, len(keys))
	for i, key := range keys {
		names[i] = key[strings.LastIndexByte(key, '.')+1:]
	}
	return names
}

func quoted(words []string) []string {
	q := make([]string, len(words))
	for i, w := range words {
		q[i] = strconv.Quote(w)
	}
	return q
}

// or lists words: "a, b or c".
func or(words []string) string {
	if n := len(words) - 1; n > 0 {
		return strings.Join(words[:n], ", ") + " or " + words[n]
	}
	return words[0]
}
