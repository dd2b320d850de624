package server

import (
	"cmp"
	"net/http"
	"net/url"
	"sort"
	"strconv"
	"strings"

	"github.com/labstack/echo/v4"

	"tripwell/forms"
	"tripwell/store"
)

// registerRows is how many devices a register page shows at once.
const registerRows = 500

// sitesPage lists the sites of the reader.
type sitesPage struct {
	Frame
	Heading, NewSite, None string
	Sites                  []siteRow
}

// sitePage is the register of one site in walking order.
type sitePage struct {
	Frame
	Crumbs                        []link
	Heading, Under, Action, Query string
	Actions                       []link
	Conflicts                     []conflictLine
	States                        []option
	Filtered                      bool
	Found, None                   string
	Groups                        []registerGroup
	Pager                         []link
	Items                         []itemsShown
}

// registerGroup is a room with its devices.
type registerGroup struct {
	Place string
	Rows  []registerRow
}

// registerRow is one device of a register.
type registerRow struct {
	Href, Spot, Tag, Kind, Circuit string
	Last                           mark
	LastWhen, Next                 string
	Late                           bool
}

func (s *Server) sitesShow(c echo.Context) error {
	view := sitesPage{Frame: s.frame(c, s.words.Say("office.site.title"), "sites")}
	err := s.store.View(scope(c), func(v *store.View) error {
		sums, err := v.SitesSums()
		for _, one := range sums {
			defects, err := v.DefectSums(one.Site.ID)
			if err != nil {
				return err
			}
			view.Sites = append(view.Sites, s.siteRow(one, defects.Devices, s.today(one.Site)))
		}
		return err
	})
	if err != nil {
		return err
	}
	view.Heading, view.None = s.words.Say("office.site.heading", "n", len(view.Sites)), s.words.Say("office.overview.no_site_other")
	if len(view.Sites) == 0 {
		view.Heading = s.words.Say("office.site.none")
	}
	if view.Change {
		view.NewSite, view.None = "/sites/new", s.words.Say("office.overview.no_site_manager")
	}
	return s.page(c, http.StatusOK, "sites.html", view)
}

// siteRow says how a site stands; failed is how many devices have an open defect.
func (s *Server) siteRow(sums store.SiteSums, failed int, today forms.Day) siteRow {
	k := s.ink()
	row := siteRow{
		Href: siteHref(sums.Site), Name: sums.Site.Name, Code: sums.Site.Code,
		Devices: count(sums.Devices), Failed: count(failed), Overdue: count(sums.Overdue), Next: dash,
	}
	if failed > 0 {
		row.FailedHref = "/defects?site=" + url.QueryEscape(cmp.Or(sums.Site.Code, sums.Site.ID))
	}
	if sums.Overdue > 0 {
		row.OverdueHref = row.Href + "?state=overdue"
	}
	row.Year = k.strip("/compliance?site="+url.QueryEscape(cmp.Or(sums.Site.Code, sums.Site.ID)), sums.Year)
	if sums.NextDay != forms.NoDay && sums.NextTask != "" {
		row.Next = joined(k.near(sums.NextDay, today), lowerFirst(k.named("task", sums.NextTask)))
		if sums.NextDay < today {
			row.Late, row.Next = true, joined(k.say("office.day.since", "day", k.near(sums.NextDay, today)), lowerFirst(k.named("task", sums.NextTask)))
		}
	}
	return row
}

func (s *Server) siteShow(c echo.Context) error {
	ask := registerAsk{query: strings.TrimSpace(c.QueryParam("q")), state: c.QueryParam("state")}
	ask.from, _ = strconv.Atoi(c.QueryParam("from"))
	view := sitePage{Frame: s.frame(c, "", "sites")}
	err := s.store.View(scope(c), func(v *store.View) error {
		site, err := v.Site(c.Param("site"))
		if err != nil {
			return err
		}
		return s.buildRegister(v, site, ask, &view)
	})
	if err != nil {
		return err
	}
	return s.page(c, http.StatusOK, "site.html", view)
}

// registerAsk is what of a register is asked for.
type registerAsk struct {
	query, state string // state: "" | overdue | failed | never | retired
	from         int    // the first row shown, from 0
}

