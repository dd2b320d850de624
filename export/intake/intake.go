// Package intake reads the sheets people already have: the bytes of a CSV or XLSX file become sheets of typed cells, and
// the texts people type become figures, days and answers.
//
// It must never run a formula, follow a link, write a file or trust a size that a file states about itself: every bound
// of Caps is held while the bytes are unpacked, so memory stays bounded whatever the file holds. It knows nothing of
// registers or readings; what a column means is the business of its callers.
//
// XLSX (ECMA-376 part 1, SpreadsheetML) is read cell by cell from the parts of the package, not through the workbook
// library: that one hands out either a cell's text as displayed or its raw figure, and only a whole worksheet held in
// memory tells a date from a number.
package intake

import (
	"bytes"
	"errors"
	"fmt"
	"io"

	"tripwell/forms"
)

// Caps are the bounds of a file. A field that is zero has the default beside it.
type Caps struct {
	Bytes    int64 // of the file: 32 MiB
	Unpacked int64 // of all parts that are read of an XLSX: 96 MiB
	Entries  int   // files packed in an XLSX: 2,000
	Ratio    int64 // unpacked to packed size of one part over 1 MiB: 300
	Sheets   int   // worksheets: 64
	Rows     int   // rows of all sheets together: 200,000
	Columns  int   // columns of a sheet: 256
	Cells    int   // filled cells of all sheets together: 3,000,000
	Letters  int   // letters of one cell: 32,767, which is what spreadsheets hold
}

func (c Caps) withDefaults() Caps {
	orElse(&c.Bytes, 32<<20)
	orElse(&c.Unpacked, 96<<20)
	orElse(&c.Entries, 2000)
	orElse(&c.Ratio, 300)
	orElse(&c.Sheets, 64)
	orElse(&c.Rows, 200_000)
	orElse(&c.Columns, 256)
	orElse(&c.Cells, 3_000_000)
	orElse(&c.Letters, 32_767)
	return c
}

func orElse[N int | int64](n *N, byDefault N) {
	if *n <= 0 {
		*n = byDefault
	}
}

// Book is what a file holds.
type Book struct {
	Name     string
	Sheets   []Sheet
	Told     []string  // what was detected of the file, in sentences: encoding, separator, decimal comma, hidden sheets
	Problems []Problem // of cells and rows that could not be read as they stand
	// DecimalComma tells that figures of the file are written 0,3 rather than 0.3.
	DecimalComma bool
}

// Sheet is one table. Rows[0] is the row the person sees as row 1; rows end with their last filled cell.
type Sheet struct {
	Name   string
	Rows   [][]Cell
	Hidden bool
	Merges []Merge
}

// Merge is a block of merged cells, counted from 0. Its text stands in its first cell; where a block spans rows of one
// column, the text is repeated in each of them.
type Merge struct{ Row, Column, Rows, Columns int }

// Cell is one cell. Text is what a person would type for it: dates as 2026-12-31, true and false as TRUE and FALSE. At
// most one of Number, Date and Bool says what the file itself holds it to be; a CSV knows numbers only. A formula counts
// by the value the file keeps for it.
type Cell struct {
	Text   string
	Number *float64
	Date   *forms.Day
	Bool   *bool
}

// Problem names one thing that is wrong and what to do about it. Row is counted from 1, as a spreadsheet shows it.
type Problem struct {
	Sheet  string `json:"sheet,omitempty"`
	Row    int    `json:"row,omitempty"`
	Column string `json:"column,omitempty"`
	Value  string `json:"value,omitempty"`
	Text   string `json:"text"`
}

// Error refuses a whole file. Code is invalid or too_large; Text says what is wrong and what to do.
type Error struct{ Code, Field, Text string }

func (e *Error) Error() string { return e.Text }

func refuse(code, format string, args ...any) *Error {
	return &Error{Code: code, Field: "file", Text: fmt.Sprintf(format, args...)}
}

// wrong is what is wrong with a single value, and what to do.
func wrong(format string, args ...any) error {
	return &Error{Code: "invalid", Text: fmt.Sprintf(format, args...)}
}

