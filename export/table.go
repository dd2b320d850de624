package export

import (
	"bufio"
	"cmp"
	"encoding/json"
	"fmt"
	"io"
	"slices"
	"strings"
	"time"

	"github.com/go-json-experiment/json/jsontext"

	"tripwell/static"
	"tripwell/store"
)

// flatRows takes the rows of a sheet where they go into no worksheet. A cell is added by exactly one call.
type flatRows interface {
	head(b *book, cols []column) error
	begin()
	text(v string)
	number(v float64)
	time(t time.Time) // in the site's zone
	skip()
	end() error
	flush() error
}

// TableNames lists the sheets Table can write.
func TableNames() []string { return sheetOrder[1:] }

// TableFormats lists the ways Table can write them.
func TableFormats() []string { return []string{"csv", "jsonl"} }

// Table writes one sheet of the workbook, with the same columns and rows, as CSV (RFC 4180, UTF-8 with a byte order mark,
// because spreadsheet programs take it for another encoding without one) or as JSON Lines (one object a row, under the
// columns' keys). Rows are streamed.
//
// In CSV a text that a spreadsheet program would take for a formula is led by an apostrophe, see guarded.
func Table(w io.Writer, src WorkbookSource, sheet, format string) error {
	if err := KnownTable(sheet, format); err != nil {
		return err
	}
	words, err := static.ReadWords("en")
	if err != nil {
		return fmt.Errorf("table: %w", err)
	}
	out := bufio.NewWriterSize(w, 1<<16)
	b := &book{words: words, demo: src.Demo, src: &src, named: map[string]string{}, used: map[string]bool{}, mentioned: map[string]int{}, flatKey: sheet, flat: &csvRows{out: out}}
	if format == "jsonl" {
		b.flat = &jsonRows{out: out}
	}
	write := map[string]func() error{"register": b.register, "entries": b.entries, "readings": b.entries, "flags": b.entries, "corrections": b.entries, "imported": b.entries, "due": b.due,
		"limits": b.limits, "defects": b.defects, "compliance": b.compliance, "gaps": b.gaps, "instruments": b.instruments, "plans": b.plans, "refused": b.refused, "sample": b.sample,
		"explained": b.explained, "people": func() error { return cmp.Or(b.entries(), b.plans(), b.people()) }}[sheet]
	if err := write(); err != nil {
		return fmt.Errorf("table %s: %w", sheet, err)
	}
	return out.Flush()
}

// KnownTable refuses a sheet or a format Table cannot write.
func KnownTable(sheet, format string) error {
	if !slices.Contains(TableFormats(), format) {
		return &store.Error{Code: "invalid", Field: "as", Text: fmt.Sprintf("A table can be had as %s; %q is neither.", strings.Join(TableFormats(), " or "), cut(format))}
	}
	if !slices.Contains(TableNames(), sheet) {
		return &store.Error{Code: "invalid", Field: "sheet", Text: fmt.Sprintf("The workbook has no sheet %q that can stand alone. Choose one of: %s.", cut(sheet), strings.Join(TableNames(), ", "))}
	}
	return nil
}

// TableOf reads the store at one moment within a scope and writes one sheet of the workbook.
func TableOf(w io.Writer, s *store.Store, scope store.Scope, ask WorkbookAsk, sheet, format string) error {
	ask.Store, ask.Epoch, ask.Demo = s.ID(), s.Epoch(), s.Demo()
	if ask.Now.IsZero() {
		ask.Now = s.Now()
	}
	return s.View(scope, func(v *store.View) error {
		src, err := FromView(v, ask)
		if err != nil {
			return err
		}
		return Table(w, src, sheet, format)
	})
}

// csvRows writes CSV as RFC 4180 states it: CRLF after every row, fields in quotes where they must be, quotes doubled.
type csvRows struct {
	out *bufio.Writer
	row []byte
	n   int // cells of the row
}

func (c *csvRows) head(b *book, cols []column) error {
	c.begin()
	c.row = append(c.row, "\uFEFF"...)
	for _, col := range cols {
		c.text(b.say("sheet.col." + col.key))
	}
	return c.end()
}

func (c *csvRows) begin() { c.row, c.n = c.row[:0], 0 }

func (c *csvRows) skip() {
	if c.n++; c.n > 1 {
		c.row = append(c.row, ',')
	}
}

func (c *csvRows) text(v string) {
	c.skip()
	v = guarded(v)
	if !strings.ContainsAny(v, ",\"\r\n") && v[0] != ' ' && v[len(v)-1] != ' ' {
		c.row = append(c.row, v...)
		return
	}
	c.row = append(append(append(c.row, '"'), strings.ReplaceAll(v, `"`, `""`)...), '"')
}

func (c *csvRows) number(v float64) {
	c.skip()
	c.row = appendFigure(c.row, v)
}

func (c *csvRows) time(t time.Time) {
	c.skip()
	c.row = t.AppendFormat(c.row, time.DateTime)
}

func (c *csvRows) end() error {
	_, err := c.out.Write(append(c.row, "\r\n"...))
	return err
}

func (c *csvRows) flush() error { return c.out.Flush() }

// formulaLead are the characters a spreadsheet program takes for the beginning of a formula, or drops before one.
const formulaLead = "=+-@\t\r\n＝＋－＠"

// guarded leads a text that would be a formula, or that a reader would take for one led already, by an apostrophe: taking
// one apostrophe away before such a text gives back what was there.
func guarded(v string) string {
	if bare := strings.TrimLeft(v, "' "); bare != "" && strings.ContainsRune(formulaLead, []rune(bare)[0]) {
		return "'" + v
	}
	return v
}

// jsonRows writes one JSON object a row. Every row has every key; what is empty is null.
type jsonRows struct {
	out  *bufio.Writer
	keys [][]byte // ,"key":
	row  []byte
	n    int
}

func (j *jsonRows) head(_ *book, cols []column) error {
	for i, col := range cols {
		key, err := json.Marshal(col.key)
		if err != nil {
			return err
		}
		lead := byte(',')
		if i == 0 {
			lead = '{'
		}
		j.keys = append(j.keys, append(append([]byte{lead}, key...), ':'))
	}
	return nil
}

func (j *jsonRows) begin() { j.row, j.n = j.row[:0], 0 }

func (j *jsonRows) next() {
	j.row = append(j.row, j.keys[min(j.n, len(j.keys)-1)]...)
	j.n++
}

func (j *jsonRows) skip() {
	j.next()
	j.row = append(j.row, "null"...)
}

func (j *jsonRows) text(v string) {
	j.next()
	j.row, _ = jsontext.AppendQuote(j.row, v) // plainText left nothing that is no UTF-8
}

func (j *jsonRows) number(v float64) {
	j.next()
	j.row = appendFigure(j.row, v)
}

func (j *jsonRows) time(t time.Time) {
	j.next()
	j.row = append(t.AppendFormat(append(j.row, '"'), time.RFC3339), '"')
}

func (j *jsonRows) end() error {
	_, err := j.out.Write(append(j.row, "}\n"...))
	return err
}

func (j *jsonRows) flush() error { return j.out.Flush() }

// noRows takes the sheets that are made in one pass with the one asked for.
type noRows struct{}

func (noRows) head(*book, []column) error { return nil }
func (noRows) begin()                     {}
func (noRows) text(string)                {}
func (noRows) number(float64)             {}
func (noRows) time(time.Time)             {}
func (noRows) skip()                      {}
func (noRows) end() error                 { return nil }
func (noRows) flush() error               { return nil }
