package job

import (
	"fmt"
	"math"
	"reflect"
	"strconv"
	"strings"
	"time"
	"unicode"
)

// literal writes a value as TOML.
func literal(raw any) string {
	switch x := raw.(type) {
	case string:
		return `"` + strings.NewReplacer(`\`, `\\`, `"`, `\"`).Replace(x) + `"`
	case float64:
		s := strconv.FormatFloat(x, 'g', -1, 64)
		if !strings.ContainsAny(s, ".eIN") {
			s += ".0"
		}
		return strings.ToLower(s) // nan, +inf
	case []any:
		words := make([]string, len(x))
		for i, each := range x {
			words[i] = literal(each)
		}
		return "[" + strings.Join(words, ", ") + "]"
	}
	return fmt.Sprint(raw)
}

// show writes a value of the file in a message.
func show(raw any) string {
	switch x := raw.(type) {
	case string, bool, int64, float64, []any:
		return short(printable(literal(x)), 40)
	case time.Time:
		return "a date or time"
	case map[string]any:
		return "a table"
	case []map[string]any:
		return "a list of tables"
	}
	return "a " + reflect.TypeOf(raw).String()
}

// short cuts a text to n characters.
func short(s string, n int) string {
	if text := []rune(s); len(text) > n {
		return string(text[:n-3]) + "..."
	}
	return s
}

// printable replaces what a terminal could take for a command.
func printable(s string) string {
	return strings.Map(func(r rune) rune {
		if unicode.IsGraphic(r) {
			return r
		}
		return unicode.ReplacementChar
	}, s)
}

// plain writes a bound in a message.
func plain(x float64) string {
	if x == math.Trunc(x) && math.Abs(x) < 1e15 {
		return strconv.FormatInt(int64(x), 10)
	}
	return strconv.FormatFloat(x, 'g', -1, 64)
}
