package results

import (
	"regexp"
	"slices"
	"strconv"
	"strings"
	"time"

	"tripwell/export/intake"
	"tripwell/export/paper"
	"tripwell/forms"
	"tripwell/store"
)

// planner works out what a file comes to.
type planner struct {
	ask     Ask
	by, org string
	now     time.Time
	book    *intake.Book
	people  []store.Person
	columns map[string]column // as the person mapped them, by the plain form of the heading
	own     map[string]column // checks an organisation added, by the name its forms give them
	rules   *rules
	finder  *finder
	ids     map[string]*test // tests of this file
	long    map[string]*test // tests whose conditions stand in rows of their own
	order   []*test          // in the order of the file
	drafts  []store.Draft
	report  Report
	rest    []restRow
}

// sheet is one worksheet as it was understood.
type sheet struct {
	name  string
	top   int // row of the headings, counted from 0
	heads []string
	cols  []column // by place; the zero column says nothing
}

// row is one row below the headings.
type row struct {
	sheet *sheet
	n     int // as a spreadsheet counts
	seq   int // over the whole file
	cells []intake.Cell
	// section is the last row above that held one text alone, as people write the floor above its rooms.
	section string
}

// text gives what the row says in the first filled column of a meaning.
func (r *row) text(about string) string {
	c, _ := r.cell(about)
	return strings.TrimSpace(c.Text)
}

func (r *row) cell(about string) (intake.Cell, int) {
	for i, c := range r.sheet.cols {
		if c.about == about && i < len(r.cells) && !unsaid[strings.ToLower(strings.TrimSpace(r.cells[i].Text))] {
			return r.cells[i], i
		}
	}
	return intake.Cell{}, -1
}

func (r *row) namesPlace() bool {
	return slices.ContainsFunc([]string{"place", aboutRoom, aboutPanel, "circuit"}, func(about string) bool { return r.text(about) != "" })
}

// sheetName is the worksheet a row comes from; a file of left-out rows says it in a column.
func (r *row) sheetName() string {
	if name := r.text(aboutSheet); name != "" {
		return name
	}
	return r.sheet.name
}

// kind is the device kind a row states, "" where it states none that is known.
func (r *row) kind() string {
	c, i := r.cell(paper.AboutKind)
	if i < 0 {
		return ""
	}
	low := strings.ToLower(strings.TrimSpace(c.Text))
	if kind, ok := r.sheet.cols[i].options[low]; ok {
		return kind
	}
	if kind := strings.ReplaceAll(low, " ", "-"); slices.Contains(forms.Kinds(), kind) {
		return kind
	}
	return ""
}

// head is the heading of a meaning, for naming what is wrong.
func (r *row) head(about string) string {
	if _, i := r.cell(about); i >= 0 {
		return r.sheet.heads[i]
	}
	return about
}

// read goes through the file within a view.
func (p *planner) read(v *store.View) (err error) {
	if p.rules, err = readRules(v); err != nil {
		return err
	}
	if p.own, err = p.rules.ownColumns(); err != nil {
		return err
	}
	if p.finder, err = newFinder(v, p); err != nil {
		return err
	}
	p.long = map[string]*test{}
	for _, s := range p.book.Sheets {
		if s.Hidden {
			continue
		}
		if err := p.sheet(s); err != nil {
			return err
		}
	}
	if err := p.settle(v); err != nil {
		return err
	}
	p.count()
	p.report.Rest, err = p.restCSV()
	return err
}

// sheet reads one worksheet, row by row.
func (p *planner) sheet(s intake.Sheet) error {
	top, ok := p.header(s)
	if !ok {
		for i, cells := range s.Rows {
			if !intake.Blank(cells) {
				p.note(Outcome{Sheet: s.Name, Row: i + 1, State: LeftOut, Text: "No headings were found on this sheet, so nothing of it was read. One of its first rows must name the columns, with a tag or a place among them."})
				break
			}
		}
		return nil
	}
	sh := &sheet{name: s.Name, top: top, heads: make([]string, len(s.Rows[top])), cols: make([]column, len(s.Rows[top]))}
	for i, cell := range s.Rows[top] {
		sh.heads[i] = strings.TrimSpace(cell.Text)
		if sh.heads[i] == "" {
			continue
		}
		col, known := p.heading(cell)
		if known {
			sh.cols[i] = col
		}
		p.report.Headings = append(p.report.Headings, Heading{Sheet: s.Name, Heading: sh.heads[i], Column: col.name()})
	}
	p.years(s, sh)
	if !p.ask.Past && slices.ContainsFunc(sh.cols, func(c column) bool { return c.about == aboutMonth || c.about == aboutLast }) {
		return wrong("file", "The file says when tests were last done, which nobody here witnessed. Take it in as past results.")
	}
	section := ""
	for i := top + 1; i < len(s.Rows); i++ {
		r := &row{sheet: sh, n: i + 1, cells: unquoted(s.Rows[i])}
		if intake.Blank(r.cells) || r.repeatsHeadings() {
			continue
		}
		p.report.Rows++
		r.seq, r.section = p.report.Rows, section
		if above := r.text(aboutTitle); above != "" {
			r.section = above
		}
		if text, ok := title(r.cells); ok {
			section = text
		}
		if err := p.row(r); err != nil {
			return err
		}
	}
	return nil
}

