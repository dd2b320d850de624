package server

import (
	"net/http"
	"slices"
	"sort"
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
	Sums           []sum
	Sites          []siteRow
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
}

// decision is one device that failed, with what failed and since when.
type decision struct {
	Verdict                            mark
	Href, Spot, Tag, What, Where, When string
	day                                forms.Day
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
	sums, err := siteSums(v, s.store.Now())
	if err != nil {
		return err
	}
	k := s.ink()
	failed, overdue, soon, devices := 0, 0, 0, 0
	worst := store.SiteSums{}
	for _, one := range sums {
		failed, overdue, soon, devices = failed+one.Failed, overdue+one.Overdue, soon+one.DueSoon, devices+one.Devices
		if one.Overdue > worst.Overdue {
			worst = one
		}
		view.Sites = append(view.Sites, s.siteRow(one, s.today(one.Site)))
		if err := s.decide(v, one, view); err != nil {
			return err
		}
	}
	sort.SliceStable(view.Decide, func(i, j int) bool { return view.Decide[i].day > view.Decide[j].day })
	view.Decide = view.Decide[:min(len(view.Decide), decideShown)]
	today := forms.DayOf(s.store.Now())
	view.Heading = s.standing(failed, overdue)
	view.Sums = []sum{
		{"/sites", count(failed), k.say("office.overview.sum_failed", "n", failed), k.say("office.overview.sum_failed_under"), shapeIf(failed > 0, "fail")},
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

// standing says the fact in a sentence: 4 devices failed. 37 tests overdue.
func (s *Server) standing(failed, overdue int) string {
	var said []string
	if failed > 0 {
		said = append(said, s.words.Say("office.overview.failed", "n", failed))
	}
	if overdue > 0 {
		said = append(said, s.words.Say("office.overview.overdue", "n", overdue))
	}
	if len(said) == 0 {
		return s.words.Say("office.overview.calm")
	}
	return strings.Join(said, " ")
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

// decide adds the failed devices of a site that its sums name, each with what its failed test found.
func (s *Server) decide(v *store.View, sums store.SiteSums, view *overviewPage) error {
	for _, d := range sums.LastFailed {
		task, last, ok := newestFail(d)
		if !ok {
			continue
		}
		entry, err := v.Entry(last.Entry)
		if err != nil {
			return err
		}
		since, err := failedSince(v, d.ID, task)
		if err != nil {
			return err
		}
		k, today := s.ink(), s.today(sums.Site)
		when := k.say("office.overview.failed_on", "task", k.named("task", task), "day", k.near(last.Day, today))
		if since < last.Day {
			when = k.say("office.overview.failed_since", "task", k.named("task", task), "day", k.near(since, today))
		}
		view.Decide = append(view.Decide, decision{
			Verdict: k.verdict(last.Result), Href: "/devices/" + d.ID, Spot: s.spot(d), Tag: k.tag(d.Tag),
			What: s.whatFailed(entry), Where: joined(sums.Site.Name, d.Place.Context()), When: when, day: last.Day,
		})
	}
	if sums.Failed > len(sums.LastFailed) {
		view.More = append(view.More, link{Href: siteHref(sums.Site) + "?state=failed", Text: s.words.Say("office.overview.more_failed", "n", count(sums.Failed), "site", sums.Site.Name)})
	}
	return nil
}

// newestFail gives the newest last test of a device that failed.
func newestFail(d store.DeviceRow) (task string, last store.LastTest, ok bool) {
	for _, t := range sortedKeys(d.Last) {
		if l := d.Last[t]; l.Result == forms.Fail && (!ok || l.Day > last.Day) {
			task, last, ok = t, l, true
		}
	}
	return task, last, ok
}

// failedSince gives the day of the first fail of the unbroken run of fails a task ends with. Tests that could not be
// made do not break the run.
func failedSince(v *store.View, device, task string) (forms.Day, error) {
	entries, err := v.Entries(device)
	since := forms.NoDay
	for _, e := range entries {
		if e.Task != task || e.Withdrawn != nil || e.Verdict.Result == forms.NotTested {
			continue
		}
		if e.Verdict.Result != forms.Fail {
			break
		}
		since = e.Day
	}
	return since, err
}

// whatFailed says in words what an entry failed by: the readings outside their limits with the limits, at most three.
func (s *Server) whatFailed(e store.Entry) string {
	k := s.ink()
	var said []string
	for _, f := range e.Verdict.Findings {
		if f.Verdict != forms.Fail || len(said) == 3 {
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
