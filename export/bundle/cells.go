package bundle

import (
	"archive/zip"
	"bufio"
	"errors"
	"fmt"
	"io"
	"path"
	"regexp"
	"strconv"
	"strings"
)

// sheetPart is a worksheet of a workbook.
type sheetPart struct{ name, file string }

// cells reads the worksheets of an XLSX (ECMA-376 part 1, SpreadsheetML) row by row. It reads what a cell holds, not how a
// program would show it.
type cells struct {
	files  map[string]*zip.File
	sheets []sheetPart
	shared []string
}

// Bounds of one workbook that is read.
const (
	sharedMost   = 384 << 20 // bytes of all shared texts
	sharedEach   = 48        // what a shared text takes besides its bytes
	sheetsMost   = 1_000
	columnsMost  = 16_384
	cellTextMost = 1 << 20
	rowTextMost  = 8 << 20
)

func openCells(in io.ReaderAt, size int64) (*cells, error) {
	archive, err := zip.NewReader(in, size)
	if err != nil {
		return nil, fmt.Errorf("it is no XLSX file: %w", err)
	}
	c := &cells{files: map[string]*zip.File{}}
	for _, f := range archive.File {
		if f.UncompressedSize64 > fileMost || f.UncompressedSize64 > ratioMatters && f.UncompressedSize64/ratioMost > f.CompressedSize64 {
			return nil, fmt.Errorf("its part %s says it is too large to be true", quote(f.Name))
		}
		c.files[strings.TrimPrefix(f.Name, "/")] = f
	}
	for name := range c.files {
		if strings.Contains(strings.ToLower(name), "vbaproject") {
			return nil, errors.New("it holds macros")
		}
	}
	if err := c.home(); err != nil {
		return nil, err
	}
	return c, c.readShared()
}

// walk reads a part.
func (c *cells) walk(name string, start func(e element) error, end func(name string) error, text func(t []byte) error) error {
	f := c.files[name]
	if f == nil {
		return fmt.Errorf("its part %s is missing", name)
	}
	in, err := f.Open()
	if err != nil {
		return err
	}
	defer in.Close()
	m := markup{in: bufio.NewReaderSize(io.LimitReader(in, fileMost), 1<<16)}
	if err := m.walk(start, end, text); err != nil {
		return fmt.Errorf("its part %s: %w", name, err)
	}
	return nil
}

func noEnd(string) error  { return nil }
func noText([]byte) error { return nil }

// home reads the list of worksheets.
func (c *cells) home() error {
	targets := map[string]string{}
	err := c.walk("xl/_rels/workbook.xml.rels", func(e element) error {
		if e.name == "Relationship" {
			target := e.attribute("Target", false)
			if strings.HasPrefix(target, "/") {
				target = strings.TrimPrefix(target, "/")
			} else {
				target = path.Join("xl", target)
			}
			targets[e.attribute("Id", false)] = target
		}
		return nil
	}, noEnd, noText)
	if err != nil {
		return err
	}
	err = c.walk("xl/workbook.xml", func(e element) error {
		if e.name == "sheet" {
			if len(c.sheets) == sheetsMost {
				return fmt.Errorf("it has more than %d sheets", sheetsMost)
			}
			c.sheets = append(c.sheets, sheetPart{e.attribute("name", false), targets[e.attribute("id", true)]})
		}
		return nil
	}, noEnd, noText)
	if err != nil {
		return err
	}
	seen := map[string]bool{}
	for _, s := range c.sheets {
		if seen[s.file] {
			return errors.New("two of its sheets are the same part")
		}
		seen[s.file] = true
	}
	return nil
}

func (c *cells) readShared() error {
	const name = "xl/sharedStrings.xml"
	if c.files[name] == nil {
		return nil
	}
	var one strings.Builder
	in, phonetic, total := false, false, 0
	start := func(e element) error {
		switch e.name {
		case "si":
			one.Reset()
		case "t":
			in = true
		case "rPh":
			phonetic = true
		}
		return nil
	}
	end := func(name string) error {
		switch name {
		case "si":
			if total += one.Len() + sharedEach; total > sharedMost {
				return errors.New("its shared texts are larger than 384 MiB")
			}
			c.shared = append(c.shared, one.String())
		case "t":
			in = false
		case "rPh":
			phonetic = false
		}
		return nil
	}
	return c.walk(name, start, end, func(t []byte) error {
		if in && !phonetic {
			if one.Write(t); one.Len() > cellTextMost {
				return errors.New("it holds a shared text of more than 1 MiB")
			}
		}
		return nil
	})
}

// cell is one that holds something. Value leads with its kind: n number, s text, b yes or no, e error, f where a formula
// stands.
type cell struct {
	column int // from 1
	value  string
}

