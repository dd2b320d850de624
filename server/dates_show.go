package server

import (
	"cmp"
	"net/http"

	"github.com/labstack/echo/v4"

	"tripwell/forms"
	"tripwell/store"
)

// datesShown is how many dates the page lists.
const datesShown = 200

// datesPage lists tests by their date, as they stand on a day.
type datesPage struct {
	Frame
	Heading, Under, On, OnError string
	Sites, Tasks, Within        []option
	Groups                      []dateGroup
	More                        string
}

// dateGroup is a day with the tests that are due on it.
type dateGroup struct {
	Day, Count string
	Rows       []dateRow
	day        forms.Day
}

type dateRow struct {
	Href, Spot, Tag, Where, Task, State, Last string
	Late                                      bool
}

// datesAsk is what of the due list is asked for.
type datesAsk struct {
	site, task, within string
	on, today          forms.Day
}

func (s *Server) datesShow(c echo.Context) error {
	k := s.ink()
	view := datesPage{Frame: s.frame(c, k.say("office.dates.title"), "dates"), On: c.QueryParam("on")}
	ask := datesAsk{site: c.QueryParam("site"), task: c.QueryParam("task"), within: c.QueryParam("within"), today: forms.DayOf(s.store.Now())}
	if ask.on = ask.today; view.On != "" {
		day, err := forms.ParseDay(view.On)
		if err != nil {
			view.OnError = k.say("office.dates.bad_day")
		} else {
			ask.on = day
		}
	} else {
		view.On = ask.today.String()
	}
	err := s.store.View(scope(c), func(v *store.View) error { return s.buildDates(v, ask, &view) })
	if err != nil {
		return err
	}
	return s.page(c, http.StatusOK, "dates.html", view)
}

// windows are how far past the day asked for the list may reach.
var windows = map[string]forms.Day{"": 31, "late": 0, "92": 92}

func (s *Server) buildDates(v *store.View, ask datesAsk, view *datesPage) error {
	k := s.ink()
	sites, err := v.Sites()
	if err != nil {
		return err
	}
	names := map[string]string{}
	view.Sites = choices(ask.site, "", k.say("office.dates.all_sites"))
	for _, site := range sites {
		names[site.ID] = site.Name
		view.Sites = append(view.Sites, option{site.ID, site.Name, site.ID == ask.site || site.Code == ask.site})
	}
	view.Tasks = choices(ask.task, "", k.say("office.dates.all_tests"))
	for _, task := range forms.Tasks() {
		view.Tasks = append(view.Tasks, option{task, k.named("task", task), task == ask.task})
	}
	view.Within = choices(ask.within, "", k.say("office.dates.days31"), "late", k.say("office.dates.late"), "92", k.say("office.dates.days92"), "all", k.say("office.dates.all"))
	query := store.DueAsk{On: ask.on, Until: forms.NoDay, Task: ask.task}
	for _, o := range view.Sites {
		if o.Chosen && o.Value != "" {
			query.Site = o.Value
		}
	}
	if window, bounded := windows[ask.within]; bounded {
		query.Until = ask.on + window
	}
	overdue, coming, err := v.CountDue(query)
	if err != nil {
		return err
	}
	shown := 0
	for row, err := range v.Due(query) {
		if err != nil {
			return err
		}
		if row.State != forms.Overdue && ask.within == "late" {
			continue
		}
		if shown++; shown > datesShown {
			break
		}
		view.add(k.dueGroup(row, ask), s.dateRow(row, names, ask))
	}
	for i, g := range view.Groups {
		view.Groups[i].Count = k.say("office.dates.count", "n", len(g.Rows))
	}
	if shown > datesShown {
		view.More = k.say("office.dates.more", "n", count(datesShown))
	}
	s.datesHeading(view, ask, overdue, coming)
	return nil
}

// datesHeading says the fact first; of another day than today it says what that depends on.
func (s *Server) datesHeading(view *datesPage, ask datesAsk, overdue, coming int) {
	k := s.ink()
	view.Heading = k.say("office.dates.calm")
	if overdue > 0 {
		view.Heading = k.say("office.dates.heading", "n", overdue)
	}
	switch {
	case ask.on > ask.today:
		view.Heading = k.say("office.dates.future", "day", k.day(ask.on), "fact", lowerFirst(view.Heading))
	case ask.on < ask.today:
		view.Heading = k.say("office.dates.past", "day", k.day(ask.on), "fact", lowerFirst(view.Heading))
	}
	if window, bounded := windows[ask.within]; bounded && ask.within != "late" {
		view.Under = k.say("office.dates.due", "n", coming, "day", k.day(ask.on+window))
	}
}

// dueGroup is the heading a date is listed under.
func (k ink) dueGroup(row store.DueRow, ask datesAsk) dateGroup {
	if row.Due.Due == forms.NoDay {
		return dateGroup{Day: k.say("office.dates.never"), day: forms.NoDay}
	}
	return dateGroup{Day: k.longDay(row.Due.Due), day: row.Due.Due}
}

func (p *datesPage) add(group dateGroup, row dateRow) {
	if n := len(p.Groups); n == 0 || p.Groups[n-1].day != group.day {
		p.Groups = append(p.Groups, group)
	}
	g := &p.Groups[len(p.Groups)-1]
	g.Rows = append(g.Rows, row)
}

func (s *Server) dateRow(row store.DueRow, names map[string]string, ask datesAsk) dateRow {
	k := s.ink()
	out := dateRow{
		Href: "/devices/" + row.Device.ID, Spot: s.spot(row.Device), Tag: k.tag(row.Device.Tag), Where: cmp.Or(row.Device.Place.Context(), row.Device.Where), Task: k.named("task", row.Due.Task),
		State: k.named("state", row.State), Last: k.day(row.Due.Last), Late: row.State == "overdue",
	}
	out.Where = joined(out.Where, s.whereNow(row.Device, names))
	if ask.site == "" {
		out.Where = joined(names[row.Device.Site], out.Where)
	}
	if row.Due.Last == forms.NoDay {
		out.Last = k.say("office.day.never")
	}
	return out
}
