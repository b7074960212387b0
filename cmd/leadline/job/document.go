package job

import (
	"cmp"
	"fmt"
	"maps"
	"slices"
	"strings"

	"github.com/BurntSushi/toml"
)

// sizeLimit is the largest file, in bytes; a thousand atoms take 60000.
const sizeLimit = 1 << 18

// document is a file between its text and its meaning.
type document struct {
	name   string
	values map[string]any // by dotted key, those of the schema
	lines  map[string]int // by dotted key, list elements and tables too
	keys   []toml.Key     // every key, in the order of the file
	loose  bool           // values that do not apply are left out, unless in firm
	firm   map[string]bool
}

// readDocument parses the text and returns its tables as nested maps.
func readDocument(data []byte, name string) (*document, map[string]any, error) {
	fail := func(line int, format string, args ...any) error {
		return Problems{{File: name, Line: line, Text: fmt.Sprintf(format, args...)}}
	}
	if len(data) > sizeLimit {
		return nil, nil, fail(0, "found %d bytes, expected at most %d", len(data), sizeLimit)
	}
	lines, line, err := locate(string(data))
	if err != nil {
		return nil, nil, fail(line, "%v", err)
	}
	content := make(map[string]any)
	meta, err := toml.Decode(string(data), &content)
	switch fault, ok := err.(toml.ParseError); {
	case ok:
		return nil, nil, fail(max(1, fault.Position.Line), "found text that is not TOML: %s", strings.ReplaceAll(printable(fault.Message), `'\x00'`, "the end of the file"))
	case err != nil:
		return nil, nil, fail(1, "found text that is not TOML: %s", printable(err.Error()))
	}
	return &document{name: name, lines: lines, keys: meta.Keys()}, content, nil
}

// line returns the line of a key, or of the innermost thing around it that
// has one.
func (d *document) line(key string) int {
	for {
		if n, ok := d.lines[key]; ok || key == "" {
			return n
		}
		key = key[:max(0, strings.LastIndexAny(key, ".["))]
	}
}

// element is the key of an element of a list.
func element(key string, i int) string { return fmt.Sprintf("%s[%d]", key, i) }

// sorted returns the names in a table in the order of their lines.
func (d *document) sorted(table string, content map[string]any) []string {
	return slices.SortedFunc(maps.Keys(content), func(a, b string) int {
		return cmp.Or(cmp.Compare(d.line(join(table, a)), d.line(join(table, b))), cmp.Compare(a, b))
	})
}

// fill takes the values of the schema out of the tables and reports all else.
func (d *document) fill(content map[string]any, r *report) {
	d.values = make(map[string]any)
	for _, name := range d.sorted("", content) {
		if !slices.Contains(tables, name) {
			d.fillKey("", name, content[name], r)
			continue
		}
		table, ok := content[name].(map[string]any)
		if !ok {
			r.add(name, "found %s, expected a table [%s]", show(content[name]), name)
			continue
		}
		for _, key := range d.sorted(name, table) {
			d.fillKey(name, key, table[key], r)
		}
	}
}

func (d *document) fillKey(table, name string, raw any, r *report) {
	key := join(table, name)
	switch f := lookup(key); {
	case f == nil:
		r.add(key, "unknown key%s", suggestion(key))
	case f.table != table:
		r.add(key, "found in quotes, expected without them")
	default:
		d.values[key] = raw
	}
}
