package job

import (
	"fmt"
	"strconv"
	"strings"
)

// deepest is the deepest nesting of values, and the largest number of parts of
// a key; a survey needs four. The bound also guards the TOML library, whose time
// for a key grows with the square of its parts.
const deepest = 12

// locator finds the line of every key and list element of a TOML text. It
// follows the grammar only as far as that needs: what it lets pass, the TOML
// library judges. It gives up where the library does too, at the first fault.
type locator struct {
	text  string
	at    int // next byte
	line  int // of that byte
	depth int
	lines map[string]int
	err   error // nested too deeply
}

// locate returns the lines by dotted key, elements of lists as key[0]; the
// key "" stands for the whole.
func locate(text string) (lines map[string]int, line int, err error) {
	for _, mark := range []string{"\xef\xbb\xbf", "\xff\xfe", "\xfe\xff"} {
		if strings.HasPrefix(text, mark) {
			text = text[len(mark):]
			break
		}
	}
	l := &locator{text: text, line: 1, lines: map[string]int{"": 1}}
	for table := ""; l.blank(true) && l.at < len(l.text); {
		if l.text[l.at] == '[' {
			var ok bool
			if table, ok = l.header(); !ok {
				break
			}
		} else if !l.assignment(table) {
			break
		}
	}
	return l.lines, l.line, l.err
}

// blank skips blanks and comments, over ends of lines if so asked; true.
func (l *locator) blank(lines bool) bool {
	for l.at < len(l.text) {
		switch c := l.text[l.at]; {
		case c == '#':
			if end := strings.IndexByte(l.text[l.at:], '\n'); end >= 0 {
				l.at += end
			} else {
				l.at = len(l.text)
			}
			continue
		case c == '\n' && lines:
			l.line++
		case c != ' ' && c != '\t' && c != '\r':
			return true
		}
		l.at++
	}
	return true
}

// take steps over c if it is next.
func (l *locator) take(c byte) bool {
	if l.at < len(l.text) && l.text[l.at] == c {
		l.at++
		return true
	}
	return false
}

// mark notes the line of a key; the first place counts.
func (l *locator) mark(key string, line int) {
	if l.lines[key] == 0 {
		l.lines[key] = line
	}
}

// header reads [table] or [[table]].
func (l *locator) header() (table string, ok bool) {
	l.take('[')
	list := l.take('[')
	table, ok = l.key("")
	if !ok || !l.take(']') || list && !l.take(']') {
		return "", false
	}
	return table, true
}

// assignment reads key = value.
func (l *locator) assignment(table string) bool {
	key, ok := l.key(table)
	if !ok || !l.take('=') {
		return false
	}
	l.blank(false)
	return l.value(key)
}

// key reads a dotted key and the blanks after it and marks each of its parts.
func (l *locator) key(table string) (key string, ok bool) {
	key = table
	for parts := 1; ; parts++ {
		if parts > deepest {
			return "", l.tooDeep("a key of more than %d parts")
		}
		l.blank(false)
		start, line := l.at, l.line
		switch {
		case l.at == len(l.text):
			return "", false
		case l.text[l.at] == '"' || l.text[l.at] == '\'':
			if !l.quoted() {
				return "", false
			}
		default:
			for l.at < len(l.text) && bareByte(l.text[l.at]) {
				l.at++
			}
			if l.at == start {
				return "", false
			}
		}
		key = join(key, unquote(l.text[start:l.at]))
		l.mark(key, line)
		l.blank(false)
		if !l.take('.') {
			return key, true
		}
	}
}

func bareByte(c byte) bool {
	return c >= 'a' && c <= 'z' || c >= 'A' && c <= 'Z' || c >= '0' && c <= '9' || c == '_' || c == '-'
}

func join(table, name string) string {
	if table == "" {
		return name
	}
	return table + "." + name
}

// unquote returns the name that a key of the text stands for.
func unquote(text string) string {
	switch {
	case text[0] == '\'':
		return text[1 : len(text)-1]
	case text[0] == '"':
		if s, err := strconv.Unquote(text); err == nil {
			return s
		}
	}
	return text
}

// value reads one value and marks the elements and keys in it.
func (l *locator) value(key string) bool {
	if l.at == len(l.text) {
		return false
	}
	if l.depth++; l.depth > deepest {
		return l.tooDeep("more than %d values in one another")
	}
	defer func() { l.depth-- }()
	switch l.text[l.at] {
	case '"', '\'':
		return l.quoted()
	case '[':
		l.at++
		return l.elements(']', func(i int) bool {
			name := element(key, i)
			l.mark(name, l.line)
			return l.value(name)
		})
	case '{':
		l.at++
		return l.elements('}', func(int) bool { return l.assignment(key) })
	}
	end := strings.IndexAny(l.text[l.at:], ",]}#\r\n")
	if end < 0 {
		end = len(l.text) - l.at
	}
	l.at += end
	return true
}

// elements reads what each reads, separated by commas, up to end.
func (l *locator) elements(end byte, each func(i int) bool) bool {
	for i := 0; ; i++ {
		if l.blank(true); l.take(end) {
			return true
		}
		if l.at == len(l.text) || !each(i) {
			return false
		}
		if l.blank(true); !l.take(',') {
			return l.take(end)
		}
	}
}

// quoted steps over a string of any of the four kinds.
func (l *locator) quoted() bool {
	mark := l.text[l.at : l.at+1]
	long := strings.HasPrefix(l.text[l.at:], strings.Repeat(mark, 3))
	if long {
		mark = strings.Repeat(mark, 3)
	}
	l.at += len(mark)
	for l.at < len(l.text) {
		switch c := l.text[l.at]; {
		case strings.HasPrefix(l.text[l.at:], mark):
			l.at += len(mark)
			for n := 0; long && n < 2 && l.take(mark[0]); n++ { // quotes before the mark
			}
			return true
		case c == '\n':
			l.line++
		case c == '\\' && mark[0] == '"' && l.at+1 < len(l.text) && l.text[l.at+1] != '\n':
			l.at++
		}
		l.at++
	}
	return false
}

func (l *locator) tooDeep(format string) bool {
	l.err = fmt.Errorf("found "+format+", expected fewer", deepest)
	return false
}