func (s *Server) buildRegister(v *store.View, site store.Site, ask registerAsk, view *sitePage) error {
	k, today := s.ink(), s.today(site)
	all, found, late, failed := 0, 0, 0, 0
	open, err := v.OpenDefects(site.ID)
	if err != nil {
		return err
	}
	match, elsewhere := newSearch(ask.query), []store.DeviceRow(nil)
	for d, err := range v.Devices(site.ID) {
		if err != nil {
			return err
		}
		overdue, bad := overdueCount(d), open[d.ID] > 0
		if !d.Retired {
			all, late = all+1, late+overdue
			if bad {
				failed++
			}
			if d.AtSite != "" {
				elsewhere = append(elsewhere, d)
			}
		}
		if !ask.wants(d, overdue, bad) || !match.hits(d, k) {
			continue
		}
		if found++; found > ask.from && found <= ask.from+registerRows {
			view.add(s.place(d.Place), s.registerRow(d, today))
		}
	}
	items, err := s.itemsOfSite(v, site, elsewhere)
	if err != nil {
		return err
	}
	view.Items = items
	view.Title, view.Heading = site.Name, s.siteHeading(site, failed, late)
	view.Under = k.say("office.site.under", "n", all, "code", site.Code, "zone", site.Zone)
	if site.Address != "" {
		view.Under = joined(view.Under, site.Address)
	}
	view.Crumbs = []link{{Href: "/sites", Text: k.say("office.nav.sites")}}
	view.Action, view.Query, view.Filtered = siteHref(site), ask.query, ask.query != "" || ask.state != ""
	view.States = choices(ask.state, "", k.say("office.register.all"), "overdue", k.say("office.register.overdue"), "failed", k.say("office.register.failed"),
		"never", k.say("office.register.never"), "retired", k.say("office.register.retired"))
	view.Conflicts = s.conflicts(v, site.Conflicts, today)
	view.Found = k.say("office.register.found", "n", found)
	view.None = k.say("office.register.none")
	if view.Filtered {
		view.Found, view.None = k.say("office.register.found_of", "n", count(found), "all", count(all)), k.say("office.register.none_match")
	}
	view.Pager = registerPager(k, siteHref(site), ask, found)
	view.Actions = []link{{Href: siteHref(site) + "/circuits", Text: k.say("office.circuit.list")}, {Href: siteHref(site) + "/protection", Text: k.say("office.protection.title")}}
	if view.Change {
		view.Actions = append(view.Actions, link{Href: siteHref(site) + "/devices/new", Text: k.say("office.device.new"), Here: true}, link{Href: siteHref(site) + "/edit", Text: k.say("office.site.edit")}, link{Href: siteHref(site) + "/asked", Text: k.say("asked.title")}, link{Href: siteHref(site) + "/calendar", Text: k.say("kept.open_calendar")})
	}
	return nil
}

// wants says whether a device belongs to the chosen state. Retired devices are shown only when they are asked for.
func (a registerAsk) wants(d store.DeviceRow, overdue int, failed bool) bool {
	if d.Retired != (a.state == "retired") {
		return false
	}
	switch a.state {
	case "overdue":
		return overdue > 0
	case "failed":
		return failed
	case "never":
		return len(d.Last) == 0
	}
	return true
}

func (s *Server) siteHeading(site store.Site, failed, late int) string {
	var facts []string
	if failed > 0 {
		facts = append(facts, s.words.Say("office.site.failed", "n", failed))
	}
	if late > 0 {
		facts = append(facts, s.words.Say("office.site.overdue", "n", late))
	}
	if len(facts) == 0 {
		return s.words.Say("office.site.calm", "name", site.Name)
	}
	return s.words.Say("office.site.fact", "name", site.Name, "facts", strings.Join(facts, ", "))
}

// add puts a row under its room; rows come in walking order, so a room is complete when the next begins.
func (p *sitePage) add(place string, row registerRow) {
	if n := len(p.Groups); n == 0 || p.Groups[n-1].Place != place {
		p.Groups = append(p.Groups, registerGroup{Place: place})
	}
	g := &p.Groups[len(p.Groups)-1]
	g.Rows = append(g.Rows, row)
}

func (s *Server) registerRow(d store.DeviceRow, today forms.Day) registerRow {
	k := s.ink()
	row := registerRow{Href: "/devices/" + d.ID, Spot: s.spot(d), Tag: k.tag(d.Tag), Kind: s.kindAndRating(d), Circuit: circuit(d), Last: k.verdict("")}
	if task, last, ok := lastStanding(d); ok {
		row.Last = k.verdict(last.Result)
		row.LastWhen = joined(k.named("task", task), k.near(last.Day, today))
	}
	row.Next, row.Late = s.nextOf(d, today)
	return row
}

// lastStanding gives the last test a reader must know of: the newest of those with the worst result.
func lastStanding(d store.DeviceRow) (task string, last store.LastTest, ok bool) {
	for _, t := range sortedKeys(d.Last) {
		l := d.Last[t]
		if better := !ok || severity(l.Result) > severity(last.Result) || severity(l.Result) == severity(last.Result) && l.Day > last.Day; better {
			task, last, ok = t, l, true
		}
	}
	return task, last, ok
}

// severity orders results for lastStanding: what asks for work stands before what is only newer.
func severity(result string) int {
	switch result {
	case forms.Fail:
		return 3
	case forms.ConditionalFail:
		return 2
	case forms.Incomplete:
		return 1
	}
	return 0
}

// nextOf names the first date of a device, and whether it has passed.
func (s *Server) nextOf(d store.DeviceRow, today forms.Day) (text string, late bool) {
	k := s.ink()
	if d.Retired || len(d.Due) == 0 {
		return dash, false
	}
	due := append([]store.Due(nil), d.Due...)
	sort.SliceStable(due, func(i, j int) bool { return due[i].Due < due[j].Due })
	first := due[0]
	task := lowerFirst(k.named("task", first.Task))
	switch {
	case first.State == "overdue":
		return joined(k.say("office.register.overdue_since", "day", k.near(first.Due, today)), task), true
	case first.State == "never-tested" && first.Due == forms.NoDay:
		return joined(k.say("office.register.first"), task), false
	}
	return joined(k.near(first.Due, today), task), false
}

func overdueCount(d store.DeviceRow) (n int) {
	for _, due := range d.Due {
		if due.State == "overdue" {
			n++
		}
	}
	return n
}

func registerPager(k ink, action string, ask registerAsk, found int) []link {
	if found <= registerRows {
		return nil
	}
	var out []link
	for from := 0; from < found; from += registerRows {
		q := url.Values{"q": {ask.query}, "state": {ask.state}, "from": {strconv.Itoa(from)}}
		out = append(out, link{Href: action + "?" + q.Encode(), Text: k.say("office.register.page", "from", count(from+1), "to", count(min(from+registerRows, found))), Here: from == ask.from})
	}
	return out
}
