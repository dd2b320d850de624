package export

import (
	"fmt"
	"math"
	"strconv"
	"time"

	"github.com/xuri/excelize/v2"

	"tripwell/forms"
)

// sheetRows is the most rows a sheet holds (ECMA-376 as every reader limits it). What is beyond goes on a further sheet.
const sheetRows = excelize.TotalRows

// cellKind says what a column holds; the whole column carries the matching style.
type cellKind int

const (
	textCell   cellKind = iota
	dayCell             // civil date
	timeCell            // date and time of day, local to the site
	numberCell          // measured or rated figure
	countCell           // whole number
	verdictCell
)

type column struct {
	key   string // words sheet.col.KEY
	width float64
	kind  cellKind
}

// sheet streams rows into one worksheet. A row is built cell by cell from the left: row, then text, day, … in the order
// of the columns, then end.
//
// excelize writes everything but the data rows. Those are written here as XML into a spool and spliced in when the
// file is zipped: the same cells take its StreamWriter three times as long, and 16 MB of memory a sheet.
type sheet struct {
	book    *book
	key     string // words sheet.name.KEY
	name    string
	part    int
	cols    []column
	letters []string // of the columns: A, B, …
	sw      *excelize.StreamWriter
	flat    flatRows // takes the rows instead of a worksheet; nil in a workbook
	rows    *spool
	head    int // row of the headings
	last    int // last row written
	buf     []byte
	cells   int // cells of the row in buf
	number  []byte
}

// open makes the worksheet ready for rows. Everything excelize would lose after the first row or after Flush is set
// here first: panes, widths, print titles, page set-up, header and footer.
func (s *sheet) open() error {
	b := s.book
	if s.flat != nil {
		return s.flat.head(b, s.cols)
	}
	if err := b.pageSetup(s.name, s.pagesWide()); err != nil {
		return fmt.Errorf("sheet %s: %w", s.name, err)
	}
	s.head, s.last = 1, 0
	if b.demo {
		s.head = 2
	}
	titles := fmt.Sprintf("'%s'!$1:$%d", s.name, s.head)
	if err := b.file.SetDefinedName(&excelize.DefinedName{Name: "_xlnm.Print_Titles", RefersTo: titles, Scope: s.name}); err != nil {
		return fmt.Errorf("sheet %s: %w", s.name, err)
	}
	if err := s.setMarks(); err != nil {
		return err
	}
	sw, err := b.file.NewStreamWriter(s.name)
	if err != nil {
		return fmt.Errorf("sheet %s: %w", s.name, err)
	}
	s.sw = sw
	if s.rows, err = b.parts.spool(sw.SheetID); err != nil {
		return fmt.Errorf("sheet %s: %w", s.name, err)
	}
	if err := sw.SetPanes(&excelize.Panes{Freeze: true, YSplit: s.head, TopLeftCell: "A" + strconv.Itoa(s.head+1), ActivePane: "bottomLeft"}); err != nil {
		return fmt.Errorf("sheet %s: %w", s.name, err)
	}
	for i, c := range s.cols {
		if err := sw.SetColWidth(i+1, i+1, c.width); err != nil {
			return fmt.Errorf("sheet %s: %w", s.name, err)
		}
		if err := sw.SetColStyle(i+1, i+1, b.styles.of[c.kind]); err != nil {
			return fmt.Errorf("sheet %s: %w", s.name, err)
		}
	}
	return s.headings()
}

// pageChars is how wide the columns of one printed page are together, in characters: more would be too small to read.
const pageChars = 320

func (s *sheet) pagesWide() int {
	chars := 0.0
	for _, c := range s.cols {
		chars += c.width
	}
	return max(1, int(math.Ceil(chars/pageChars)))
}

func (s *sheet) headings() error {
	b := s.book
	if b.demo {
		if err := s.put(excelize.Cell{StyleID: b.styles.demo, Value: b.say("sheet.demo")}); err != nil {
			return err
		}
	}
	row := make([]any, len(s.cols))
	for i, c := range s.cols {
		row[i] = excelize.Cell{StyleID: b.styles.heading, Value: b.say("sheet.col." + c.key)}
	}
	return s.put(row...)
}

func (s *sheet) put(cells ...any) error {
	if err := s.sw.SetRow("A"+strconv.Itoa(s.last+1), cells); err != nil {
		return fmt.Errorf("sheet %s, row %d: %w", s.name, s.last+1, err)
	}
	s.last++
	return nil
}

// row begins a row.
func (s *sheet) row() *sheet {
	s.buf, s.cells = s.buf[:0], 0
	if s.flat != nil {
		s.flat.begin()
	}
	return s
}

// cell opens a cell of the present row, up to its attributes.
func (s *sheet) cell(style int) {
	s.buf = append(append(s.buf, `<c r="`...), s.letters[min(s.cells, len(s.letters)-1)]...)
	// The number of the row is not known yet where the sheet may turn out full: end puts it in for the mark.
	s.buf = append(s.buf, rowMark)
	s.buf = strconv.AppendInt(append(s.buf, `" s="`...), int64(style), 10)
	s.cells++
}

// rowMark stands for the number of the row; no text can hold it, because cellText lets no control character through.
const rowMark = 0x01

func (s *sheet) style() int { return s.book.styles.of[s.cols[min(s.cells, len(s.cols)-1)].kind] }

