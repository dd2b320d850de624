package server

import (
	"cmp"
	"net/http"
	"strconv"
	"strings"

	"github.com/labstack/echo/v4"

	"tripwell/export/register"
	"tripwell/store"
)

// previewPage shows what an import would do, with everything a person can mend. After the import it shows what was done.
type previewPage struct {
	Frame
	Crumbs        []link
	Heading, Lead string
	Note          string
	Told          []string
	Sums          []sum
	Action        string
	Go            string // the import button; "" = there is nothing to import
	Asks          []field
	NewSites      []siteOffer
	Kinds         []kindAsk
	Columns       []columnAsk
	Sheets        []sheetAsk
	Rows          []previewRow
	Problems      []problemLine
	More          string
	ProblemsHead  string
	LeftOut       []string
	Rejects       bool // rows were left out; they lie under Action
	Done          bool
	NewTags       field
	Offers        []columnsKept // kept columns that were made for such headings
	KeepAs        field
}

type siteOffer struct{ Code, Name, Rows string }

type kindAsk struct {
	N          int
	Word, Rows string
	Select     field
}

type columnAsk struct {
	N                    int
	Key, Heading, Sample string
	Select               field
	Known                bool
}

type sheetAsk struct {
	N                    int
	Name, State          string
	Header, Site         field
	Skip                 field
	HeaderSaid, SiteSaid string // what was said before, which an untouched field leaves as it is
}

type previewRow struct{ Row, Site, Kind, Place, Circuit, State string }

type problemLine struct {
	Where, Column, Value, Text string
	Skipped                    bool
}

const (
	previewRows    = 12
	problemsOnPage = 100
	leftOutOnPage  = 30
	kindsOnPage    = 60
	columnsOnPage  = 120
	sheetsOnPage   = 64
)

func (s *Server) importShow(c echo.Context) error {
	u, err := s.uploadFor(c)
	if err != nil {
		return err
	}
	if u.done != nil {
		view := s.importDone(c, u)
		s.imports.noted(u)
		return s.page(c, http.StatusOK, "import_preview.html", view)
	}
	p, err := s.prepared(c, u)
	if err != nil {
		return err
	}
	view := s.importPreview(c, u, p)
	if view.Offers, err = s.keptColumns(ofRegister, func(k store.KeptColumns) bool { return k.Name != u.keptAs && k.Fits(u.shapes) }); err != nil {
		return err
	}
	s.imports.noted(u)
	return s.page(c, http.StatusOK, "import_preview.html", view)
}

// importPreview builds the page of an import that has not been made.
func (s *Server) importPreview(c echo.Context, u upload, p *register.Prepared) previewPage {
	k, r := s.ink(), p.Report
	view := previewPage{
		Frame: s.frame(c, k.say("intake.title"), "sites"), Crumbs: []link{{Href: "/sites", Text: k.say("office.nav.sites")}, {Href: "/import", Text: k.say("intake.heading")}},
		Heading: k.say("intake.preview", "name", u.name), Lead: k.say("intake.preview_lead"), Note: u.note, Told: r.Told, Action: "/import/" + u.id,
		NewTags: field{Name: "new_tags", Type: "check", Label: k.say("intake.new_tags"), Hint: k.say("intake.new_tags_hint")}, KeepAs: s.keepAs(u),
	}
	if u.newTags {
		view.NewTags.Value = "yes"
	}
	if n := r.Added + r.Changed; n > 0 || u.newTags && len(p.Plan.NeedTag) > 0 {
		view.Go = k.say("intake.go", "n", count(n))
	} else if len(r.Problems) == 0 && r.Unchanged > 0 {
		view.Note = cmp.Or(view.Note, k.say("intake.nothing_new"))
	}
	view.Sums = s.importSums(r)
	s.previewAsks(&view, u, r)
	s.previewSheets(&view, u, r)
	s.previewRows(&view, p)
	s.previewProblems(&view, r)
	view.Rejects = r.Skipped > 0
	return view
}