// Open reads a CSV or XLSX file, told apart by its content. A file that is neither, or that may not be read, is refused
// with an Error; it never panics.
func Open(name string, r io.Reader, max Caps) (book *Book, err error) {
	max = max.withDefaults()
	raw, err := io.ReadAll(io.LimitReader(r, max.Bytes+1))
	if err != nil {
		return nil, fmt.Errorf("read %s: %w", name, err)
	}
	if int64(len(raw)) > max.Bytes {
		return nil, refuse("too_large", "The file is larger than %d MiB. Import it in parts, one site a file.", max.Bytes>>20)
	}
	defer func() {
		// A decoder that stumbles over a crafted file must not take the server along.
		if p := recover(); p != nil {
			book, err = nil, refuse("invalid", "The file is damaged and cannot be read. Open it in a spreadsheet, save it again and try once more.")
		}
	}()
	book = &Book{Name: name}
	room := &space{caps: max}
	switch kind := sniff(raw); kind {
	case isZip:
		err = book.readPacked(raw, room)
	case isText:
		err = book.readText(raw, room)
	default:
		return nil, refuse("invalid", "%s", kind)
	}
	if err != nil {
		return nil, err
	}
	return book, nil
}

const (
	isZip  = "zip"
	isText = "text"
)

const saveAsXLSX = "Open it in a spreadsheet and save it as XLSX or as CSV (UTF-8)."

// sniff tells what a file is by its first bytes: isZip, isText, or the sentence that refuses it.
func sniff(raw []byte) string {
	begins := func(s string) bool { return bytes.HasPrefix(raw, []byte(s)) }
	switch {
	case len(bytes.TrimSpace(raw)) == 0:
		return "The file is empty. One of its rows must hold the headings."
	case begins("PK\x03\x04"):
		return isZip
	case begins("\xD0\xCF\x11\xE0\xA1\xB1\x1A\xE1"):
		// The stream names of a compound file stand in UTF-16.
		if bytes.Contains(raw, []byte("E\x00n\x00c\x00r\x00y\x00p\x00t\x00e\x00d\x00P\x00a\x00c\x00k\x00a\x00g\x00e")) {
			return "The file is locked with a password. Open it in a spreadsheet, take the password off and save it again."
		}
		return "The file is in the old XLS form, or locked with a password. " + saveAsXLSX
	case begins("PK"):
		return "The file is a damaged or empty archive. " + saveAsXLSX
	case begins("%PDF"):
		return "The file is a PDF, which holds no table that can be read. Ask for the sheet it was printed from."
	case begins("\x89PNG"), begins("\xFF\xD8\xFF"), begins("GIF8"):
		return "The file is a picture. Ask for the sheet it was made from."
	case begins("\x1F\x8B"), begins("7z\xBC\xAF"), begins("Rar!"):
		return "The file is an archive. Unpack it and choose the sheet inside."
	}
	head := bytes.ToLower(bytes.TrimSpace(raw[:min(len(raw), 1024)]))
	if bytes.HasPrefix(head, []byte("<!doctype")) || bytes.HasPrefix(head, []byte("<html")) || bytes.HasPrefix(head, []byte("<?xml")) || bytes.HasPrefix(head, []byte("<table")) {
		return "The file is a web page or XML, although it may be named like a sheet. " + saveAsXLSX
	}
	return isText
}

// space counts what a file has used of its bounds.
type space struct {
	caps  Caps
	rows  int
	cells int
	bytes int64
}

func (s *space) row() error {
	if s.rows++; s.rows > s.caps.Rows {
		return refuse("too_large", "The file has more than %d rows. Import it in parts, one site a file.", s.caps.Rows)
	}
	return nil
}

func (s *space) filled(n int) error {
	if s.cells += n; s.cells > s.caps.Cells {
		return refuse("too_large", "The file has more than %d filled cells. Import it in parts, one site a file.", s.caps.Cells)
	}
	return nil
}

func (s *space) columns(n int) error {
	if n > s.caps.Columns {
		return refuse("too_large", "A row of the file has more than %d columns. Delete the columns that are not needed and try again.", s.caps.Columns)
	}
	return nil
}

var errUnpacked = errors.New("more than may be unpacked")
