package server

import (
	"cmp"
	"encoding/json"
	"io"
	"maps"
	"net/http"
	"slices"
	"strconv"
	"strings"

	"github.com/labstack/echo/v4"

	"tripwell/export/intake"
	"tripwell/export/register"
	"tripwell/forms"
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
		return s.page(c, http.StatusOK, "import_preview.html", s.importDone(c, u))
	}
	p, err := s.prepared(c, u)
	if err != nil {
		return err
	}
	view := s.importPreview(c, u, p)
	if u.note != "" {
		u.note = ""
		s.imports.change(u)
	}
	return s.page(c, http.StatusOK, "import_preview.html", view)
}

// importMend takes what a person mended. The import itself runs only on what the page showed: where anything was
// changed since, the page comes again first.
func (s *Server) importMend(c echo.Context) error {
	u, err := s.uploadFor(c)
	if err != nil {
		return err
	}
	if u.done != nil {
		return toPage(c, "/import/"+u.id)
	}
	f, err := s.typedForm(c)
	if err != nil {
		return err
	}
	before := u
	u.mapping, u.newTags = mappingTyped(f, u.mapping), f.Get("new_tags") == "yes"
	if err := u.mapping.Check(); err != nil {
		w, fault := wrongOf(err)
		if fault {
			return err
		}
		before.note = w.Text
		s.imports.change(before)
		return toPage(c, "/import/"+u.id)
	}
	if f.Get("do") == "import" && sameMapping(before.mapping, u.mapping) {
		return s.importDo(c, u)
	}
	if f.Get("do") == "import" {
		u.note = s.words.Say("intake.look_again")
	}
	s.imports.change(u)
	return toPage(c, "/import/"+u.id)
}

// sameMapping compares as kept: an empty list is no list.
func sameMapping(a, b register.Mapping) bool {
	x, errX := json.Marshal(a)
	y, errY := json.Marshal(b)
	return errX == nil && errY == nil && string(x) == string(y)
}

// mappingTyped reads the mapping out of the preview's form; what the form does not ask stays.
func mappingTyped(f *typedForm, m register.Mapping) register.Mapping {
	out := register.Mapping{Dates: m.Dates, Zone: m.Zone, Standard: m.Standard, Site: m.Site, Kind: m.Kind}
	for name, into := range map[string]*string{"dates": (*string)(&out.Dates), "zone": &out.Zone, "kind": &out.Kind, "standard": &out.Standard} {
		if f.Has(name) {
			*into = strings.TrimSpace(f.Get(name))
		}
	}
	out.Columns, out.Kinds = mapCopy(m.Columns), mapCopy(m.Kinds)
	for n := range columnsOnPage {
		// Only what was changed is kept: what the file says by itself needs no word.
		if key, is, was := f.Get("ck."+strconv.Itoa(n)), f.Get("c."+strconv.Itoa(n)), f.Get("cw."+strconv.Itoa(n)); key != "" && is != was {
			out.Columns[key] = is
		}
	}
	for n := range kindsOnPage {
		word, kind := f.Get("kw."+strconv.Itoa(n)), f.Get("k."+strconv.Itoa(n))
		if delete(out.Kinds, word); word != "" && kind != "" {
			out.Kinds[word] = kind
		}
	}
	for n := range sheetsOnPage {
		i := "." + strconv.Itoa(n)
		if !f.Has("sheet" + i) {
			break
		}
		one := register.SheetMapping{Name: f.Get("sheet" + i), Skip: f.Get("skip"+i) == "yes", Site: strings.ToUpper(strings.TrimSpace(f.Get("site" + i)))}
		if f.Get("site"+i) == f.Get("sitewas"+i) {
			one.Site = f.Get("sitesaid" + i)
		}
		one.Header, _ = strconv.Atoi(strings.TrimSpace(f.Get("header" + i)))
		if f.Get("header"+i) == f.Get("headerwas"+i) {
			one.Header, _ = strconv.Atoi(f.Get("headersaid" + i))
		}
		one.Header = max(0, min(one.Header, 1<<20))
		if one.Skip || one.Site != "" || one.Header > 0 {
			out.Sheets = append(out.Sheets, one)
		}
	}
	return out
}

