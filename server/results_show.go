package server

import (
	"cmp"
	"encoding/json"
	"io"
	"net/http"
	"slices"
	"strconv"
	"strings"

	"github.com/labstack/echo/v4"

	"tripwell/export/results"
	"tripwell/forms"
	"tripwell/store"
	"tripwell/store/record"
)

// resultsPreview shows what an import of tests would do, with what a person can say of it. After the import it shows what
// was done.
type resultsPreview struct {
	Frame
	Crumbs        []link
	Heading, Lead string
	Note, Action  string
	Done          bool
	Told          []string
	Sums          []sum
	Judged        []mark
	Asks          []field
	Columns       []columnAsk
	Go            string // the import button; "" = there is nothing to import
	ProblemsHead  string
	Problems      []heldRow
	More          string
	Rest          bool
	Tests         []foundTest
	Offers        []columnsKept // kept columns that were made for such headings
	KeepAs        field
}

// heldRow is a row that is not in, or will not be.
type heldRow struct {
	Where, Column, Value, Text string
	State                      mark
}

// foundTest is a test as it was understood and judged.
type foundTest struct {
	Where, Place, Tag, Task, Day, Why string
	Verdict                           mark
}

func (s *Server) resultsShow(c echo.Context) error {
	u, err := s.resultsFor(c)
	if err != nil {
		return err
	}
	report := u.taken
	if report == nil {
		r, err := s.resultsOf(c, &u, true)
		if w, fault := wrongOf(err); err != nil && (fault || w.Field == "file") {
			return err
		} else if err != nil {
			// What was said of the file cannot be: it is taken back, with the sentence why.
			u.ask = results.Ask{Past: u.ask.Past}
			u.note = cmp.Or(u.note, w.Text)
			if r, err = s.resultsOf(c, &u, true); err != nil {
				return err
			}
		}
		report = &r
	}
	view, err := s.resultsView(c, u, report)
	if err != nil {
		return err
	}
	s.results.noted(u)
	return s.page(c, http.StatusOK, "results_preview.html", view)
}

// resultsMend takes what a person said of the file. The import itself runs only on what the page showed: where anything
// was changed since, the page comes again first.
func (s *Server) resultsMend(c echo.Context) error {
	u, err := s.resultsFor(c)
	if err != nil {
		return err
	}
	f, err := s.typedForm(c)
	if err != nil {
		return err
	}
	if name, use := f.Get("keep_as"), f.Get("use"); f.Get("do") == "keep" || use != "" {
		return s.resultsKept(c, u, name, use)
	}
	if u.taken != nil {
		return toPage(c, "/results/"+u.id)
	}
	ask := askTyped(f, u.ask)
	same := sameAsk(u.ask, ask)
	u.ask = ask
	switch {
	case f.Get("do") == "import" && same:
		r, err := s.resultsOf(c, &u, false)
		w, fault := wrongOf(err)
		switch {
		case err == nil:
			u.taken = &r
		case fault:
			return err
		default:
			u.note = s.words.Say("intake.stopped", "why", w.Text)
		}
	case f.Get("do") == "import":
		u.note = s.words.Say("intake.look_again")
	}
	s.results.change(u)
	return toPage(c, "/results/"+u.id)
}

// resultsKept keeps the columns as the page showed them, or reads the file by what was kept of another.
func (s *Server) resultsKept(c echo.Context, u upload, name, use string) (err error) {
	switch {
	case use != "" && u.taken == nil:
		err = s.resultsUse(&u, use)
	case u.taken != nil:
		u.keptAs = name
		u.note, err = s.keepColumns(c, ofResults, name, u.taken.Shapes(), u.taken.Kept(u.ask))
	case use == "":
		r, wrong := s.resultsOf(c, &u, true)
		if wrong != nil {
			return wrong
		}
		u.keptAs = name
		u.note, err = s.keepColumns(c, ofResults, name, r.Shapes(), r.Kept(u.ask))
	}
	if err != nil {
		return err
	}
	s.results.change(u)
	return toPage(c, "/results/"+u.id)
}

