package register

import (
	"fmt"
	"slices"
	"strings"

	"tripwell/export/intake"
	"tripwell/store"
)

// Reading is what a file says, before anything is looked up or made.
type Reading struct {
	Rows      []Row
	Problems  []Problem
	Tables    []Table
	Kinds     []KindWord // words that name no kind of device yet
	Ambiguous int        // dates whose day and month could be either way round
	Told      []string
	kindSaid  bool                                 // Mapping.Kind is given
	rejected  func(sheet string, row int) []string // cells of a row as they stand
}

// Table is one sheet as it was understood.
type Table struct {
	Sheet   string        `json:"sheet"`
	Header  int           `json:"header"` // row of the headings, from 1; 0 = none found
	Skipped string        `json:"skipped,omitempty"`
	Columns []TableColumn `json:"columns,omitempty"`
	Site    string        `json:"site,omitempty"`       // code of the site of rows that name none
	Offered string        `json:"offered,omitempty"`    // code that the sheet's name would make
	HasSite bool          `json:"has_site,omitempty"`   // a column names the site
	LeftOut []LeftOut     `json:"left_out,omitempty"`   // titles, totals, devices gone; blank rows are not listed
	Rows    int           `json:"rows"`                 // rows read as devices, good or bad
	Blank   int           `json:"blank_rows,omitempty"` // below the headings
}

// TableColumn is a column of a sheet. Key names it in Mapping.Columns.
type TableColumn struct {
	Key     string   `json:"key"`
	Heading string   `json:"heading"`
	Name    string   `json:"name"` // "" = not read
	Known   bool     `json:"known"`
	Sample  []string `json:"sample,omitempty"`
}

// LeftOut is a row that is no device.
type LeftOut struct {
	Row  int    `json:"row"`
	Why  string `json:"why"` // title | total | header | gone
	Text string `json:"text"`
}

// KindWord is a word of the file for a kind of device, and how many rows say it.
type KindWord struct {
	Word string `json:"word"`
	Rows int    `json:"rows"`
}

type reader struct {
	mapping   Mapping
	figures   intake.Figures
	zones     zoneNames
	codes     map[string]string // code of a known site, by its name in lower case
	known     map[string]bool   // codes of known sites
	unknown   map[string]int
	ambiguous int
	beyond    bool // cells beyond the headings are a fault: in a CSV they are split texts
	out       Reading
}

// Read makes rows of a book. sites are those there are, by which sheets and rows may name theirs. The error is for a
// file that holds no register at all.
func Read(book *intake.Book, m Mapping, sites []store.Site) (Reading, error) {
	if err := m.Check(); err != nil {
		return Reading{}, err
	}
	r := &reader{mapping: m, figures: intake.Figures{DecimalComma: book.DecimalComma}, zones: zoneNames{}, codes: map[string]string{}, known: map[string]bool{}, unknown: map[string]int{}}
	for _, s := range sites {
		code := strings.ToUpper(s.Code)
		r.codes[strings.ToLower(s.Name)], r.known[code] = code, true
	}
	r.beyond = len(book.Sheets) == 1 && book.Sheets[0].Name == ""
	for _, p := range book.Problems {
		r.out.Problems = append(r.out.Problems, Problem{p, false})
	}
	for _, sheet := range book.Sheets {
		r.out.Tables = append(r.out.Tables, r.table(sheet, len(book.Sheets)))
	}
	r.out.Told, r.out.Ambiguous, r.out.kindSaid = book.Told, r.ambiguous, m.Kind != ""
	for word, n := range r.unknown {
		r.out.Kinds = append(r.out.Kinds, KindWord{word, n})
	}
	slices.SortFunc(r.out.Kinds, func(a, b KindWord) int {
		if a.Rows != b.Rows {
			return b.Rows - a.Rows
		}
		return strings.Compare(a.Word, b.Word)
	})
	r.out.rejected = func(name string, row int) []string {
		for _, s := range book.Sheets {
			if s.Name == name && row >= 1 && row <= len(s.Rows) {
				var cells []string
				for _, c := range s.Rows[row-1] {
					cells = append(cells, c.Text)
				}
				return cells
			}
		}
		return nil
	}
	return r.out, nil
}

// Refusal refuses a file of which no row could be taken for want of a column, with what to do. It is no error of Read: a
// person can say which column is which.
func (r *Reading) Refusal() error {
	header, kind, site := false, r.kindSaid, false
	for _, t := range r.Tables {
		if t.Header == 0 || t.Skipped != "" {
			continue
		}
		header = true
		site = site || t.HasSite || t.Site != ""
		kind = kind || slices.ContainsFunc(t.Columns, func(c TableColumn) bool { return c.Name == "kind" })
	}
	text := ""
	switch {
	case !header:
		text = "No row of headings was found: no row names columns such as kind, room, place or panel. Write the headings in one row, or say in the columns file which column is which."
	case !kind:
		text = "The file has no column \"kind\". Give a column that heading, or say in the columns file which column it is or which kind all rows are."
	case !site:
		text = "The file has no column \"site\". Give a column that heading, or say which site the rows are of."
	default:
		return nil
	}
	return &store.Error{Code: "invalid", Field: "file", Text: text}
}