func (s *sheet) text(v string) *sheet { return s.styled(s.style(), v) }

func (s *sheet) styled(style int, v string) *sheet {
	if v == "" {
		return s.skip()
	}
	if s.flat != nil {
		s.cells++
		s.flat.text(plainText(v))
		return s
	}
	s.cell(style)
	s.buf = append(s.buf, `" t="inlineStr"><is><t`...)
	s.buf = appendCellText(s.buf, cellText(v))
	s.buf = append(s.buf, `</t></is></c>`...)
	return s
}

func (s *sheet) skip() *sheet {
	s.cells++
	if s.flat != nil {
		s.flat.skip()
	}
	return s
}

// value writes a number that is known to be finite.
func (s *sheet) value(v float64) *sheet {
	if s.flat != nil {
		s.cells++
		s.flat.number(v)
		return s
	}
	s.cell(s.style())
	s.buf = append(s.buf, `"><v>`...)
	s.buf = append(appendFigure(s.buf, v), `</v></c>`...)
	return s
}

func appendFigure(to []byte, v float64) []byte {
	format := byte('f')
	if abs := math.Abs(v); abs >= 1e15 || abs < 1e-5 && abs > 0 {
		format = 'g'
	}
	return strconv.AppendFloat(to, v, format, -1, 64)
}

// serialDay is the spreadsheet's count of days (1900 date system) for 1970-01-01.
const serialDay = 25569

// firstSerialDay is 1900-03-01: before it the count of days is off by one for a leap day that never was.
const firstSerialDay = forms.Day(61 - serialDay)

func (s *sheet) day(d forms.Day) *sheet {
	switch {
	case d == forms.NoDay:
		return s.skip()
	case s.flat != nil, d < firstSerialDay:
		return s.text(d.String())
	}
	return s.value(float64(d) + serialDay)
}

// time writes wall-clock time in a site's zone; a spreadsheet knows no zone, so a zone column stands beside it.
func (s *sheet) time(t time.Time, zone *time.Location) *sheet {
	if t.IsZero() {
		return s.skip()
	}
	t = t.In(zone)
	if s.flat != nil {
		s.cells++
		s.flat.time(t)
		return s
	}
	d := forms.DayOf(t)
	if d < firstSerialDay {
		return s.text(t.Format(time.DateTime))
	}
	h, m, sec := t.Clock()
	return s.value(float64(d) + serialDay + float64(h*3600+m*60+sec)/86400)
}

func (s *sheet) figure(v float64) *sheet {
	if math.IsNaN(v) || math.IsInf(v, 0) {
		return s.text(strconv.FormatFloat(v, 'g', -1, 64))
	}
	return s.value(v)
}

// rating writes a figure of the register, where 0 means not known.
func (s *sheet) rating(v float64) *sheet {
	if v == 0 {
		return s.skip()
	}
	return s.figure(v)
}

// known writes a figure that may be missing.
func (s *sheet) known(v *float64) *sheet {
	if v == nil {
		return s.skip()
	}
	return s.figure(*v)
}

func (s *sheet) count(n int64) *sheet { return s.value(float64(n)) }

// verdict writes the word; the cell's style adds shape and colour, so that filters see the word alone.
func (s *sheet) verdict(code string) *sheet {
	return s.styled(s.book.styles.verdict(code), s.book.word("verdict", code))
}

// end writes the row, on a further sheet where this one is full.
func (s *sheet) end() error {
	if s.cells != len(s.cols) {
		return fmt.Errorf("sheet %s: a row of %d cells under %d headings", s.name, s.cells, len(s.cols))
	}
	if s.flat != nil {
		s.book.rows++
		return s.flat.end()
	}
	if s.last == sheetRows {
		if err := s.further(); err != nil {
			return err
		}
	}
	s.last++
	s.number = strconv.AppendInt(s.number[:0], int64(s.last), 10)
	if err := s.rows.row(s.number, s.buf); err != nil {
		return fmt.Errorf("sheet %s, row %d: %w", s.name, s.last, err)
	}
	s.book.rows++
	return nil
}

func (s *sheet) further() error {
	if err := s.close(); err != nil {
		return err
	}
	s.part++
	s.name = s.book.say("sheet.name."+s.key) + " " + strconv.Itoa(s.part)
	if _, err := s.book.file.NewSheet(s.name); err != nil {
		return fmt.Errorf("sheet %s: %w", s.name, err)
	}
	return s.open()
}

// close adds the table with its filter over what was written and flushes; nothing may be set afterwards.
func (s *sheet) close() error {
	if s.flat != nil {
		return s.flat.flush()
	}
	to, err := excelize.CoordinatesToCellName(len(s.cols), max(s.last, s.head+1))
	if err != nil {
		return fmt.Errorf("sheet %s: %w", s.name, err)
	}
	stripes := false
	err = s.sw.AddTable(&excelize.Table{
		Range: "A" + strconv.Itoa(s.head) + ":" + to, Name: fmt.Sprintf("tripwell_%s_%d", s.key, s.part),
		StyleName: "TableStyleLight1", ShowRowStripes: &stripes,
	})
	if err != nil {
		return fmt.Errorf("sheet %s: table: %w", s.name, err)
	}
	if err := s.sw.Flush(); err != nil {
		return fmt.Errorf("sheet %s: %w", s.name, err)
	}
	return nil
}