func sameAsk(a, b results.Ask) bool {
	x, errX := json.Marshal(a)
	y, errY := json.Marshal(b)
	return errX == nil && errY == nil && string(x) == string(y)
}

// askTyped reads what the preview's form says; what it does not ask stays.
func askTyped(f *typedForm, was results.Ask) results.Ask {
	ask := was
	for name, into := range map[string]*string{"site": &ask.Site, "source": &ask.Source, "read_by": &ask.ReadBy, "typed_by": &ask.TypedBy, "instrument": &ask.Instrument, "task": &ask.Task, "dates": (*string)(&ask.Dates)} {
		if f.Has(name) {
			*into = strings.TrimSpace(f.Get(name))
		}
	}
	if f.Has("year") {
		ask.Year, _ = strconv.Atoi(strings.TrimSpace(f.Get("year")))
	}
	ask.Doubted = f.Get("doubted") == "yes"
	ask.Columns = mapCopy(was.Columns)
	for n := range columnsOnPage {
		// Only what was changed is kept: what the file says by itself needs no word.
		if key, is, was := f.Get("ck."+strconv.Itoa(n)), f.Get("c."+strconv.Itoa(n)), f.Get("cw."+strconv.Itoa(n)); key != "" && is != was {
			ask.Columns[key] = is
		}
	}
	if len(ask.Columns) == 0 {
		ask.Columns = nil
	}
	return ask
}

func (s *Server) resultsView(c echo.Context, u upload, r *results.Report) (view resultsPreview, err error) {
	k := s.ink()
	view = resultsPreview{
		Frame: s.frame(c, k.say("results.heading"), "sites"), Crumbs: []link{{Href: "/sites", Text: k.say("office.nav.sites")}, {Href: "/results", Text: k.say("results.heading")}},
		Heading: k.say("intake.preview", "name", u.name), Lead: k.say("results.preview_lead"), Note: u.note, Action: "/results/" + u.id, Done: u.taken != nil, Told: r.Told, Rest: r.Rest != "",
		ProblemsHead: k.say("results.held", "n", count(r.Held())), KeepAs: s.keepAs(u),
	}
	if u.ask.Past {
		view.Lead = k.say("results.past_lead")
	}
	if view.Done {
		view.Heading, view.Lead = k.say("results.done", "n", count(r.Taken)), k.say("results.done_lead", "name", u.name)
	} else if r.Taken > 0 {
		view.Go = k.say("results.go", "n", count(r.Taken))
	} else if r.Held() == 0 && r.There > 0 {
		view.Note = cmp.Or(view.Note, k.say("results.nothing_new"))
	}
	s.resultsSums(&view, r)
	s.resultsRows(&view, r)
	if view.Done {
		return view, nil
	}
	s.resultsColumns(&view, r)
	if view.Offers, err = s.keptColumns(ofResults, func(k store.KeptColumns) bool { return k.Name != u.keptAs && k.Fits(u.shapes) }); err != nil {
		return view, err
	}
	view.Asks, err = s.resultsAsks(c, u.ask, r)
	return view, err
}

func (s *Server) resultsSums(view *resultsPreview, r *results.Report) {
	k := s.ink()
	for _, one := range []struct {
		n                int
		href, key, shape string
	}{{r.Taken, "#rows", "taken", ""}, {r.There, "#rows", "there", ""}, {r.LeftOut + r.Doubted, "#problems", "held", "fail"}, {r.Parked, "#problems", "parked", "watch"}} {
		shape := one.shape
		if one.n == 0 {
			shape = ""
		}
		view.Sums = append(view.Sums, sum{one.href, count(one.n), k.say("results.sum_" + one.key), k.say("results.sum_" + one.key + "_under"), shape})
	}
	for _, result := range forms.Results() {
		if n := r.Results[result]; n > 0 {
			m := k.verdict(result)
			m.Word = count(n) + " " + m.Word
			view.Judged = append(view.Judged, m)
		}
	}
}