// siteNamed gives the code of a site by its code or its name; a name that nothing here has makes a code. "" = neither.
func (r *reader) siteNamed(text string) string {
	if code, ok := r.codes[strings.ToLower(text)]; ok {
		return code
	}
	if code := strings.ToUpper(text); isSiteCode(code) {
		return code
	}
	return codeOf(text)
}

// codeOf makes a site code of a name: "Alder Court (north)" is ALDER-COURT.
func codeOf(name string) string {
	var code strings.Builder
	for _, c := range strings.ToUpper(printable(name)) {
		switch {
		case c >= 'A' && c <= 'Z', c >= '0' && c <= '9':
			code.WriteRune(c)
		case code.Len() > 0 && !strings.HasSuffix(code.String(), "-"):
			code.WriteByte('-')
		}
	}
	s := code.String()
	if len(s) > 12 {
		s = s[:12]
	}
	if s = strings.Trim(s, "-"); !isSiteCode(s) {
		return ""
	}
	return s
}

// isPlainSheetName knows what spreadsheets call a sheet nobody named, and what registers are called.
func isPlainSheetName(s string) bool {
	switch strings.TrimRight(intake.Label(s), "_0123456789") {
	case "", "sheet", "tabelle", "feuil", "hoja", "blad", "foglio", "register", "devices", "device_register", "data", "list", "outlets", "gfci", "rows_to_correct", "table":
		return true
	}
	return false
}

// table reads one sheet.
func (r *reader) table(sheet intake.Sheet, sheets int) Table {
	t := Table{Sheet: sheet.Name}
	said := r.mapping.sheet(sheet.Name)
	switch {
	case said.Skip:
		t.Skipped = "asked"
	case sheet.Hidden && said.Header == 0 && said.Site == "":
		t.Skipped = "hidden"
	case len(sheet.Rows) == 0:
		t.Skipped = "empty"
	}
	header, found := r.header(sheet, said)
	if !found {
		if t.Skipped == "" {
			t.Skipped = "no-header"
		}
		return t
	}
	t.Header = header + 1
	if t.Skipped == "" && said.Header == 0 && isResults(sheet.Rows[header]) {
		t.Skipped = "results"
	}
	if t.Skipped != "" {
		return t
	}
	columns := r.columns(&t, sheet, header)
	t.Site = r.siteOfSheet(&t, sheet, said, sheets)
	read := rowReader{reader: r, columns: columns, site: t.Site}
	for i := header + 1; i < len(sheet.Rows); i++ {
		r.row(&t, &read, sheet, i, header)
	}
	return t
}

// isResults tells the headings of the sheets of a workbook that are no register from those of a register.
func isResults(head []intake.Cell) bool {
	return slices.ContainsFunc(head, func(c intake.Cell) bool {
		switch intake.Label(c.Text) {
		case "entry_id", "limit_id", "test_day", "verdict", "due", "flag", "defect", "gap", "in_time", "instrument_id", "person_id", "sha_256", "duty", "meaning", "to_see_for_5":
			return true
		}
		return false
	})
}

// header finds the row of the headings, from 0.
func (r *reader) header(sheet intake.Sheet, said SheetMapping) (row int, ok bool) {
	if said.Header > 0 {
		return said.Header - 1, said.Header <= len(sheet.Rows)
	}
	return sheet.FindHeader(func(label string) (string, bool) {
		c, read, _ := r.mapping.column(label)
		return c.Name, read
	})
}

// columns settles which column is which. Where two say the same the left one is read.
func (r *reader) columns(t *Table, sheet intake.Sheet, header int) []*Column {
	head := sheet.Rows[header]
	columns := make([]*Column, len(head))
	names := map[string]string{}
	hasCode := slices.ContainsFunc(head, func(c intake.Cell) bool { return intake.Label(c.Text) == "site_code" })
	for i, cell := range head {
		key := printable(cell.Text)
		if key == "" {
			key = "[" + intake.ColumnLetters(i) + "]"
		}
		column := TableColumn{Key: key, Heading: printable(cell.Text), Sample: sampleOf(sheet, header, i)}
		c, read, known := r.mapping.column(key)
		if hasCode && intake.Label(key) == "site" {
			c, read, known = Column{Name: "site_name"}, true, true // "Site code" beside "Site"
		}
		if read && names[c.Name] != "" {
			r.note(t.Sheet, header+1, key, fmt.Sprintf("Two columns both say %s: %s and this one, which was not read. Remove or rename one of them.", c.Name, names[c.Name]))
			read = false
		}
		if !known && column.Heading != "" {
			r.note(t.Sheet, header+1, key, "This column is not known and was not read.")
		}
		column.Known = known
		if read {
			columns[i], column.Name, names[c.Name] = &c, c.Name, key
			t.HasSite = t.HasSite || c.Name == "site"
		}
		if column.Heading != "" || len(column.Sample) > 0 {
			t.Columns = append(t.Columns, column)
		}
	}
	return columns
}