// rows reads a worksheet; the cells are good until the next row.
func (c *cells) rows(s sheetPart, row func(number int, cells []cell) error) error {
	r := rowReader{cells: c}
	end := func(name string) error {
		if name == "row" {
			return row(r.number, r.row)
		}
		return r.end(name)
	}
	return c.walk(s.file, r.start, end, func(t []byte) error {
		if r.in {
			if r.text = append(r.text, t...); len(r.text) > cellTextMost {
				return fmt.Errorf("row %d holds a text of more than 1 MiB", r.number)
			}
		}
		return nil
	})
}

// rowReader puts the cells of a row together.
type rowReader struct {
	*cells
	number   int
	row      []cell
	column   int
	kind     string
	formula  bool
	in       bool // text that counts is being read
	phonetic bool // how a text is pronounced: no part of it
	text     []byte
	size     int // bytes of the row so far
}

func (r *rowReader) start(e element) error {
	switch e.name {
	case "row":
		r.number++
		if n, err := strconv.Atoi(e.attribute("r", false)); err == nil {
			r.number = n
		}
		r.row, r.column, r.size = r.row[:0], 0, 0
	case "c":
		r.column++
		if n := columnOf(e.attribute("r", false)); n > 0 {
			r.column = n
		}
		if r.column > columnsMost {
			return fmt.Errorf("row %d has a column beyond the last", r.number)
		}
		r.kind, r.formula, r.text = e.attribute("t", false), false, r.text[:0]
	case "f":
		r.formula = true
	case "v", "t":
		r.in = !r.phonetic
	case "rPh":
		r.phonetic = true
	}
	return nil
}

func (r *rowReader) end(local string) error {
	switch local {
	case "v", "t":
		r.in = false
	case "rPh":
		r.phonetic = false
	case "c":
		value, err := r.value()
		if err != nil {
			return err
		}
		if r.formula {
			value = "f" + value
		}
		if r.size += len(value); r.size > rowTextMost || len(r.row) == columnsMost {
			return fmt.Errorf("row %d holds more than a row can", r.number)
		}
		if value != "" {
			r.row = append(r.row, cell{r.column, value})
		}
	}
	return nil
}

func (r *rowReader) value() (string, error) {
	text := string(r.text)
	switch r.kind {
	case "s":
		n, err := strconv.Atoi(strings.TrimSpace(text))
		if err != nil || n < 0 || n >= len(r.shared) {
			return "", fmt.Errorf("row %d names a shared text that is not there", r.number)
		}
		text = r.shared[n]
		fallthrough
	case "inlineStr", "str":
		if text = plain(text); text == "" {
			return "", nil
		}
		return "s" + text, nil
	case "b", "e":
		return r.kind + text, nil
	}
	if text = strings.TrimSpace(text); text == "" {
		return "", nil
	}
	f, err := strconv.ParseFloat(text, 64)
	if err != nil {
		return "n" + text, nil
	}
	// Programs that save a workbook again write 15 digits; times of day are fractions that need more.
	return "n" + strconv.FormatFloat(f, 'g', 13, 64), nil
}

var escaped = regexp.MustCompile(`_x[0-9A-Fa-f]{4}_`)

// plain undoes what writers of XLSX do to control characters and ends of lines.
func plain(text string) string {
	if strings.Contains(text, "_x") {
		text = escaped.ReplaceAllStringFunc(text, func(e string) string {
			n, _ := strconv.ParseUint(e[2:6], 16, 16) // four hexadecimal digits
			return string(rune(n))
		})
	}
	if strings.Contains(text, "\r") {
		text = strings.ReplaceAll(strings.ReplaceAll(text, "\r\n", "\n"), "\r", "\n")
	}
	return text
}

// columnOf reads the letters of a cell's address: A is 1.
func columnOf(address string) (n int) {
	for i := 0; i < len(address); i++ {
		ch := address[i]
		if ch < 'A' || ch > 'Z' {
			break
		}
		if n = n*26 + int(ch-'A') + 1; n > columnsMost {
			return n
		}
	}
	return n
}

func columnName(n int) string {
	name := ""
	for ; n > 0; n = (n - 1) / 26 {
		name = string(rune('A'+(n-1)%26)) + name
	}
	return name
}

// shown writes a cell's value for a sentence.
func shown(value string) string {
	if value == "" {
		return "nothing"
	}
	lead := ""
	if value[0] == 'f' {
		lead, value = "a formula that gives ", value[1:]
		if value == "" {
			return "a formula"
		}
	}
	text := value[1:]
	if r := []rune(text); len(r) > 100 {
		text = string(r[:100]) + "…"
	}
	return lead + "“" + text + "”"
}
