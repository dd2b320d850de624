// Package results takes in what was measured elsewhere: rounds done on paper, in a spreadsheet or by an instrument that
// writes a file (Readings), and what older lists say was done before (Past).
//
// Readings become entry.made with their source, who read and who typed. What older lists say becomes entry.imported,
// which anchors dates and stands apart everywhere as not witnessed. Ids are version 8 over (organisation, site, device,
// form, day, time of day), so that the same file makes the same records on every server and imports once. Every row of a
// file is taken in, there already, or named with a reason; what is doubtful waits for a person's word.
//
// It must never guess: a date that could be two days, a figure that could be in two units or a place that fits two
// devices is named and left out. It opens no files and knows no HTTP.
package results

import (
	"bytes"
	"context"
	"errors"
	"fmt"
	"io"
	"maps"
	"slices"
	"strings"
	"time"

	"github.com/go-json-experiment/json"

	"tripwell/export/intake"
	"tripwell/forms"
	"tripwell/store"
)

// Sources a file of readings may have; they stand in the entry.
const (
	Paper          = "paper"
	Spreadsheet    = "spreadsheet"
	InstrumentFile = "instrument-file"
)

// Ask says how a file is taken in. The zero value of every field leaves it to the file. As JSON it can be kept beside
// files of one shape: what their headings mean and how their dates are written.
type Ask struct {
	Past       bool              `json:"past,omitempty"`       // what the file says was done before and not witnessed here: entry.imported
	Site       string            `json:"site,omitempty"`       // code of the site of rows that name none
	Source     string            `json:"source,omitempty"`     // paper | spreadsheet | instrument-file
	ReadBy     string            `json:"read_by,omitempty"`    // person (id or name) who read, in rows that name nobody
	TypedBy    string            `json:"typed_by,omitempty"`   // person (id or name) who typed, in rows that name nobody
	Instrument string            `json:"instrument,omitempty"` // name or serial of the instrument, in rows that name none
	Task       string            `json:"task,omitempty"`       // button | instrument | receptacle, in rows that do not say
	Year       int               `json:"year,omitempty"`       // of columns that name a month only; 0: as a title of the sheet says
	Dates      intake.Order      `json:"dates,omitempty"`      // dmy or mdy, in dates of figures alone; "": ask where it matters
	Columns    map[string]string `json:"columns,omitempty"`    // what headings mean, heading → column (ParseColumn); "": not read
	Doubted    bool              `json:"doubted,omitempty"`    // take rows with doubtful values in as they stand
	DryRun     bool              `json:"dry_run,omitempty"`    // say what would be done, write nothing
}

// ParseAsk reads an Ask as kept; empty is the zero value. Unknown names are refused: a misspelt one would be lost.
func ParseAsk(raw []byte) (Ask, error) {
	var ask Ask
	if len(bytes.TrimSpace(raw)) == 0 {
		return ask, nil
	}
	if err := json.Unmarshal(raw, &ask, json.RejectUnknownMembers(true)); err != nil {
		return ask, wrong("map", `This does not say how a file is read. It is JSON such as {"dates":"dmy","columns":{"t":"trip_time_ms in s"}}.`)
	}
	return ask, nil
}

// What became of a row.
const (
	Taken   = "taken"
	There   = "there"    // in already, from an earlier import or an earlier row
	LeftOut = "left-out" // something is wrong: Text says what to do
	Doubt   = "doubted"  // a value is possible and unlikely: taken in with Ask.Doubted
	Parked  = "parked"   // no device is known under this tag or place
	Silent  = "silent"   // the row names a device and says nothing of a test
)

// Outcome is what became of one test of a row, in the order of the file. A row without a test has one outcome too.
type Outcome struct {
	Sheet  string `json:"sheet,omitempty"`
	Row    int    `json:"row"` // as a spreadsheet counts
	State  string `json:"state"`
	Column string `json:"column,omitempty"` // heading of what is wrong
	Value  string `json:"value,omitempty"`
	Text   string `json:"text,omitempty"` // what is wrong and what to do

	Tag     string `json:"tag,omitempty"`
	Place   string `json:"place,omitempty"`
	Task    string `json:"task,omitempty"`
	Day     string `json:"day,omitempty"`     // YYYY-MM-DD
	Result  string `json:"result,omitempty"`  // as judged, or as the list says
	Finding string `json:"finding,omitempty"` // key of the first thing that is no pass
}