func (r *reader) note(sheet string, row int, column, text string) {
	r.out.Problems = append(r.out.Problems, Problem{intake.Problem{Sheet: sheet, Row: row, Column: cut(column), Text: text}, false})
}

// sampleOf gives the first few different texts of a column.
func sampleOf(sheet intake.Sheet, header, column int) (texts []string) {
	for _, row := range sheet.Rows[header+1 : min(len(sheet.Rows), header+40)] {
		if column < len(row) && row[column].Text != "" {
			if s := cut(row[column].Text); !slices.Contains(texts, s) {
				texts = append(texts, s)
			}
		}
		if len(texts) == 3 {
			break
		}
	}
	return texts
}

// siteOfSheet is the site of rows that name none: what was said, else the site the sheet is named after, else the code
// its name makes where there are several sheets with names of their own.
func (r *reader) siteOfSheet(t *Table, sheet intake.Sheet, said SheetMapping, sheets int) string {
	name := printable(sheet.Name)
	if code, ok := r.codes[strings.ToLower(name)]; ok {
		t.Offered = code
	} else if r.known[strings.ToUpper(name)] || !isPlainSheetName(name) {
		t.Offered = r.siteNamed(name)
	}
	switch {
	case said.Site != "":
		return strings.ToUpper(said.Site)
	case t.HasSite:
		return strings.ToUpper(r.mapping.Site)
	case r.known[t.Offered]:
		return t.Offered
	case r.mapping.Site != "":
		return strings.ToUpper(r.mapping.Site)
	}
	return t.Offered
}

// row reads row i of a sheet, or leaves it out.
func (r *reader) row(t *Table, read *rowReader, sheet intake.Sheet, i, header int) {
	cells := sheet.Rows[i]
	if intake.Blank(cells) {
		t.Blank++
		return
	}
	if why := leftOut(cells, read.columns, sheet.Rows[header], r.mapping.Kind != ""); why != "" {
		t.LeftOut = append(t.LeftOut, LeftOut{i + 1, why, rowText(cells)})
		return
	}
	row, problems, gone := read.read(sheet.Name, i+1, cells)
	read.above = read.above[:0]
	for _, c := range cells {
		read.above = append(read.above, c.Text)
	}
	if gone {
		t.LeftOut = append(t.LeftOut, LeftOut{i + 1, "gone", rowText(cells)})
		return
	}
	if row.SiteName == "" && row.Site != "" && row.Site == t.Site && !r.known[row.Site] && t.Offered == row.Site {
		row.SiteName = printable(sheet.Name)
	}
	t.Rows++
	r.out.Problems = append(r.out.Problems, problems...)
	if len(problems) == 0 {
		r.out.Rows = append(r.out.Rows, row)
	}
}

// leftOut tells rows that are no device: the headings again on the next page, totals, titles of a part.
func leftOut(cells []intake.Cell, columns []*Column, head []intake.Cell, kindSaid bool) string {
	filled, again, first := 0, 0, ""
	for i, c := range cells {
		if c.Text == "" {
			continue
		}
		if filled++; filled == 1 {
			first = c.Text
		}
		if i < len(head) && intake.Label(c.Text) == intake.Label(head[i].Text) {
			again++
		}
	}
	read := 0
	for _, c := range columns {
		if c != nil {
			read++
		}
	}
	words := strings.Split(intake.Label(first), "_")
	switch {
	case again >= 2 && again*2 > filled:
		return "header"
	case len(words) > 0 && filled*2 <= max(read, 2) && slices.Contains([]string{"total", "totals", "subtotal", "sum", "count", "summe", "gesamt", "suma"}, words[0]),
		len(words) > 1 && filled*2 <= max(read, 2) && (words[0] == "grand" || words[0] == "sub") && words[1] == "total":
		return "total"
	case filled == 1 && read >= 3 && !kindSaid:
		return "title"
	}
	return ""
}

func rowText(cells []intake.Cell) string {
	var texts []string
	for _, c := range cells {
		if c.Text != "" {
			texts = append(texts, c.Text)
		}
	}
	return cut(strings.Join(texts, " · "))
}