func mapCopy(m map[string]string) map[string]string {
	out := make(map[string]string, len(m))
	for k, v := range m {
		out[k] = v
	}
	return out
}

// importPreview builds the page of an import that has not been made.
func (s *Server) importPreview(c echo.Context, u upload, p *register.Prepared) previewPage {
	k, r := s.ink(), p.Report
	view := previewPage{
		Frame: s.frame(c, k.say("intake.title"), "sites"), Crumbs: []link{{Href: "/sites", Text: k.say("office.nav.sites")}, {Href: "/import", Text: k.say("intake.heading")}},
		Heading: k.say("intake.preview", "name", u.name), Lead: k.say("intake.preview_lead"), Note: u.note, Told: r.Told, Action: "/import/" + u.id,
		NewTags: field{Name: "new_tags", Type: "check", Label: k.say("intake.new_tags"), Hint: k.say("intake.new_tags_hint")},
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

// previewAsks are the questions about the whole file: only those that matter for it.
func (s *Server) previewAsks(view *previewPage, u upload, r register.Report) {
	k, m := s.ink(), u.mapping
	if r.Ambiguous > 0 || m.Dates != intake.UnknownOrder {
		hint := ""
		if r.Ambiguous > 0 {
			hint = k.say("intake.dates_hint", "n", count(r.Ambiguous))
		}
		view.Asks = append(view.Asks, field{Name: "dates", Label: k.say("intake.dates"), Hint: hint,
			Options: choices(string(m.Dates), "", k.say("intake.dates_ask"), "dmy", k.say("intake.dmy"), "mdy", k.say("intake.mdy"))})
	}
	needZone := m.Zone != ""
	for _, site := range r.NewSites {
		needZone = needZone || site.Zone == ""
		view.NewSites = append(view.NewSites, siteOffer{site.Code, cmp.Or(site.Name, site.Code), count(site.Rows)})
	}
	if needZone {
		view.Asks = append(view.Asks, field{Name: "zone", Type: "text", Label: k.say("intake.zone"), Hint: k.say("intake.zone_hint"), Value: m.Zone, Known: zonesOffered})
	}
	kindless := m.Kind != ""
	for _, t := range r.Tables {
		named := t.Skipped != "" || t.Header == 0
		for _, column := range t.Columns {
			named = named || column.Name == "kind"
		}
		kindless = kindless || !named
	}
	if kindless {
		view.Asks = append(view.Asks, field{Name: "kind", Label: k.say("intake.kind"), Hint: k.say("intake.kind_hint"), Options: s.kindOptions(m.Kind, k.say("intake.kind_none"))})
	}
	ask := func(word, rows, chosen string) {
		if n := len(view.Kinds); n < kindsOnPage {
			view.Kinds = append(view.Kinds, kindAsk{N: n, Word: word, Rows: rows,
				Select: field{Name: "k." + strconv.Itoa(n), Label: k.say("intake.kind_of", "word", word), Options: s.kindOptions(chosen, k.say("intake.kind_unknown"))}})
		}
	}
	for _, word := range r.Kinds {
		ask(word.Word, k.say("intake.rows", "n", count(word.Rows)), "")
	}
	for _, word := range slices.Sorted(maps.Keys(m.Kinds)) {
		ask(word, "", m.Kinds[word])
	}
}

func (s *Server) kindOptions(chosen, none string) []option {
	pairs := []string{"", none}
	for _, kind := range forms.Kinds() {
		pairs = append(pairs, kind, s.words.Say("kind."+kind))
	}
	return choices(chosen, pairs...)
}

// previewSheets are the sheets and, once for all of them, their columns.
func (s *Server) previewSheets(view *previewPage, u upload, r register.Report) {
	k := s.ink()
	offered := []string{"", k.say("intake.not_read")}
	for _, name := range register.ColumnNames() {
		offered = append(offered, name, k.say("intake.column."+name))
	}
	seen := map[string]bool{}
	for n, t := range r.Tables {
		i := "." + strconv.Itoa(n)
		ask := sheetAsk{N: n, Name: t.Sheet, State: k.say("intake.rows", "n", count(t.Rows)),
			Header: field{Name: "header" + i, Type: "number", Label: k.say("intake.header"), Value: textOf(t.Header)},
			Site:   field{Name: "site" + i, Type: "text", Label: k.say("intake.site"), Hint: k.say("intake.site_hint"), Value: t.Site},
			Skip:   field{Name: "skip" + i, Type: "check", Label: k.say("intake.skip")},
		}
		for _, said := range u.mapping.Sheets {
			if said.Name == t.Sheet {
				ask.HeaderSaid, ask.SiteSaid = textOf(said.Header), said.Site
			}
		}
		if t.Skipped != "" {
			ask.State = k.named("intake.skipped", t.Skipped)
		}
		if t.Skipped == "asked" {
			ask.Skip.Value = "yes"
		}
		view.Sheets = append(view.Sheets, ask)
		if t.Skipped != "" {
			continue
		}
		for _, column := range t.Columns {
			label := cmp.Or(intake.Label(column.Key), column.Key)
			if seen[label] || len(view.Columns) == columnsOnPage {
				continue
			}
			seen[label] = true
			id := strconv.Itoa(len(view.Columns))
			view.Columns = append(view.Columns, columnAsk{N: len(view.Columns), Key: column.Key, Heading: cmp.Or(column.Heading, column.Key), Sample: strings.Join(column.Sample, " · "), Known: column.Known,
				Select: field{Name: "c." + id, Label: k.say("intake.column_of", "name", column.Key), Value: column.Name, Options: choices(column.Name, offered...)}})
		}
	}
}

func textOf(n int) string {
	if n == 0 {
		return ""
	}
	return strconv.Itoa(n)
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
		Done: true, Action: "/import/" + u.id,
	}
	view.Sums = s.importSums(r)
	s.previewProblems(&view, r)
	view.Rejects = len(u.rejects) > 0
	return view
}

// importRejects sends the rows that were left out, or would be, with what is wrong in each.
func (s *Server) importRejects(c echo.Context) error {
	u, err := s.uploadFor(c)
	if err != nil {
		return err
	}
	if u.done == nil {
		p, err := s.prepared(c, u)
		if err != nil {
			return err
		}
		u.rejects = p.Rejects()
	}
	if c.Param("file") == "rejects.csv" {
		return s.download(c, "text/csv; charset=utf-8", s.words.Say("intake.rejects_file")+".csv", func(w io.Writer) error { return register.WriteRejectsCSV(w, u.rejects) })
	}
	return s.download(c, workbookKind, s.words.Say("intake.rejects_file")+".xlsx", func(w io.Writer) error { return register.WriteRejectsXLSX(w, u.rejects) })
}

// importMapping sends the columns as they were read, to be chosen beside the next file of the same shape.
func (s *Server) importMapping(c echo.Context) error {
	u, err := s.uploadFor(c)
	if err != nil {
		return err
	}
	mapping := u.mapping
	if u.done != nil {
		mapping = u.done.Mapping
	} else if p, err := s.prepared(c, u); err == nil {
		mapping = p.Report.Mapping
	}
	return s.download(c, "application/json", s.words.Say("intake.columns_file")+".json", func(w io.Writer) error {
		enc := json.NewEncoder(w)
		enc.SetEscapeHTML(false)
		enc.SetIndent("", " ")
		return enc.Encode(mapping)
	})
}

// importFile sends one of the files an upload gives.
func (s *Server) importFile(c echo.Context) error {
	switch c.Param("file") {
	case "rejects.csv", "rejects.xlsx":
		return s.importRejects(c)
	case "columns.json":
		return s.importMapping(c)
	}
	return echo.ErrNotFound
}
