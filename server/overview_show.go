package server

import (
	"net/http"
	"slices"
	"strings"

	"github.com/labstack/echo/v4"

	"tripwell/forms"
	"tripwell/store"
)

// decideShown is how many failed devices the overview names; the rest are behind a link.
const decideShown = 12

// overviewPage is the first page: what stands, site by site, and what needs a decision.
type overviewPage struct {
	Frame
	Heading, Under string
	Doubted        string // phones know another book than this one
	Sums           []sum
	Sites          []siteRow
	Todo           []link // what waits for a manager beside the defects
	Decide         []decision
	More           []link
	None, NewSite  string
}

// sum is one large figure of the overview.
type sum struct{ Href, Figure, Text, Under, Shape string }

// siteRow is a site in a table of sites.
type siteRow struct {
	Href, Name, Code         string
	Devices, Failed, Overdue string
	FailedHref, OverdueHref  string // empty where there is none
	Next                     string
	Late                     bool
	Year                     strip
}

// decision is one device that failed, with what failed and since when.
type decision struct {
	Verdict                            mark
	Href, Spot, Tag, What, Where, When string
	Bring                              string // parts its repair needs
	Late                               bool   // it may still hurt somebody
}

func (s *Server) overviewShow(c echo.Context) error {
	view := overviewPage{Frame: s.frame(c, s.words.Say("office.overview.title"), "overview")}
	err := s.store.View(scope(c), func(v *store.View) error { return s.buildOverview(v, &view) })
	if err != nil {
		return err
	}
	return s.page(c, http.StatusOK, "overview.html", view)
}

func (s *Server) buildOverview(v *store.View, view *overviewPage) error {
	sums, err := v.SitesSums()
	if err != nil {
		return err
	}
	k := s.ink()
	overdue, soon, devices := 0, 0, 0
	failed, worst, sites := store.DefectSums{}, store.SiteSums{}, map[string]store.Site{}
	for _, one := range sums {
		overdue, soon, devices = overdue+one.Overdue, soon+one.DueSoon, devices+one.Devices
		sites[one.Site.ID] = one.Site
		defects, err := v.DefectSums(one.Site.ID)
		if err != nil {
			return err
		}
		addSums(&failed, defects)
		if one.Overdue > worst.Overdue {
			worst = one
		}
		view.Sites = append(view.Sites, s.siteRow(one, defects.Devices, s.today(one.Site)))
	}
	if err := s.todo(v, sums, view); err != nil {
		return err
	}
	if err := s.decide(v, sites, view); err != nil {
		return err
	}
	if doubts, err := v.HeadDoubts(); err != nil {
		return err
	} else if view.Change && len(doubts) > 0 {
		view.Doubted = k.say("office.overview.doubted", "n", len(doubts))
	}
	today := forms.DayOf(s.store.Now())
	view.Heading = s.standing(failed, overdue)
	view.Sums = []sum{
		{"/defects", count(failed.Devices), k.say("office.overview.sum_failed", "n", failed.Devices), s.inUseUnder(failed), shapeIf(failed.Devices > 0, "fail")},
		{"/dates?within=late", count(overdue), k.say("office.overview.sum_overdue", "n", overdue), s.overdueUnder(overdue, worst), shapeIf(overdue > 0, "watch")},
		{"/dates", count(soon), k.say("office.overview.sum_due", "day", k.near(today+31, today)), k.say("office.overview.sum_due_under"), ""},
		{"/sites", count(devices), k.say("office.overview.sum_devices", "n", devices), k.say("office.overview.sum_sites", "n", len(sums)), ""},
	}
	if len(sums) == 0 {
		view.Heading, view.None = k.say("office.overview.no_site"), k.say("office.overview.no_site_other")
		if view.Change {
			view.None, view.NewSite = k.say("office.overview.no_site_manager"), "/sites/new"
		}
	}
	return nil
}

// standing says the fact in a sentence: 4 failed: 1 still in use for 26 hours. 37 tests overdue.
func (s *Server) standing(failed store.DefectSums, overdue int) string {
	var said []string
	if sentence := s.failedSentence(failed); sentence != "" {
		said = append(said, sentence)
	}
	if overdue > 0 {
		said = append(said, s.words.Say("office.overview.overdue", "n", overdue))
	}
	if len(said) == 0 {
		return s.words.Say("office.overview.calm")
	}
	return strings.Join(said, " ")
}

func (s *Server) inUseUnder(failed store.DefectSums) string {
	if failed.InUse > 0 {
		return s.words.Say("office.overview.sum_in_use", "n", failed.InUse)
	}
	return s.words.Say("office.overview.sum_failed_under")
}

func (s *Server) overdueUnder(overdue int, worst store.SiteSums) string {
	switch {
	case overdue == 0:
		return s.words.Say("office.overview.none_late")
	case worst.Overdue == overdue:
		return s.words.Say("office.overview.all_at", "site", worst.Site.Name)
	}
	return s.words.Say("office.overview.most_at", "n", count(worst.Overdue), "site", worst.Site.Name)
}

// decide names the open defects, what is still in use first.
func (s *Server) decide(v *store.View, sites map[string]store.Site, view *overviewPage) error {
	k := s.ink()
	list, err := v.Defects(store.DefectAsk{On: forms.DayOf(s.store.Now())})
	if err != nil {
		return err
	}
	for i := range list[:min(len(list), decideShown)] {
		one, err := s.decisionOf(v, &list[i], sites[list[i].Site])
		if err != nil {
			return err
		}
		view.Decide = append(view.Decide, one)
	}
	if len(list) > decideShown {
		view.More = []link{{Href: "/defects", Text: k.say("office.overview.more_failed", "n", count(len(list)))}}
	}
	return nil
}

// decisionOf says of a defect what failed, where, and what has been done about it.
func (s *Server) decisionOf(v *store.View, d *store.Defect, site store.Site) (decision, error) {
	k := s.ink()
	row, err := s.defectRow(v, d, site)
	one := decision{Verdict: row.Verdict, Href: row.Href, Spot: row.Spot, Tag: row.Tag, What: row.What, Where: row.Where, When: row.State}
	if d.InUse() {
		one.When, one.Late = k.say("office.defect.in_use_for", "age", row.Age), true
	}
	if len(d.Parts) > 0 {
		one.Bring = k.say("office.overview.bring", "parts", strings.Join(d.Parts, ", "))
	}
	return one, err
}

// whatFailed says in words what an entry failed by: the readings outside their limits with the limits, at most three.
func (s *Server) whatFailed(e store.Entry) string { return s.failedBy(e, "") }

// failedBy is whatFailed of one cause alone; "" = all.
func (s *Server) failedBy(e store.Entry, cause string) string {
	k := s.ink().calling(e.OwnNames)
	var said []string
	for _, f := range e.Verdict.Findings {
		if f.Verdict != forms.Fail || len(said) == 3 || cause != "" && f.Reading != cause {
			continue
		}
		r := findingReading(e.Body, f)
		text := k.reading(f.Reading) + ": " + lowerFirst(k.value(f.Reading, r))
		if limit := k.limit(f.Reading, f.Limit, f.Level); limit != "" {
			text += " (" + limit + ")"
		}
		text += "."
		if number := f.Limit != nil && (f.Limit.Min != nil || f.Limit.Max != nil); !number && k.words.Has(f.Text) {
			text = k.say(f.Text) // says more than yes and no
		}
		if !slices.Contains(said, text) {
			said = append(said, text)
		}
	}
	return strings.Join(said, " ")
}

func shapeIf(is bool, shape string) string {
	if is {
		return shape
	}
	return ""
}
