package results

import (
	"cmp"
	"maps"
	"regexp"
	"strings"
	"time"

	"tripwell/export/intake"
	"tripwell/export/paper"
	"tripwell/forms"
)

// test is one test a row states.
type test struct {
	*device
	row        *row
	task, form string
	day        forms.Day
	clock      string // 15:04, "" where only the day is known
	readings   map[string]forms.Reading
	series     []forms.SeriesReading
	result     string // what a list says came out, where there are no readings
	readBy     string // person id
	typedBy    string
	instrument string // as written
	round      string // as written; the id once it is found
	notes      []string
	doubt      *cellFault
	faults     []cellFault
	long       bool
	head       string // heading of the column it stands under, "" for a test of the whole row
	value      string

	id       string
	given    forms.Given
	outcomes []int // places of its rows' outcomes in the report
}

// cellFault is what is wrong with one cell.
type cellFault struct {
	column, value, text string
	doubt               bool
}

func (f cellFault) state() string {
	if f.doubt {
		return Doubt
	}
	return LeftOut
}

// tests gives what a row states: a test for each month, each last day and each row of readings or of a result. faults
// are of cells that state a test of their own.
func (p *planner) tests(r *row) (said []*test, faults []cellFault) {
	own := &test{row: r, readings: map[string]forms.Reading{}}
	for i, c := range r.sheet.cols {
		if i >= len(r.cells) {
			break
		}
		cell := r.cells[i]
		if unsaid[strings.ToLower(strings.TrimSpace(cell.Text))] {
			continue
		}
		fault := func(f *fault) cellFault { return cellFault{r.sheet.heads[i], cell.Text, f.text, f.doubt} }
		switch {
		case c.about == aboutMonth:
			m, why := p.month(cell, c)
			if why != nil {
				faults = append(faults, fault(why))
			} else {
				said = append(said, m.test(r, i, ""))
			}
		case c.about == aboutLast:
			m, why := p.lastMark(cell)
			if why != nil {
				faults = append(faults, fault(why))
			} else {
				said = append(said, m.test(r, i, c.task))
			}
		case c.about == aboutResult && i > 0 && r.sheet.cols[i-1].about == aboutLast:
			if why := resultOfLast(said, r, i); why != nil {
				faults = append(faults, fault(why))
			}
		case c.about == aboutAllWell:
			if yes, ok := intake.ParseYes(cell.Text); ok && yes {
				own.head = aboutAllWell
			} else if !ok {
				own.faults = append(own.faults, fault(&noYes))
			}
		case c.reading != "":
			reading, given, why := c.cell(cell, p.book.DecimalComma)
			if why != nil && why.doubt {
				f := fault(why)
				own.doubt = cmp.Or(own.doubt, &f)
			} else if why != nil {
				own.faults = append(own.faults, fault(why))
			}
			if !given {
				continue
			}
			if c.at == nil {
				own.readings[c.reading] = reading
				continue
			}
			own.item(c.at).Readings[c.reading] = reading
		}
	}
	if p.ownTest(own, len(said) > 0) {
		said = append(said, own)
	}
	return said, faults
}

// resultOfLast gives the test of the column before what the column beside it says came out.
func resultOfLast(said []*test, r *row, place int) *fault {
	word, ok := resultWord(r.cells[place].Text)
	if !ok {
		return &fault{text: "This is no result. Write OK, fail or locked."}
	}
	if n := len(said); n > 0 && said[n-1].head == r.sheet.heads[place-1] {
		said[n-1].result = word
	}
	return nil
}

var noYes = fault{text: "This is no yes. Write yes where everything was in order, or leave the cell empty and fill in the readings."}

// item gives the item of the series taken at a condition.
func (t *test) item(at map[string]any) *forms.SeriesReading {
	for i := range t.series {
		if maps.Equal(t.series[i].At, at) {
			return &t.series[i]
		}
	}
	t.series = append(t.series, forms.SeriesReading{At: maps.Clone(at), Readings: map[string]forms.Reading{}})
	return &t.series[len(t.series)-1]
}

func (p *planner) month(cell intake.Cell, c column) (mark, *fault) {
	if c.year == 0 {
		return mark{}, &fault{text: "The heading names a month without its year. Write the year into the heading or the sheet's title, or say it for the whole file."}
	}
	return p.monthMark(cell, c)
}

// test makes a test of what an older list says under a column.
func (m mark) test(r *row, place int, task string) *test {
	t := &test{row: r, task: task, day: m.day, result: m.result, head: r.sheet.heads[place], value: r.cells[place].Text}
	if m.note != "" {
		t.notes = append(t.notes, m.note)
	}
	return t
}