// header finds the row of headings: months count one by one, so that a row of titles never outweighs it.
func (p *planner) header(s intake.Sheet) (int, bool) {
	return s.FindHeader(func(text string) (string, bool) {
		c, ok := p.heading(intake.Cell{Text: text})
		return c.name(), ok
	})
}

// unquoted takes off the mark that keeps spreadsheets from calculating a text, as files of left-out rows carry it.
func unquoted(cells []intake.Cell) []intake.Cell {
	for i, c := range cells {
		if strings.HasPrefix(c.Text, "'") {
			cells = slices.Clone(cells)
			cells[i].Text = c.Text[1:]
		}
	}
	return cells
}

// title gives the text of a row that holds nothing else, in its first column.
func title(cells []intake.Cell) (string, bool) {
	if len(cells) == 0 || cells[0].Text == "" || cells[0].Number != nil || !intake.Blank(cells[1:]) {
		return "", false
	}
	return cells[0].Text, true
}

func (r *row) repeatsHeadings() bool {
	same := 0
	for i, c := range r.cells {
		switch {
		case c.Text == "":
		case i < len(r.sheet.heads) && strings.EqualFold(strings.TrimSpace(c.Text), r.sheet.heads[i]):
			same++
		default:
			return false
		}
	}
	return same > 1
}

var yearWritten = regexp.MustCompile(`\b(?:19|20)\d{2}\b`)

// years gives months that name no year the year asked for, or the first a title or the sheet's name states. Months that
// go on past December belong to the next year.
func (p *planner) years(s intake.Sheet, sh *sheet) {
	year := p.ask.Year
	if year == 0 {
		titles := s.Name
		for _, cells := range s.Rows[:sh.top] {
			for _, c := range cells {
				titles += " " + c.Text
			}
		}
		year, _ = strconv.Atoi(yearWritten.FindString(titles))
	}
	before := time.Month(0)
	for i := range sh.cols {
		c := &sh.cols[i]
		if c.about != aboutMonth || c.year != 0 || year == 0 {
			continue
		}
		if c.month < before {
			year++
		}
		c.year, before = year, c.month
	}
}

// note keeps what became of a row.
func (p *planner) note(o Outcome) {
	o.Value = brief(o.Value)
	p.report.Outcomes = append(p.report.Outcomes, o)
}

// brief keeps a message readable whatever the cell holds.
func brief(s string) string {
	if r := []rune(s); len(r) > 60 {
		return string(r[:59]) + "…"
	}
	return s
}

// totals are the rows people put below a table.
var totals = map[string]bool{"total": true, "totals": true, "sum": true, "subtotal": true, "average": true, "count": true, "grand_total": true}

// row reads one row: the tests its columns state, or why there are none.
func (p *planner) row(r *row) error {
	for _, c := range r.cells {
		if c.Text != "" {
			if totals[intake.Label(c.Text)] {
				p.hold(r, Silent, "", "", "A row of totals.")
				return nil
			}
			break
		}
	}
	said, faults := p.tests(r)
	if len(said) == 0 && len(faults) == 0 {
		p.hold(r, Silent, "", "", "The row states no test.")
		return nil
	}
	at, err := p.finder.find(r)
	if err != nil {
		return err
	}
	if at.device == nil {
		p.hold(r, at.state, r.head(at.column), r.text(at.column), at.text)
		return nil
	}
	for _, f := range faults {
		p.hold(r, f.state(), f.column, f.value, f.text)
	}
	for _, t := range said {
		t.device = at.device
		p.weigh(t)
	}
	return nil
}

// hold notes a row, or one test of it, that does not come in.
func (p *planner) hold(r *row, state, head, value, text string) {
	p.note(Outcome{Sheet: r.sheet.name, Row: r.n, State: state, Column: head, Value: value, Text: text, Tag: r.text("tag"), Place: r.text("place")})
	if state != Silent {
		p.rest = append(p.rest, restRow{r, head, text})
	}
}

// count sums up what became of the tests.
func (p *planner) count() {
	for _, o := range p.report.Outcomes {
		switch o.State {
		case LeftOut:
			p.report.LeftOut++
		case Doubt:
			p.report.Doubted++
		case Parked:
			p.report.Parked++
		case Silent:
			p.report.Silent++
		}
	}
}
