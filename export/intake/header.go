package intake

import (
	"strings"
	"unicode"
)

// headerDepth is how far down a header is looked for: titles, addresses and legends stand above it.
const headerDepth = 60

// FindHeader finds the row that names the columns: among the first rows the one with most different known headings, and
// of equals the upper. One heading alone makes no header, unless nothing else stands in its row.
func (s Sheet) FindHeader(known func(label string) (column string, ok bool)) (row int, ok bool) {
	best := 0
	for i, cells := range s.Rows[:min(len(s.Rows), headerDepth)] {
		seen := map[string]bool{}
		filled := 0
		for _, c := range cells {
			if c.Text == "" {
				continue
			}
			filled++
			if column, ok := known(c.Text); ok {
				seen[column] = true
			}
		}
		if n := len(seen); n > best && (n >= 2 || filled == 1) {
			best, row = n, i
		}
	}
	return row, best > 0
}

// Label brings a heading to its plain form, so that "Breaker (A)", "breaker a" and "BREAKER_A:" are one: its words in
// lower case joined by _.
func Label(s string) string {
	words := strings.FieldsFunc(strings.ToLower(s), func(r rune) bool { return !unicode.IsLetter(r) && !unicode.IsDigit(r) && r != '#' && r != '№' })
	return strings.Join(words, "_")
}

// Blank tells a row without any text.
func Blank(row []Cell) bool {
	for _, c := range row {
		if c.Text != "" {
			return false
		}
	}
	return true
}
