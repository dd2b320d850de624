package intake

import (
	"crypto/sha256"
	"encoding/hex"
	"slices"
	"strings"
)

// Shape names a row of headings by what it says, whatever the order, case and punctuation: the SHA-256 of its labels,
// sorted, each once. A row of fewer than two has no shape, since any title would have the same.
func Shape(headings []string) (shape string, ok bool) {
	var labels []string
	for _, h := range headings {
		if label := Label(h); label != "" {
			labels = append(labels, label)
		}
	}
	slices.Sort(labels)
	if labels = slices.Compact(labels); len(labels) < 2 {
		return "", false
	}
	sum := sha256.Sum256([]byte(strings.Join(labels, "\n")))
	return hex.EncodeToString(sum[:]), true
}

// Shapes are those of all rows that could be the headings of a sheet, found or not: what was kept for them is offered
// before anybody said where they stand.
func (b *Book) Shapes() map[string]bool {
	shapes := map[string]bool{}
	for _, s := range b.Sheets {
		for _, row := range s.Rows[:min(len(s.Rows), headerDepth)] {
			if shape, ok := Shape(cellTexts(row)); ok {
				shapes[shape] = true
			}
		}
	}
	return shapes
}

func cellTexts(row []Cell) []string {
	out := make([]string, len(row))
	for i, c := range row {
		out[i] = c.Text
	}
	return out
}
