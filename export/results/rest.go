package results

import (
	"cmp"
	"encoding/csv"
	"fmt"
	"slices"
	"strconv"
	"strings"
)

// restRow is a row that is not in, or not with everything it says.
type restRow struct {
	*row
	column, text string
}

// restCSV writes the rows that are not in, as they stood and with their reasons, so that they can be corrected and
// imported again. Sheets with other headings share the columns that are called the same.
func (p *planner) restCSV() (string, error) {
	if len(p.rest) == 0 {
		return "", nil
	}
	place := map[string]int{}
	heads := []string{"sheet", "row", "left out because", "title above"}
	for _, r := range p.rest {
		for i := range r.sheet.heads {
			h := r.sheet.headOut(i)
			if _, ok := place[h]; !ok && h != "" && !slices.Contains(heads[:4], h) {
				place[h] = len(heads)
				heads = append(heads, h)
			}
		}
	}
	// What is in already with other values is known last; a row's reasons belong together.
	slices.SortStableFunc(p.rest, func(a, b restRow) int { return cmp.Compare(a.seq, b.seq) })
	var out strings.Builder
	w := csv.NewWriter(&out)
	if err := w.Write(safe(heads)); err != nil {
		return "", err
	}
	line, last := []string(nil), (*row)(nil)
	for _, r := range p.rest {
		why := r.text
		if r.column != "" {
			why = r.column + ": " + why
		}
		if r.row == last {
			line[2] += " " + why
			continue
		}
		if line != nil {
			if err := w.Write(safe(line)); err != nil {
				return "", err
			}
		}
		last, line = r.row, make([]string, len(heads))
		line[0], line[1], line[2], line[3] = r.sheetName(), strconv.Itoa(r.n), why, r.section
		for i, c := range r.cells {
			if i < len(r.sheet.heads) {
				if at, ok := place[r.sheet.headOut(i)]; ok {
					line[at] = c.Text
				}
			}
		}
	}
	if err := w.Write(safe(line)); err != nil {
		return "", err
	}
	w.Flush()
	return out.String(), w.Error()
}

// headOut is a heading as a file of its own needs it: a month with the year that a title above the table said.
func (s *sheet) headOut(i int) string {
	if c := s.cols[i]; c.about == aboutMonth && c.year != 0 {
		return fmt.Sprintf("%04d-%02d", c.year, int(c.month))
	}
	return s.heads[i]
}

// safe keeps spreadsheets from taking a text for a formula.
func safe(cells []string) []string {
	out := make([]string, len(cells))
	for i, c := range cells {
		if c != "" && strings.ContainsRune("=+-@\t\r", rune(c[0])) && !unsaid[c] {
			c = "'" + c
		}
		out[i] = c
	}
	return out
}