func (s *Server) resultsRows(view *resultsPreview, r *results.Report) {
	k := s.ink()
	for _, o := range r.Outcomes {
		where := k.say("intake.row", "n", o.Row)
		if o.Sheet != "" {
			where = o.Sheet + " · " + where
		}
		switch o.State {
		case results.Taken:
			if len(view.Tests) < previewRows {
				t := foundTest{Where: where, Place: o.Place, Tag: record.ShowTag(o.Tag), Task: k.named("task", o.Task), Day: o.Day, Verdict: k.verdict(o.Result)}
				if o.Finding != "" && s.words.Has(o.Finding) {
					t.Why = k.say(o.Finding)
				}
				view.Tests = append(view.Tests, t)
			}
		case results.LeftOut, results.Doubt, results.Parked:
			if len(view.Problems) < problemsOnPage {
				shape := map[string]string{results.LeftOut: "fail", results.Doubt: "watch", results.Parked: "none"}[o.State]
				view.Problems = append(view.Problems, heldRow{where, o.Column, o.Value, o.Text, mark{shape, k.say("results.state_" + strings.ReplaceAll(o.State, "-", "_"))}})
			}
		}
	}
	if more := r.Held() - len(view.Problems); more > 0 {
		view.More = k.say("intake.more", "n", count(more))
	}
}

// resultsColumns offers every heading with what it is read as.
func (s *Server) resultsColumns(view *resultsPreview, r *results.Report) {
	k := s.ink()
	offered := []string{"", k.say("intake.not_read")}
	for _, name := range results.ColumnNames() {
		if name != "skip" && name != "sheet" && name != "title_above" {
			offered = append(offered, name, s.resultsColumn(name))
		}
	}
	seen := map[string]bool{}
	for _, h := range r.Headings {
		if seen[h.Heading] || len(view.Columns) == columnsOnPage {
			continue
		}
		seen[h.Heading] = true
		id, is := strconv.Itoa(len(view.Columns)), h.Column
		if is == "skip" || is == "sheet" || is == "title_above" {
			is = ""
		}
		options := offered
		if !slices.Contains(offered, is) {
			options = append(slices.Clone(offered), is, s.resultsColumn(is))
		}
		view.Columns = append(view.Columns, columnAsk{N: len(view.Columns), Key: h.Heading, Heading: h.Heading, Known: h.Column != "",
			Select: field{Name: "c." + id, Label: k.say("intake.column_of", "name", h.Heading), Value: is, Options: choices(is, options...)}})
	}
}

// resultsColumn says a column in words: what it is about, or the reading with its unit and condition.
func (s *Server) resultsColumn(name string) string {
	k := s.ink()
	first, rest, _ := strings.Cut(name, " ")
	switch {
	case first == "month" && rest != "":
		return k.say("results.column.month", "month", rest)
	case first == "last" && rest != "":
		return k.say("results.column.last_of", "test", k.named("task", rest))
	case s.words.Has("results.column." + first):
		return k.say("results.column." + first)
	}
	text := k.named("reading", first+".name")
	if known, ok := forms.CodeOf(first); ok && known.Unit != "" && !strings.HasPrefix(rest, "in ") {
		rest = strings.TrimSpace("in " + k.named("unit", known.Unit) + " " + rest)
	}
	return strings.TrimSpace(text + " " + rest)
}