// Heading is a column of the file as it was understood; Column is "" where it was not.
type Heading struct {
	Sheet   string `json:"sheet,omitempty"`
	Heading string `json:"heading"`
	Column  string `json:"column,omitempty"`
}

// Report is what an import did, or would do.
type Report struct {
	Rows     int            `json:"rows"` // rows with something in them, below the headings
	Taken    int            `json:"taken"`
	There    int            `json:"there"`
	LeftOut  int            `json:"left_out"`
	Doubted  int            `json:"doubted"`
	Parked   int            `json:"parked"`
	Silent   int            `json:"silent"`
	Results  map[string]int `json:"results,omitempty"` // of the tests taken, by result
	Told     []string       `json:"told,omitempty"`    // what was detected of the file
	Headings []Heading      `json:"headings,omitempty"`
	Outcomes []Outcome      `json:"outcomes,omitempty"`
	DryRun   bool           `json:"dry_run,omitempty"`
	// Rest is the CSV of the rows that are not in, each with its reason: correct it and import it.
	Rest string `json:"rest,omitempty"`
}

// Kept is the ask that reads the next file of the same shape in the same way.
func (r *Report) Kept(ask Ask) Ask {
	kept := Ask{Dates: ask.Dates, Columns: map[string]string{}}
	for _, h := range r.Headings {
		kept.Columns[h.Heading] = h.Column
	}
	return kept
}

// Shapes are those of the headings that were read, sheet by sheet, by which what was said of them is offered to the next
// file.
func (r *Report) Shapes() (shapes []string) {
	of := map[string][]string{}
	for _, h := range r.Headings {
		of[h.Sheet] = append(of[h.Sheet], h.Heading)
	}
	for _, sheet := range slices.Sorted(maps.Keys(of)) {
		if shape, ok := intake.Shape(of[sheet]); ok && !slices.Contains(shapes, shape) {
			shapes = append(shapes, shape)
		}
	}
	return shapes
}

// Shorten leaves at most n outcomes in a report, first what is not in. The counts stay.
func (r *Report) Shorten(n int) {
	slices.SortStableFunc(r.Outcomes, func(a, b Outcome) int { return urgency[a.State] - urgency[b.State] })
	r.Outcomes = r.Outcomes[:min(len(r.Outcomes), n)]
}

var urgency = map[string]int{LeftOut: 0, Doubt: 0, Parked: 0, Taken: 1, There: 2, Silent: 2}

// Held counts the outcomes that are not in and should be looked at.
func (r *Report) Held() int { return r.LeftOut + r.Doubted + r.Parked }

// importBatch is the most drafts of one append: the book commits them together.
const importBatch = 500

// Import takes a file in, as the person by, who must be allowed the sites. The same file a second time adds nothing; an
// import that stopped half way is simply run again. progress may be nil.
func Import(ctx context.Context, s *store.Store, by string, book *intake.Book, ask Ask, progress func(done, total int)) (Report, error) {
	p, err := plan(s, by, book, ask)
	if err != nil {
		return Report{}, err
	}
	if !ask.DryRun {
		for at := 0; at < len(p.drafts); at += importBatch {
			end := min(at+importBatch, len(p.drafts))
			if _, err := s.Append(ctx, p.drafts[at:end]...); err != nil {
				return p.report, fmt.Errorf("import results, up to test %d of %d: %w", at, len(p.drafts), err)
			}
			if progress != nil {
				progress(end, len(p.drafts))
			}
		}
	}
	return p.report, nil
}

