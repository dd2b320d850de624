package server

import (
	"net/http"
	"net/url"

	"github.com/labstack/echo/v4"

	"tripwell/forms"
	"tripwell/store"
)

// compliancePage says how dates were kept over a span of days.
type compliancePage struct {
	Frame
	Heading, Under, From, To, Wrong string
	Sites, Known                    []option
	Bars                            []keptBar
	Tables                          []keptTable
	Standing                        []standingLine
	StandingHead                    string
	Actions                         []link
	KnownText                       string // what as known now or then leaves in or out
	Files                           []link
}

// keptBar is one month as a bar; its figures stand in the table of months.
type keptBar struct{ Class, Month, Share string }

// keptTable counts what became of dates, by month, site, test or device.
type keptTable struct {
	Head, By string
	Rows     []keptRow
}

type keptRow struct {
	Name, Href                                           string
	Due, InTime, Graced, Late, Missed, NoAccess, Open, P string
}

type standingLine struct{ Task, Kind, Upcoming, Due, Graced, Overdue, Never, Paused string }

// complianceAsk is what the page is asked for.
type complianceAsk struct {
	site     string
	from, to forms.Day
	today    forms.Day
	then     bool
}

// keptDays is the longest span a page works out.
const keptDays = 366 * 3

func (s *Server) complianceShow(c echo.Context) error {
	k, today := s.ink(), forms.DayOf(s.store.Now())
	view := compliancePage{Frame: s.frame(c, k.say("kept.title"), "dates"), From: c.QueryParam("from"), To: c.QueryParam("to")}
	ask := complianceAsk{today: today, site: c.QueryParam("site"), from: forms.MonthStart(forms.MonthOf(today) - 11), to: forms.MonthStart(forms.MonthOf(today)+1) - 1, then: c.QueryParam("known") == "then"}
	for _, one := range []struct {
		typed string
		day   *forms.Day
	}{{view.From, &ask.from}, {view.To, &ask.to}} {
		if one.typed == "" {
			continue
		}
		day, err := forms.ParseDay(one.typed)
		if err != nil {
			view.Wrong = k.say("office.dates.bad_day")
			continue
		}
		*one.day = day
	}
	if ask.to < ask.from || ask.to-ask.from > keptDays {
		view.Wrong, ask.from = k.say("kept.bad_span"), ask.to
	}
	view.From, view.To = ask.from.String(), ask.to.String()
	err := s.store.View(scope(c), func(v *store.View) error { return s.buildCompliance(v, ask, &view) })
	if err != nil {
		return err
	}
	return s.page(c, http.StatusOK, "compliance.html", view)
}

func (s *Server) buildCompliance(v *store.View, ask complianceAsk, view *compliancePage) error {
	k := s.ink()
	sites, err := v.Sites()
	if err != nil {
		return err
	}
	names, place := map[string]store.Site{}, k.say("kept.all_sites")
	view.Sites = choices(ask.site, "", k.say("office.dates.all_sites"))
	for _, site := range sites {
		names[site.ID] = site
		chosen := site.ID == ask.site || site.Code == ask.site
		if chosen {
			place, view.Actions = site.Name, []link{{Href: siteHref(site) + "/calendar?month=" + ask.to.String()[:7], Text: k.say("kept.open_calendar")}}
		}
		view.Sites = append(view.Sites, option{site.Code, site.Name, chosen})
	}
	known := "now"
	if ask.then {
		known = "then"
	}
	view.Known = choices(known, "now", k.say("kept.known_now"), "then", k.say("kept.known_then"))
	view.KnownText = k.say("kept.explained_" + known)
	view.links(k, ask)
	kept, err := keptOver(v, ask)
	if err != nil {
		return err
	}
	s.keptTables(kept, names, ask, view)
	s.standingLines(kept.Standing, ask, view)
	all := forms.Count{}
	for _, r := range kept.Rows {
		all.Join(r.Count)
	}
	days := k.say("plans.mark_days", "from", k.day(ask.from), "until", k.day(ask.to))
	if percent, ok := all.Percent(); ok {
		view.Heading = k.say("kept.heading", "place", place, "percent", k.amount(count(percent), "%"))
	} else {
		view.Heading = k.say("kept.none", "place", place)
	}
	view.Under = k.say("kept.under", "days", days, "due", count(all.Due()), "known", lowerFirst(k.say("kept.known_"+known)))
	return nil
}

// links lead to the same span as it was known otherwise, and to its months as files.
func (p *compliancePage) links(k ink, ask complianceAsk) {
	query := url.Values{"from": {p.From}, "to": {p.To}}
	if ask.site != "" {
		query.Set("site", ask.site)
	}
	if p.Role != "crew" {
		for _, as := range []string{"csv", "jsonl"} {
			p.Files = append(p.Files, link{Href: "/table?sheet=compliance&as=" + as + "&" + query.Encode(), Text: k.say("kept.file_" + as)})
		}
	}
	other := "then"
	if ask.then {
		other = "now"
	}
	query.Set("known", other)
	p.Actions = append(p.Actions, link{Href: "/compliance?" + query.Encode(), Text: k.say("kept.see_" + other)})
}

