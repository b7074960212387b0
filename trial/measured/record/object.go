package record

import (
	"bytes"
	"encoding/json"
	"errors"
	"io"
	"strings"
	"unicode/utf8"
)

// object splits one JSON object into its members, refusing what plain decoders
// let pass: repeated keys at any depth, text after the object, invalid UTF-8.
// A NaN or an infinity, which JSON cannot write, is told from other bad syntax.
func object(line []byte) (map[string]json.RawMessage, *Error) {
	if !utf8.Valid(line) {
		return nil, refusef(CodeJSON, "line is not valid UTF-8")
	}
	var raw json.RawMessage
	if err := json.Unmarshal(line, &raw); err != nil {
		var syntax *json.SyntaxError
		if errors.As(err, &syntax) {
			if word := wordAround(line, int(syntax.Offset)-1); nonFinite(word) {
				return nil, refusef(CodeNumber, "number is %s, expected a finite one", word)
			}
		}
		return nil, refusef(CodeJSON, "line is not a JSON object: %v", err)
	}
	d := json.NewDecoder(bytes.NewReader(line))
	d.UseNumber()
	if key, err := repeatedKey(d); err != nil && err != io.EOF {
		return nil, refusef(CodeJSON, "line is not a JSON object: %v", err)
	} else if key != nil {
		return nil, refusef(CodeJSON, "key %.80q appears twice in one object", *key)
	}
	var members map[string]json.RawMessage
	if err := json.Unmarshal(line, &members); err != nil || members == nil {
		return nil, refusef(CodeJSON, "line is %.40q, expected a JSON object", line)
	}
	return members, nil
}

// repeatedKey returns the first key that one object holds twice, or nil.
func repeatedKey(d *json.Decoder) (*string, error) {
	type level struct {
		keys map[string]bool // nil in an array
		key  bool            // the next string is a key
	}
	var stack []level
	for {
		t, err := d.Token()
		if err != nil {
			return nil, err
		}
		top := len(stack) - 1
		switch t := t.(type) {
		case json.Delim:
			switch t {
			case '{':
				stack = append(stack, level{keys: make(map[string]bool), key: true})
			case '[':
				stack = append(stack, level{})
			default:
				stack = stack[:top]
				top--
				if top >= 0 {
					stack[top].key = true
				}
			}
			continue
		case string:
			if top >= 0 && stack[top].keys != nil && stack[top].key {
				if stack[top].keys[t] {
					return &t, nil
				}
				stack[top].keys[t] = true
				stack[top].key = false
				continue
			}
		}
		if top >= 0 {
			stack[top].key = true
		}
	}
}

// wordAround returns the run of letters that holds byte i of line.
func wordAround(line []byte, i int) string {
	letter := func(j int) bool {
		return j >= 0 && j < len(line) && (line[j]|0x20 >= 'a' && line[j]|0x20 <= 'z')
	}
	if !letter(i) {
		return ""
	}
	lo, hi := i, i+1
	for letter(lo - 1) {
		lo--
	}
	for letter(hi) {
		hi++
	}
	return string(line[lo:min(hi, lo+20)])
}

func nonFinite(word string) bool {
	switch strings.ToLower(word) {
	case "nan", "inf", "infinity":
		return true
	}
	return false
}
