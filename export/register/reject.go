package register

import (
	"encoding/csv"
	"errors"
	"fmt"
	"io"
	"slices"
	"strconv"
	"strings"

	"github.com/xuri/excelize/v2"

	"tripwell/export/intake"
)

// Reject is a row that was left out, as it stands in the file, with what is wrong in it.
type Reject struct {
	Sheet    string   `json:"sheet"`
	Row      int      `json:"row"`
	Site     string   `json:"site,omitempty"` // code of its sheet's site, where no column names it
	Headings []string `json:"headings"`
	Cells    []string `json:"cells"`
	Reason   string   `json:"reason"`
}

// Rejects are the rows that were left out, in the order of the file.
func (p *Prepared) Rejects() []Reject {
	at := map[RowAt]int{}
	var out []Reject
	for _, problem := range p.Report.Problems {
		if !problem.Skipped {
			continue
		}
		key := RowAt{problem.Sheet, problem.Row}
		reason := problem.Text
		if problem.Column != "" {
			reason = problem.Column + ": " + reason
		}
		if i, ok := at[key]; ok {
			out[i].Reason += "\n" + reason
			continue
		}
		at[key] = len(out)
		reject := Reject{Sheet: problem.Sheet, Row: problem.Row, Reason: reason, Cells: p.Reading.rejected(problem.Sheet, problem.Row)}
		for _, t := range p.Reading.Tables {
			if t.Sheet == problem.Sheet && t.Header > 0 {
				reject.Headings = p.Reading.rejected(t.Sheet, t.Header)
				if !t.HasSite {
					reject.Site = t.Site
				}
			}
		}
		out = append(out, reject)
	}
	// In the order of the file: problems between rows were found after those within a row.
	sheets := map[string]int{}
	for i, t := range p.Reading.Tables {
		sheets[t.Sheet] = i
	}
	slices.SortStableFunc(out, func(a, b Reject) int {
		if a.Sheet != b.Sheet {
			return sheets[a.Sheet] - sheets[b.Sheet]
		}
		return a.Row - b.Row
	})
	return out
}

// Headings of what a file of rejected rows adds; an import reads past them.
const (
	rejectSheet  = "Sheet"
	rejectRow    = "Row"
	rejectReason = "What to correct"
	rejectSite   = "Site code"
)

// rejectTable puts rows of several sheets under one row of headings. Corrected, the table can be imported as it is.
func rejectTable(rejects []Reject) [][]string {
	head := []string{rejectSheet, rejectRow, rejectReason}
	place := map[string]int{}
	column := func(label, heading string) int {
		i, ok := place[label]
		if !ok {
			i = len(head)
			place[label], head = i, append(head, heading)
		}
		return i
	}
	if slices.ContainsFunc(rejects, func(r Reject) bool { return r.Site != "" }) {
		column(intake.Label(rejectSite), rejectSite)
	}
	rows := make([][]string, 0, len(rejects)+1)
	rows = append(rows, nil)
	for _, r := range rejects {
		row := []string{r.Sheet, strconv.Itoa(r.Row), r.Reason}
		put := func(i int, text string) {
			for len(row) <= i {
				row = append(row, "")
			}
			row[i] = text
		}
		if r.Site != "" {
			put(column(intake.Label(rejectSite), rejectSite), r.Site)
		}
		seen := map[string]int{}
		for i, text := range r.Cells {
			heading := ""
			if i < len(r.Headings) {
				heading = r.Headings[i]
			}
			label := intake.Label(heading)
			if label == "sheet" || label == "row" || label == "what_to_correct" {
				continue // of an earlier file of rows to correct
			}
			// A heading twice, or none, is one of its own: [C].
			if seen[label]++; label == "" || seen[label] > 1 {
				label = fmt.Sprintf("%s\x1f%d", label, i)
			}
			put(column(label, heading), text)
		}
		rows = append(rows, row)
	}
	rows[0] = head
	return rows
}

// WriteRejectsCSV writes the rows that were left out as CSV: UTF-8 with a byte order mark, by which spreadsheets know it.
// A text that a spreadsheet would take for a formula gets an apostrophe in front.
func WriteRejectsCSV(w io.Writer, rejects []Reject) error {
	if _, err := io.WriteString(w, "\uFEFF"); err != nil {
		return err
	}
	c := csv.NewWriter(w)
	c.UseCRLF = true
	for _, row := range rejectTable(rejects) {
		for i, text := range row {
			row[i] = noFormula(text)
		}
		if err := c.Write(row); err != nil {
			return err
		}
	}
	c.Flush()
	return c.Error()
}

// noFormula keeps a spreadsheet from running a text of a CSV as a formula; figures stay figures.
func noFormula(s string) string {
	if s == "" || !strings.ContainsRune("=+-@\t\r", rune(s[0])) {
		return s
	}
	if _, err := strconv.ParseFloat(s, 64); err == nil {
		return s
	}
	return "'" + s
}

// WriteRejectsXLSX writes the rows that were left out as a workbook. Every cell is text, so nothing in it can run and
// nothing is turned into a date.
func WriteRejectsXLSX(w io.Writer, rejects []Reject) error {
	f := excelize.NewFile()
	defer f.Close()
	const sheet = "Rows to correct"
	if err := f.SetSheetName("Sheet1", sheet); err != nil {
		return err
	}
	text, err := f.NewStyle(&excelize.Style{NumFmt: 49, Alignment: &excelize.Alignment{Vertical: "top"}})
	if err != nil {
		return err
	}
	bold, err := f.NewStyle(&excelize.Style{NumFmt: 49, Font: &excelize.Font{Bold: true}})
	if err != nil {
		return err
	}
	reason, err := f.NewStyle(&excelize.Style{NumFmt: 49, Alignment: &excelize.Alignment{Vertical: "top", WrapText: true}})
	if err != nil {
		return err
	}
	s, err := f.NewStreamWriter(sheet)
	if err != nil {
		return err
	}
	rows := rejectTable(rejects)
	if err := errors.Join(s.SetColWidth(1, 2, 10), s.SetColWidth(3, 3, 60), s.SetColWidth(4, max(4, len(rows[0])), 18), s.SetPanes(&excelize.Panes{Freeze: true, YSplit: 1, TopLeftCell: "A2", ActivePane: "bottomLeft"})); err != nil {
		return err
	}
	for i, row := range rows {
		cells := make([]any, len(row))
		for j, v := range row {
			style := text
			switch {
			case i == 0:
				style = bold
			case j == 2:
				style = reason
			}
			cells[j] = excelize.Cell{StyleID: style, Value: v}
		}
		if err := s.SetRow("A"+strconv.Itoa(i+1), cells); err != nil {
			return err
		}
	}
	if err := s.Flush(); err != nil {
		return err
	}
	return f.Write(w)
}