// ownTest completes the test a row states by itself; ok is false where it states none. listed says that its columns state
// others: their result column then belongs to them.
func (p *planner) ownTest(t *test, listed bool) (ok bool) {
	r := t.row
	why, whyAt := r.cell(paper.AboutNotTested)
	result, resultAt := r.cell(aboutResult)
	if _, day := r.cell(paper.AboutDay); p.ask.Past && day >= 0 && !listed && r.sheet.onlyDays() {
		t.result = forms.Pass
	} else if whyAt < 0 && (resultAt < 0 || listed) && t.head != aboutAllWell && len(t.readings) == 0 && len(t.series) == 0 && len(t.faults) == 0 {
		return false
	}
	if whyAt >= 0 {
		p.notTested(t, why, whyAt)
	}
	if resultAt >= 0 && !listed {
		word, known := resultWord(result.Text)
		switch {
		case len(t.readings) > 0 || len(t.series) > 0:
			t.notes = append(t.notes, r.sheet.heads[resultAt]+": "+brief(result.Text))
		case known:
			t.result = word
		default:
			t.faults = append(t.faults, cellFault{r.sheet.heads[resultAt], result.Text, "This is no result. Write OK, fail or locked.", false})
		}
	}
	p.when(t)
	p.who(t)
	return true
}

// onlyDays reports that a sheet has a day in each row and no column for what came out: the day a test was last done.
func (s *sheet) onlyDays() bool {
	for _, c := range s.cols {
		if c.reading != "" || c.about == aboutResult || c.about == aboutAllWell || c.about == paper.AboutNotTested {
			return false
		}
	}
	return true
}

// notTested takes the reason why nothing could be tested.
func (p *planner) notTested(t *test, cell intake.Cell, at int) {
	low := strings.ToLower(strings.Join(strings.Fields(cell.Text), " "))
	reason, ok := t.row.sheet.cols[at].options[low]
	if !ok {
		reason, ok = reasons[low]
	}
	if !ok {
		for _, known := range forms.MissingReasons() {
			if known == strings.ReplaceAll(low, " ", "-") {
				reason, ok = known, true
			}
		}
	}
	if !ok {
		reason = "other"
		t.notes = append(t.notes, t.row.sheet.heads[at]+": "+brief(cell.Text))
	}
	if _, answered := t.readings["found"]; !answered {
		t.readings["found"] = forms.MissingFor(reason)
	}
}

var clockWritten = regexp.MustCompile(`(?i)\b(\d{1,2})[:.](\d{2})(?:[:.]\d{2}(?:\.\d+)?)?\s?(am|pm)?\s*z?$`)

// when reads day and time of day of a row.
func (p *planner) when(t *test) {
	r := t.row
	t.day = forms.NoDay
	cell, at := r.cell(paper.AboutDay)
	if at < 0 {
		t.faults = append(t.faults, cellFault{paper.AboutDay, "", "The row does not say on which day the test was made. Write it as 2026-12-31.", false})
		return
	}
	if cell.Date != nil {
		t.day = *cell.Date
	} else {
		day, _, err := intake.ParseDate(cell.Text, p.ask.Dates)
		if err != nil {
			t.faults = append(t.faults, cellFault{r.sheet.heads[at], cell.Text, err.Error(), false})
			return
		}
		t.day = day
	}
	if strings.ContainsAny(cell.Text, ": ") {
		t.clock = clockOf(cell.Text)
	}
	if c, at := r.cell(aboutTime); at >= 0 {
		if t.clock = clockOf(c.Text); t.clock == "" {
			t.faults = append(t.faults, cellFault{r.sheet.heads[at], c.Text, "This is no time of day. Write it as 14:30.", false})
		}
	}
}

// clockOf gives the time of day at the end of a text as 15:04, "" where there is none.
func clockOf(text string) string {
	m := clockWritten.FindStringSubmatch(strings.TrimSpace(text))
	if m == nil {
		return ""
	}
	layout, s := "15:04", m[1]+":"+m[2]
	if m[3] != "" {
		layout, s = "3:04pm", s+strings.ToLower(m[3])
	}
	at, err := time.Parse(layout, s)
	if err != nil {
		return ""
	}
	return at.Format("15:04")
}

// who reads who read, who typed and with which instrument. An older list may name people nobody here knows; they stay in
// the note. A round of today must say who read.
func (p *planner) who(t *test) {
	r := t.row
	t.readBy, t.typedBy, t.instrument = p.ask.ReadBy, p.ask.TypedBy, p.ask.Instrument
	for _, who := range []struct {
		about string
		id    *string
	}{{paper.AboutReadBy, &t.readBy}, {aboutTypedBy, &t.typedBy}} {
		c, at := r.cell(who.about)
		if at < 0 {
			continue
		}
		id, why := p.person(c.Text)
		switch {
		case why == "":
			*who.id = id
		case p.ask.Past:
			*who.id = ""
			t.notes = append(t.notes, r.sheet.heads[at]+": "+brief(c.Text))
		default:
			t.faults = append(t.faults, cellFault{r.sheet.heads[at], c.Text, why, false})
		}
	}
	if !p.ask.Past && t.readBy == "" && len(t.faults) == 0 {
		t.faults = append(t.faults, cellFault{paper.AboutReadBy, "", "The row does not say who read. Fill in the column, or say it for the whole file.", false})
	}
	if s := r.text(paper.AboutInstrument); s != "" {
		t.instrument = s
	}
	t.round = r.text(paper.AboutRound)
	if s := r.text(paper.AboutNote); s != "" {
		t.notes = append([]string{s}, t.notes...)
	}
}
