package intake

import (
	"encoding/xml"
	"fmt"
	"math"
	"strconv"
	"strings"
	"time"

	"tripwell/forms"
)

// worksheet is one sheet while it is read.
type worksheet struct {
	*workbook
	book  *Book
	sheet Sheet
	row   int // of the row being read, from 0
	next  int // column the next cell without a reference has
	cells []Cell
}

func (w *workbook) readSheet(b *Book, s sheetPart) (Sheet, error) {
	ws := &worksheet{workbook: w, book: b, row: -1, sheet: Sheet{Name: s.name, Hidden: s.hidden}}
	err := w.walk(s.file, func(p *walker, e xml.StartElement) error {
		switch e.Name.Local {
		case "row":
			return ws.beginRow(attr(e, "r"))
		case "c":
			return ws.cell(p, e)
		case "mergeCell":
			ws.merge(attr(e, "ref"))
		}
		return nil
	})
	if err != nil {
		return Sheet{}, err
	}
	if err := ws.endRow(); err != nil {
		return Sheet{}, err
	}
	return ws.sheet, ws.spread()
}

// beginRow ends the row before and moves to the next. A row that goes back is damage.
func (ws *worksheet) beginRow(ref string) error {
	if err := ws.endRow(); err != nil {
		return err
	}
	row := ws.row + 1
	if ref != "" {
		n, err := strconv.Atoi(ref)
		if err != nil || n-1 < row || n > 1<<20 {
			return refuse("invalid", "The file is damaged: its rows are not in order. %s", saveAsXLSX)
		}
		row = n - 1
	}
	ws.row, ws.next, ws.cells = row, 0, nil
	return nil
}

// endRow keeps the row if anything stands in it; rows left out before it are blank.
func (ws *worksheet) endRow() error {
	if len(ws.cells) == 0 {
		return nil
	}
	for len(ws.sheet.Rows) <= ws.row {
		if err := ws.room.row(); err != nil {
			return err
		}
		ws.sheet.Rows = append(ws.sheet.Rows, nil)
	}
	ws.sheet.Rows[ws.row] = ws.cells
	ws.cells = nil
	return nil
}

// cell reads one <c>.
func (ws *worksheet) cell(p *walker, e xml.StartElement) error {
	if ws.row < 0 {
		ws.row = 0
	}
	column := ws.next
	if ref := attr(e, "r"); ref != "" {
		c, row, ok := cellAt(ref)
		if !ok || row != ws.row {
			return refuse("invalid", "The file is damaged: a cell stands outside its row. %s", saveAsXLSX)
		}
		column = c
	}
	ws.next = column + 1
	raw, err := readCell(p)
	if err != nil {
		return err
	}
	cell, problem := ws.value(attr(e, "t"), attr(e, "s"), raw)
	if problem != "" {
		ws.problem(column, brief(raw.value), problem)
	}
	if cell.Text == "" {
		return nil
	}
	if err := ws.room.columns(column + 1); err != nil {
		return err
	}
	if more := column + 1 - len(ws.cells); more > 0 {
		if err := ws.room.filled(more); err != nil {
			return err
		}
		ws.cells = append(ws.cells, make([]Cell, more)...)
	}
	ws.cells[column] = cell
	return nil
}

func (ws *worksheet) problem(column int, value, text string) {
	if len(ws.book.Problems) < problemsKept {
		ws.book.Problems = append(ws.book.Problems, Problem{ws.sheet.Name, ws.row + 1, ColumnLetters(column), value, text})
	}
}

// problemsKept bounds the list: nobody reads further, and a hostile file could make millions.
const problemsKept = 10_000

// rawCell is the inside of a <c>: the value as it is kept, the text of an inline string, and whether a formula made it.
type rawCell struct {
	value, inline string
	formula       bool
}

func readCell(p *walker) (c rawCell, err error) {
	for {
		t, err := p.next()
		if err != nil {
			return c, noEnd(err)
		}
		switch t := t.(type) {
		case xml.EndElement:
			return c, nil
		case xml.StartElement:
			text, err := p.text("rPh")
			if err != nil {
				return c, err
			}
			switch t.Name.Local {
			case "v":
				c.value = text
			case "f":
				c.formula = true
			case "is":
				c.inline = text
			}
		}
	}
}

// value makes a cell of what the file keeps (ECMA-376 part 1, 18.18.11 ST_CellType).
func (ws *worksheet) value(kind, style string, raw rawCell) (c Cell, problem string) {
	switch kind {
	case "s":
		n, err := strconv.Atoi(strings.TrimSpace(raw.value))
		if err != nil || n < 0 || n >= len(ws.shared) {
			return c, "The file keeps no text for this cell. Open it in a spreadsheet and save it again."
		}
		return Cell{Text: ws.shared[n]}, ""
	case "inlineStr":
		return Cell{Text: ws.cellText(raw.inline)}, ""
	case "str":
		return Cell{Text: ws.cellText(raw.value)}, ""
	case "e":
		return c, "The formula of this cell has no value. Correct it, or write the value in its place."
	case "b":
		on := isOn(strings.TrimSpace(raw.value))
		return Cell{Text: strings.ToUpper(strconv.FormatBool(on)), Bool: &on}, ""
	case "d":
		return isoDate(strings.TrimSpace(raw.value))
	}
	text := strings.TrimSpace(raw.value)
	if text == "" {
		if raw.formula {
			return c, "The formula of this cell was never worked out. Open the file in a spreadsheet and save it again, or write the value in its place."
		}
		return c, ""
	}
	v, err := strconv.ParseFloat(text, 64)
	if err != nil || math.IsNaN(v) || math.IsInf(v, 0) {
		return Cell{Text: ws.cellText(text)}, ""
	}
	as := asNumber
	if n, err := strconv.Atoi(style); err == nil && n >= 0 && n < len(ws.dates) {
		as = ws.dates[n]
	}
	return ws.number(v, as)
}