// keptOver works the span out; as known then, each month as it was known at its own end.
func keptOver(v *store.View, ask complianceAsk) (store.Compliance, error) {
	if !ask.then {
		return v.Compliance(store.ComplianceAsk{Site: ask.site, From: ask.from, To: ask.to, Known: forms.NoDay})
	}
	var all store.Compliance
	for m := forms.MonthOf(ask.from); m <= forms.MonthOf(ask.to); m++ {
		from, to := max(ask.from, forms.MonthStart(m)), min(ask.to, forms.MonthStart(m+1)-1)
		one, err := v.Compliance(store.ComplianceAsk{Site: ask.site, From: from, To: to, Known: to})
		if err != nil {
			return all, err
		}
		all.Rows, all.Standing = append(all.Rows, one.Rows...), one.Standing
	}
	return all, nil
}

// keptTables lays the rows out by month, site, test and kind of device.
func (s *Server) keptTables(kept store.Compliance, names map[string]store.Site, ask complianceAsk, view *compliancePage) {
	k := s.ink()
	by := func(key func(store.ComplianceRow) string) (map[string]forms.Count, []string) {
		sums := map[string]forms.Count{}
		for _, r := range kept.Rows {
			c := sums[key(r)]
			c.Join(r.Count)
			sums[key(r)] = c
		}
		return sums, sortedKeys(sums)
	}
	months, _ := by(func(r store.ComplianceRow) string { return forms.MonthStart(r.Month).String() })
	table := keptTable{Head: k.say("kept.by_month"), By: k.say("kept.month")}
	for m := forms.MonthOf(ask.from); m <= forms.MonthOf(ask.to); m++ {
		c := months[forms.MonthStart(m).String()]
		row := s.keptRow(k.month(m), "", c)
		table.Rows = append(table.Rows, row)
		view.Bars = append(view.Bars, keptBar{barClass(c), k.month(m), row.P})
	}
	view.Tables = append(view.Tables, table)
	add := func(head, what string, key func(store.ComplianceRow) string, name func(string) (string, string)) {
		sums, keys := by(key)
		table := keptTable{Head: k.say(head), By: k.say(what)}
		for _, one := range keys {
			text, href := name(one)
			table.Rows = append(table.Rows, s.keptRow(text, href, sums[one]))
		}
		if len(table.Rows) > 0 {
			view.Tables = append(view.Tables, table)
		}
	}
	if ask.site == "" {
		add("kept.by_site", "office.col.site", func(r store.ComplianceRow) string { return names[r.Site].Code }, func(code string) (string, string) {
			for _, site := range names {
				if site.Code == code {
					return site.Name, "/compliance?site=" + url.QueryEscape(code) + "&from=" + view.From + "&to=" + view.To
				}
			}
			return code, ""
		})
	}
	add("kept.by_task", "office.col.test", func(r store.ComplianceRow) string { return r.Task }, func(task string) (string, string) { return k.named("task", task), "" })
	add("kept.by_kind", "office.col.kind", func(r store.ComplianceRow) string { return r.Kind }, func(kind string) (string, string) { return k.named("kind", kind), "" })
}

func (s *Server) keptRow(name, href string, c forms.Count) keptRow {
	row := keptRow{Name: name, Href: href, Due: count(c.Due()), InTime: count(c.InTime), Graced: count(c.Graced), Late: count(c.Late), Missed: count(c.Missed), NoAccess: count(c.NoAccess), Open: count(c.Open), P: dash}
	if percent, ok := c.Percent(); ok {
		row.P = s.ink().amount(count(percent), "%")
	}
	return row
}

// standingLines says how dates stood at the end of the last day.
func (s *Server) standingLines(rows []store.StandingRow, ask complianceAsk, view *compliancePage) {
	k := s.ink()
	type key struct{ task, kind string }
	sums := map[string]map[string]int{}
	at := map[string]key{}
	for _, r := range rows {
		name := r.Task + "/" + r.Kind
		if at[name] = (key{r.Task, r.Kind}); sums[name] == nil {
			sums[name] = map[string]int{}
		}
		for state, n := range r.States {
			sums[name][state] += n
		}
	}
	view.StandingHead = k.say("kept.standing", "day", k.day(min(ask.to, ask.today)))
	for _, name := range sortedKeys(sums) {
		n := sums[name]
		view.Standing = append(view.Standing, standingLine{k.named("task", at[name].task), k.named("kind", at[name].kind), count(n[forms.Upcoming]), count(n[forms.DueNow]),
			count(n[forms.InGrace]), count(n[forms.Overdue]), count(n[forms.NeverTested]), count(n[forms.Paused])})
	}
}
