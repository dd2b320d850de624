package intake

import (
	"bytes"
	"encoding/csv"
	"errors"
	"fmt"
	"io"
	"regexp"
	"strconv"
	"strings"
	"unicode/utf8"
)

// readText reads a CSV file: RFC 4180, with the separators and quotation marks people really use.
func (b *Book) readText(raw []byte, room *space) error {
	text, told, err := decodeText(raw)
	if err != nil {
		return err
	}
	if isBinary(text) {
		return refuse("invalid", "The file is no text and no XLSX. %s", saveAsXLSX)
	}
	b.Told = append(b.Told, told)
	t := textTable{book: b, room: room, text: text}
	t.findSeparator()
	if err := t.read(); err != nil {
		return err
	}
	b.DecimalComma = t.comma != ',' && commaFigures(t.sheet.Rows)
	if b.DecimalComma {
		b.Told = append(b.Told, "Figures are written with a decimal comma, such as 0,3.")
	}
	for _, row := range t.sheet.Rows {
		for i := range row {
			row[i].Number = plainNumber(row[i].Text, b.DecimalComma)
		}
	}
	b.Sheets = []Sheet{t.sheet}
	return nil
}

type textTable struct {
	book  *Book
	room  *space
	text  []byte
	comma rune
	sheet Sheet
	shown int // rows before t.text, as a spreadsheet shows them
	mends int
}

var separators = []struct {
	mark rune
	name string
}{{',', "a comma"}, {';', "a semicolon"}, {'\t', "a tab"}, {'|', "an upright stroke"}}

// findSeparator takes the mark that most lines have the same number of, and of several the one with more columns. A first
// line "sep=;" says it outright.
func (t *textTable) findSeparator() {
	if line, rest, _ := bytes.Cut(t.text, []byte("\n")); len(line) > 4 && strings.EqualFold(string(line[:4]), "sep=") {
		t.comma, _ = utf8.DecodeRune(line[4:])
		if strings.ContainsRune(",;\t|", t.comma) {
			t.text = rest // a spreadsheet does not show this line, so it counts as no row
			return
		}
	}
	t.comma = ','
	best := 0
	for _, s := range separators {
		counts := map[int]int{}
		for _, n := range markCounts(t.text, byte(s.mark)) {
			if n > 0 {
				counts[n]++
			}
		}
		for n, lines := range counts {
			if score := lines*100 + n; score > best {
				best, t.comma = score, s.mark
			}
		}
	}
	for _, s := range separators {
		if s.mark == t.comma && best > 0 {
			t.book.Told = append(t.book.Told, "Columns are parted by "+s.name+".")
		}
	}
}

// markCounts counts a mark outside quotation marks in each of the first lines.
func markCounts(text []byte, mark byte) (counts []int) {
	quoted, n := false, 0
	for _, c := range text[:min(len(text), 64<<10)] {
		switch {
		case c == '"':
			quoted = !quoted
		case c == mark && !quoted:
			n++
		case c == '\n' && !quoted:
			counts = append(counts, n)
			n = 0
		}
	}
	return append(counts, n)
}

// brokenLines is how many rows with a lost quotation mark are mended one by one before the file is given up.
const brokenLines = 1000

func (t *textTable) read() error {
	for {
		rest, err := t.readOn()
		if err != nil || rest == nil {
			return err
		}
		if t.mends++; t.mends > brokenLines {
			return refuse("invalid", "More than %d rows have a quotation mark that is never closed. %s", brokenLines, saveAsXLSX)
		}
		t.text = rest
	}
}

// readOn reads rows up to the end, or up to a row whose quotation marks are wrong: that row is read as it stands and
// what follows it is left to be read.
func (t *textTable) readOn() (rest []byte, err error) {
	c := csv.NewReader(bytes.NewReader(t.text))
	c.Comma, c.FieldsPerRecord, c.ReuseRecord = t.comma, -1, true
	inside := 0 // line breaks inside cells so far
	for {
		start := c.InputOffset()
		cells, err := c.Read()
		var bad *csv.ParseError
		switch {
		case errors.Is(err, io.EOF):
			return nil, nil
		case errors.As(err, &bad):
			return t.mend(start, bad, inside)
		case err != nil:
			return nil, fmt.Errorf("read rows: %w", err)
		}
		line, _ := c.FieldPos(0)
		if err := t.add(t.shown+line-inside, cells); err != nil {
			return nil, err
		}
		for _, cell := range cells {
			inside += strings.Count(cell, "\n")
		}
	}
}