// number shows a figure as a spreadsheet would: 15 digits, or as the day its style makes of it.
func (ws *worksheet) number(v float64, as dateKind) (Cell, string) {
	if as == asTime && v >= 1 {
		as = asNumber // a duration over a day
	}
	switch as {
	case asDay:
		day, clock, ok := ws.dayOf(v)
		if !ok {
			break
		}
		text := day.String()
		if clock != "" {
			text += " " + clock
		}
		return Cell{Text: text, Date: &day}, ""
	case asTime:
		if v >= 0 {
			return Cell{Text: clockOf(v)}, ""
		}
	}
	text := strconv.FormatFloat(v, 'g', 15, 64)
	if abs := math.Abs(v); abs == 0 || abs >= 1e-9 && abs < 1e15 {
		rounded, err := strconv.ParseFloat(text, 64)
		if err == nil {
			text = strconv.FormatFloat(rounded, 'f', -1, 64)
		}
	}
	return Cell{Text: text, Number: &v}, ""
}

// dayOf turns a day count into a day: from 1899-12-30, or from 1904-01-01. Counts before 1 March 1900 are a day off in
// the first system, which counts a 29 February 1900 that never was; no device is that old.
func (ws *worksheet) dayOf(v float64) (day forms.Day, clock string, ok bool) {
	if v < 61 && !ws.from04 || v < 0 || v > 2_958_466 {
		return forms.NoDay, "", false
	}
	whole := math.Floor(v)
	start := forms.Date(1899, time.December, 30)
	if ws.from04 {
		start = forms.Date(1904, time.January, 1)
	}
	if part := v - whole; part > 0.5/86400 && part < 1-0.5/86400 {
		clock = clockOf(part)
	}
	return start + forms.Day(whole), clock, true
}

func clockOf(part float64) string {
	s := int(math.Round((part - math.Floor(part)) * 86400))
	if s%60 == 0 {
		return fmt.Sprintf("%02d:%02d", s/3600%24, s/60%60)
	}
	return fmt.Sprintf("%02d:%02d:%02d", s/3600%24, s/60%60, s%60)
}

// isoDate reads the ISO 8601 text of a cell of type d.
func isoDate(s string) (Cell, string) {
	if s == "" {
		return Cell{}, ""
	}
	for _, layout := range []string{"2006-01-02", "2006-01-02T15:04:05", "2006-01-02T15:04:05.999", time.RFC3339} {
		if t, err := time.Parse(layout, s); err == nil {
			day := forms.DayOf(t)
			text := day.String()
			if t.Hour()+t.Minute()+t.Second() > 0 {
				text += " " + t.Format("15:04")
			}
			return Cell{Text: text, Date: &day}, ""
		}
	}
	return Cell{Text: brief(s)}, ""
}

// cellAt reads a reference such as BC14, counted from 0.
func cellAt(ref string) (column, row int, ok bool) {
	i := 0
	for i < len(ref) && ref[i] >= 'A' && ref[i] <= 'Z' {
		if column = column*26 + int(ref[i]-'A') + 1; column > 1<<14 {
			return 0, 0, false
		}
		i++
	}
	row, err := strconv.Atoi(ref[i:])
	if i == 0 || err != nil || row < 1 || row > 1<<20 {
		return 0, 0, false
	}
	return column - 1, row - 1, true
}

// mergesKept bounds the list of merged blocks.
const mergesKept = 20_000

func (ws *worksheet) merge(ref string) {
	from, to, _ := strings.Cut(ref, ":")
	c1, r1, ok1 := cellAt(from)
	c2, r2, ok2 := cellAt(to)
	if !ok1 || !ok2 || c2 < c1 || r2 < r1 || len(ws.sheet.Merges) >= mergesKept {
		return
	}
	ws.sheet.Merges = append(ws.sheet.Merges, Merge{r1, c1, r2 - r1 + 1, c2 - c1 + 1})
}

// spread repeats the text of a block of one column in each of its rows: a building's name merged beside its rooms.
func (ws *worksheet) spread() error {
	for _, m := range ws.sheet.Merges {
		if m.Columns != 1 || m.Rows < 2 || m.Row >= len(ws.sheet.Rows) || m.Column >= len(ws.sheet.Rows[m.Row]) {
			continue
		}
		first := ws.sheet.Rows[m.Row][m.Column]
		if first.Text == "" {
			continue
		}
		for r := m.Row + 1; r < min(m.Row+m.Rows, len(ws.sheet.Rows)); r++ {
			row := ws.sheet.Rows[r]
			if len(row) == 0 {
				continue // a blank row stays blank
			}
			if more := m.Column + 1 - len(row); more > 0 {
				if err := ws.room.filled(more); err != nil {
					return err
				}
				row = append(row, make([]Cell, more)...)
				ws.sheet.Rows[r] = row
			}
			if row[m.Column].Text == "" {
				row[m.Column] = first
			}
		}
	}
	return nil
}
