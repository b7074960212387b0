package job

import (
	"slices"
	"strings"
)

// nearest returns the candidate that word was most likely meant to be, "" if
// none is close.
func nearest(word string, candidates []string) string {
	if len(word) > 64 {
		return ""
	}
	low := strings.ToLower(word)
	best, least := "", 1+max(1, len(word)/3)
	for _, c := range candidates {
		if d := distance(low, c); d < least {
			best, least = c, d
		}
	}
	for _, c := range candidates {
		if best == "" && (len(low) >= 3 && strings.HasPrefix(c, low) ||
			len(low) >= 4 && strings.Contains(c, low) || len(c) >= 4 && strings.Contains(low, c)) {
			best = c
		}
	}
	return best
}

// distance is the number of insertions, deletions, replacements and swaps of
// neighbours that lead from a to b (optimal string alignment; Damerau, Commun.
// ACM 7, 171 (1964)), counted in bytes.
func distance(a, b string) int {
	before, last, row := make([]int, len(b)+1), make([]int, len(b)+1), make([]int, len(b)+1)
	for j := range last {
		last[j] = j
	}
	for i := 1; i <= len(a); i++ {
		row[0] = i
		for j := 1; j <= len(b); j++ {
			cost := 1
			if a[i-1] == b[j-1] {
				cost = 0
			}
			row[j] = min(last[j]+1, row[j-1]+1, last[j-1]+cost)
			if i > 1 && j > 1 && a[i-1] == b[j-2] && a[i-2] == b[j-1] {
				row[j] = min(row[j], before[j-2]+1)
			}
		}
		before, last, row = last, row, before
	}
	return last[len(b)]
}

// suggestion is the second half of a message about an unknown dotted key.
func suggestion(key string) string {
	table, name, dotted := strings.Cut(key, ".")
	switch {
	case dotted && slices.Contains(tables, table):
		return suggestionIn(table, name)
	case slices.Contains(tables, key):
		return "; it is a table, expected one of its keys, such as " + keysOf(key)[0]
	case dotted:
		return suggestionIn("", table)
	}
	return suggestionIn("", key)
}

// suggestionIn looks for a name near one that the table lacks.
func suggestionIn(table, name string) string {
	here := keysOf(table)
	if table == "" {
		here = append(here, tables...)
	}
	var all []string
	for _, f := range schema {
		all = append(all, f.name)
		switch {
		case f.name == name && f.table == "":
			return "; " + name + " stands before the first table"
		case f.name == name:
			return "; did you mean " + f.key + "?"
		}
	}
	if best := nearest(name, here); best != "" {
		return "; did you mean " + join(table, best) + "?"
	}
	if best := nearest(name, all); best != "" {
		return suggestionIn(table, best)
	}
	if table == "" {
		return "; expected title or one of the tables " + strings.Join(tables, ", ")
	}
	return "; expected one of " + strings.Join(here, ", ")
}

// keysOf returns the names of the keys in a table.
func keysOf(table string) (names []string) {
	for _, f := range schema {
		if f.table == table {
			names = append(names, f.name)
		}
	}
	return names
}