// Open reads a CSV or XLSX file; one that cannot be taken is a *store.Error that says so.
func Open(name string, r io.Reader, caps intake.Caps) (*intake.Book, error) {
	book, err := intake.Open(name, r, caps)
	var refused *intake.Error
	if errors.As(err, &refused) {
		return nil, &store.Error{Code: refused.Code, Field: refused.Field, Text: refused.Text}
	}
	return book, err
}

// plan works out what a file comes to; nothing is written.
func plan(s *store.Store, by string, book *intake.Book, ask Ask) (*planner, error) {
	people, err := s.People()
	if err != nil {
		return nil, err
	}
	p := &planner{ask: ask, by: by, org: s.Org(), now: s.Now(), book: book, people: people, ids: map[string]*test{}}
	p.report.DryRun, p.report.Results = ask.DryRun, map[string]int{}
	p.report.Told = append(p.report.Told, book.Told...)
	if err := p.checkAsk(); err != nil {
		return nil, err
	}
	err = s.View(scopeOf(s, by), func(v *store.View) error { return p.read(v) })
	return p, err
}

// scopeOf is what the person may see; the owner of the folder sees all.
func scopeOf(s *store.Store, by string) store.Scope {
	if p, err := s.Person(by); err == nil {
		return p.Scope()
	}
	return store.Scope{Person: by, Role: "owner", All: true}
}

func wrong(field, text string) error { return &store.Error{Code: "invalid", Field: field, Text: text} }

// checkAsk looks at what holds for the whole file.
func (p *planner) checkAsk() error {
	a := &p.ask
	switch a.Source {
	case Paper, Spreadsheet, InstrumentFile:
	case "":
		a.Source = Spreadsheet
	default:
		return wrong("source", "The source of readings is paper, spreadsheet or instrument-file. Choose one of these.")
	}
	if a.Task != "" && !isTask(a.Task) {
		return wrong("task", "A test is button, instrument or receptacle. Choose one of these.")
	}
	if a.Year != 0 && (a.Year < 1900 || a.Year > p.now.Year()) {
		return wrong("year", fmt.Sprintf("The year of the months must lie between 1900 and %d.", p.now.Year()))
	}
	for _, who := range []struct {
		field string
		name  *string
	}{{"read_by", &a.ReadBy}, {"typed_by", &a.TypedBy}} {
		if *who.name == "" {
			continue
		}
		id, why := p.person(*who.name)
		if why != "" {
			return wrong(who.field, why)
		}
		*who.name = id
	}
	if a.Dates != intake.UnknownOrder && a.Dates != intake.DMY && a.Dates != intake.MDY {
		return wrong("dates", "Dates are dmy, with the day first, or mdy, with the month first. Choose one of these.")
	}
	p.columns = map[string]column{}
	for heading, name := range a.Columns {
		c, err := ParseColumn(name)
		if err != nil {
			return err
		}
		p.columns[intake.Label(heading)] = c
	}
	return nil
}

func isTask(s string) bool {
	for _, task := range forms.Tasks() {
		if s == task {
			return true
		}
	}
	return false
}

// person finds who is meant by a name; why says what is wrong where nobody or several are.
func (p *planner) person(name string) (id, why string) {
	name = strings.Join(strings.Fields(name), " ")
	for _, one := range p.people {
		if one.ID == name {
			return one.ID, ""
		}
		if strings.EqualFold(one.Name, name) {
			if id != "" {
				return "", "Several people are called this. Tell them apart in the list of people, then import again."
			}
			id = one.ID
		}
	}
	if id == "" {
		return "", "Nobody here is called this. Add them to the list of people, or write the name as it stands there."
	}
	return id, ""
}

// moment is when a test was made; of one of which only the day is known it is noon at the site, but never later than now.
func moment(day forms.Day, clock string, zone *time.Location, now time.Time) time.Time {
	y, m, d := day.Time().Date()
	hour, minute := 12, 0
	if t, err := time.Parse("15:04", clock); err == nil {
		hour, minute = t.Hour(), t.Minute()
	}
	at := time.Date(y, m, d, hour, minute, 0, 0, zone)
	if at.After(now) {
		return now
	}
	return at
}