func (s *Server) importSums(r register.Report) []sum {
	k := s.ink()
	rows := func(n int, key, shape string) sum {
		if n == 0 {
			shape = ""
		}
		return sum{"#rows", count(n), k.say("intake." + key), k.say("intake." + key + "_under"), shape}
	}
	sums := []sum{rows(r.Added, "sum_new", ""), rows(r.Changed, "sum_changed", ""), rows(r.Unchanged, "sum_unchanged", ""), rows(r.Skipped, "sum_problem", "fail")}
	sums[3].Href = "#problems"
	return sums
}

// previewRows are the first rows as they were understood.
func (s *Server) previewRows(view *previewPage, p *register.Prepared) {
	k := s.ink()
	for _, row := range p.Reading.Rows[:min(len(p.Reading.Rows), previewRows)] {
		line := previewRow{Row: strconv.Itoa(row.Line), Site: row.Site, Circuit: strings.Trim(row.Panel+" / "+row.CircuitNo, " /")}
		if row.Sheet != "" {
			line.Row = row.Sheet + " · " + line.Row
		}
		kind, _ := row.Device["kind"].(string)
		line.Kind = k.named("kind", kind)
		var where []string
		for _, name := range []string{"building", "floor", "room", "name"} {
			if text, _ := row.Place[name].(string); text != "" {
				where = append(where, text)
			}
		}
		line.Place = strings.Join(where, " · ")
		line.State = k.named("intake.state", cmp.Or(p.Plan.States[register.RowAt{Sheet: row.Sheet, Row: row.Line}], "problem"))
		view.Rows = append(view.Rows, line)
	}
}

// columnText is the word for a column that is known here, else its heading.
func columnText(k ink, column string) string {
	if key := "intake.column." + column; column != "" && k.words.Has(key) {
		return k.say(key)
	}
	return column
}

func (s *Server) previewProblems(view *previewPage, r register.Report) {
	k := s.ink()
	for _, p := range r.Problems[:min(len(r.Problems), problemsOnPage)] {
		where := k.say("intake.row", "n", p.Row)
		if p.Sheet != "" {
			where = p.Sheet + " · " + where
		}
		view.Problems = append(view.Problems, problemLine{where, columnText(k, p.Column), p.Value, p.Text, p.Skipped})
	}
	view.ProblemsHead = k.say("intake.problems", "n", count(len(r.Problems)))
	if more := len(r.Problems) - problemsOnPage; more > 0 {
		view.More = k.say("intake.more", "n", count(more))
	}
	for _, t := range r.Tables {
		for _, left := range t.LeftOut {
			if len(view.LeftOut) == leftOutOnPage {
				view.LeftOut = append(view.LeftOut, k.say("intake.more", "n", count(r.LeftOut-leftOutOnPage)))
				return
			}
			where := k.say("intake.row", "n", left.Row)
			if t.Sheet != "" {
				where = t.Sheet + " · " + where
			}
			view.LeftOut = append(view.LeftOut, where+": "+k.named("intake.left", left.Why)+" ("+left.Text+")")
		}
	}
}

// importDone builds the page of an import that was made.
func (s *Server) importDone(c echo.Context, u upload) previewPage {
	k, r := s.ink(), *u.done
	view := previewPage{
		Frame: s.frame(c, k.say("intake.title"), "sites"), Crumbs: []link{{Href: "/sites", Text: k.say("office.nav.sites")}, {Href: "/import", Text: k.say("intake.heading")}},
		Heading: k.say("intake.done", "n", count(r.Added+r.Changed)), Lead: k.say("intake.done_lead", "name", u.name, "sites", count(r.Sites), "tags", count(r.Tags), "records", count(r.Records)),
		Done: true, Action: "/import/" + u.id, Note: u.note, KeepAs: s.keepAs(u),
	}
	view.Sums = s.importSums(r)
	s.previewProblems(&view, r)
	view.Rejects = len(u.rejects) > 0
	return view
}