// resultsAsks are the questions about the whole file.
func (s *Server) resultsAsks(c echo.Context, ask results.Ask, r *results.Report) ([]field, error) {
	k := s.ink()
	sites, err := s.sitesOf(c)
	if err != nil {
		return nil, err
	}
	asks := []field{pick("site", ask.Site, k.say("results.site"), k.say("results.site_hint"), k.say("results.as_file"))}
	for _, site := range sites {
		asks[0].Options = append(asks[0].Options, option{site.Code, site.Name, site.Code == ask.Site})
	}
	asks = append(asks, field{Name: "dates", Label: k.say("intake.dates"), Options: choices(string(ask.Dates), "", k.say("intake.dates_ask"), "dmy", k.say("intake.dmy"), "mdy", k.say("intake.mdy"))})
	task := pick("task", ask.Task, k.say("results.task"), k.say("results.task_hint"), k.say("results.as_file"))
	for _, t := range forms.Tasks() {
		task.Options = append(task.Options, option{t, k.named("task", t), t == ask.Task})
	}
	asks = append(asks, task)
	if ask.Past {
		year := ""
		if ask.Year != 0 {
			year = strconv.Itoa(ask.Year)
		}
		asks = append(asks, field{Name: "year", Type: "number", Label: k.say("results.year"), Hint: k.say("results.year_hint"), Value: year})
	} else {
		more, err := s.readingsAsks(c, ask)
		if err != nil {
			return nil, err
		}
		asks = append(asks, more...)
	}
	if r.Doubted > 0 || ask.Doubted {
		f := field{Name: "doubted", Type: "check", Label: k.say("results.doubted", "n", count(r.Doubted)), Hint: k.say("results.doubted_hint")}
		if ask.Doubted {
			f.Label, f.Value = k.say("results.doubted_all"), "yes"
		}
		asks = append(asks, f)
	}
	return asks, nil
}

func pick(name, chosen, label, hint, none string) field {
	return field{Name: name, Label: label, Hint: hint, Options: []option{{Text: none, Chosen: chosen == ""}}}
}

// readingsAsks are the questions about who read, who typed, with what.
func (s *Server) readingsAsks(c echo.Context, ask results.Ask) ([]field, error) {
	k := s.ink()
	people, err := s.store.People()
	if err != nil {
		return nil, err
	}
	read := pick("read_by", ask.ReadBy, k.say("results.read_by"), k.say("results.read_by_hint"), k.say("results.as_file"))
	typed := pick("typed_by", ask.TypedBy, k.say("results.typed_by"), "", k.say("results.as_file"))
	for _, p := range people {
		if p.Role == "auditor" {
			continue
		}
		read.Options = append(read.Options, option{p.ID, p.Name, p.ID == ask.ReadBy})
		typed.Options = append(typed.Options, option{p.ID, p.Name, p.ID == ask.TypedBy})
	}
	instrument := pick("instrument", ask.Instrument, k.say("results.instrument"), k.say("results.instrument_hint"), k.say("results.as_file"))
	err = s.store.View(scope(c), func(v *store.View) error {
		list, err := v.Instruments()
		for _, in := range list {
			if !in.Retired {
				instrument.Options = append(instrument.Options, option{in.ID, strings.TrimSpace(in.Name + " " + in.Serial), in.ID == ask.Instrument})
			}
		}
		return err
	})
	source := field{Name: "source", Label: k.say("results.source"), Options: choices(cmp.Or(ask.Source, results.Spreadsheet), results.Paper, k.say("results.source_paper"), results.Spreadsheet, k.say("results.source_spreadsheet"), results.InstrumentFile, k.say("results.source_instrument_file"))}
	return []field{source, read, typed, instrument}, err
}

// resultsFile sends the rows that are not in, or how the columns were read.
func (s *Server) resultsFile(c echo.Context) error {
	u, err := s.resultsFor(c)
	if err != nil {
		return err
	}
	report := u.taken
	if report == nil {
		r, err := s.resultsOf(c, &u, true)
		if err != nil {
			return err
		}
		report = &r
	}
	switch c.Param("file") {
	case "rest.csv":
		return s.download(c, "text/csv; charset=utf-8", s.words.Say("results.rest_file")+".csv", func(w io.Writer) error {
			_, err := io.WriteString(w, "\ufeff"+report.Rest)
			return err
		})
	case "columns.json":
		return s.download(c, "application/json", s.words.Say("intake.columns_file")+".json", func(w io.Writer) error {
			enc := json.NewEncoder(w)
			enc.SetEscapeHTML(false)
			enc.SetIndent("", " ")
			return enc.Encode(report.Kept(u.ask))
		})
	}
	return echo.ErrNotFound
}