// mend reads the one line at which quotation marks went wrong as plainly as it stands.
func (t *textTable) mend(start int64, bad *csv.ParseError, inside int) ([]byte, error) {
	rest := t.text[start:]
	skipped := 0
	for len(rest) > 0 && (rest[0] == '\n' || rest[0] == '\r') { // blank lines before the row
		if rest[0] == '\n' {
			skipped++
		}
		rest = rest[1:]
	}
	line, rest, found := bytes.Cut(rest, []byte("\n"))
	c := csv.NewReader(bytes.NewReader(line))
	c.Comma, c.FieldsPerRecord, c.LazyQuotes = t.comma, -1, true
	cells, err := c.Read()
	if err != nil {
		cells = []string{string(line)}
	}
	row := t.shown + bad.StartLine - inside
	if err := t.add(row, cells); err != nil {
		return nil, err
	}
	if strings.Count(string(line), `"`)%2 == 1 && bad.Line != bad.StartLine {
		t.book.Problems = append(t.book.Problems, Problem{Row: row, Value: brief(string(line)), Text: "A quotation mark of this row is never closed; the row was read up to the end of its line. Check the row."})
	}
	t.shown = row
	if !found {
		return nil, nil
	}
	return rest, nil
}

// add puts a row at the place a spreadsheet would show it.
func (t *textTable) add(row int, cells []string) error {
	for len(t.sheet.Rows) < row-1 {
		if err := t.room.row(); err != nil {
			return err
		}
		t.sheet.Rows = append(t.sheet.Rows, nil)
	}
	if err := t.room.row(); err != nil {
		return err
	}
	out := make([]Cell, 0, min(len(cells), t.room.caps.Columns))
	last, filled := 0, 0
	for i, s := range cells {
		if s = strings.TrimSpace(s); s == "" {
			continue
		}
		if err := t.room.columns(i + 1); err != nil {
			return err
		}
		if utf8.RuneCountInString(s) > t.room.caps.Letters {
			s = string([]rune(s)[:t.room.caps.Letters])
			t.book.Problems = append(t.book.Problems, Problem{Row: row, Column: ColumnLetters(i), Value: brief(s), Text: fmt.Sprintf("The cell holds more than %d letters and was cut. Shorten it.", t.room.caps.Letters)})
		}
		out = append(out, make([]Cell, i+1-len(out))...)
		out[i].Text = strings.Clone(strings.ReplaceAll(s, "\r\n", "\n"))
		last, filled = i+1, filled+1
	}
	t.sheet.Rows = append(t.sheet.Rows, out[:last])
	return t.room.filled(last)
}

var commaFigure = regexp.MustCompile(`^[<>+-]?\s?\d+,\d+(\s?\pL{1,4})?$`)
var pointFigure = regexp.MustCompile(`^[<>+-]?\s?\d+\.\d+(\s?\pL{1,4})?$`)

// commaFigures tells whether figures are written with a decimal comma: more such than with a point.
func commaFigures(rows [][]Cell) bool {
	commas, points := 0, 0
	for _, row := range rows {
		for _, c := range row {
			switch {
			case commaFigure.MatchString(c.Text):
				commas++
			case pointFigure.MatchString(c.Text):
				points++
			}
		}
	}
	return commas > points
}

var plainFigure = regexp.MustCompile(`^[+-]?(0|[1-9]\d{0,14})(\.\d{1,15})?$`)

// plainNumber reads a text that is a number and nothing else. 014 is none: it may be a name.
func plainNumber(s string, comma bool) *float64 {
	if len(s) > 32 || s == "" || s[0] > '9' {
		return nil
	}
	if comma {
		if strings.Contains(s, ".") {
			return nil
		}
		s = strings.Replace(s, ",", ".", 1)
	}
	if !plainFigure.MatchString(s) {
		return nil
	}
	v, err := strconv.ParseFloat(s, 64)
	if err != nil {
		return nil
	}
	return &v
}

// brief keeps a quoted value short and printable.
func brief(s string) string {
	s = strings.Join(strings.Fields(strings.ToValidUTF8(s, "\uFFFD")), " ")
	if r := []rune(s); len(r) > 60 {
		return string(r[:60]) + "…"
	}
	return s
}

// ColumnLetters names a column counted from 0 as spreadsheets do: A, Z, AA.
func ColumnLetters(i int) string {
	s := ""
	for i++; i > 0; i = (i - 1) / 26 {
		s = string(rune('A'+(i-1)%26)) + s
	}
	return s
}
