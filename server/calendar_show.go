package server

import (
	"net/http"
	"strconv"

	"github.com/labstack/echo/v4"

	"tripwell/forms"
	"tripwell/store"
)

// calendarPage is one month of a site, week by week from Monday.
type calendarPage struct {
	Frame
	Crumbs         []link
	Heading, Under string
	Before, After  link
	Days           []string // names of the days of a week
	Weeks          [][]calendarDay
	Pauses         []string // of the month, with their reasons
}

// calendarDay says what was done on a day and whose last day it was.
type calendarDay struct {
	Number, Name               string // empty: a day of another month
	Today                      bool
	Done, Late, Missed, Coming string
	Href                       string
	Rounds                     []link
}

func (s *Server) calendarShow(c echo.Context) error {
	site, err := s.siteOf(c)
	if err != nil {
		return err
	}
	today := s.today(site)
	month := forms.MonthOf(today)
	if typed := c.QueryParam("month"); typed != "" {
		day, err := forms.ParseDay(typed + "-01")
		if err != nil {
			return refuse(codeInvalid, "month", s.words.Say("kept.bad_month"))
		}
		month = forms.MonthOf(day)
	}
	k := s.ink()
	view := calendarPage{Frame: s.frame(c, site.Name, "sites"), Crumbs: []link{{Href: siteHref(site), Text: site.Name}}, Before: s.monthLink(site, month-1), After: s.monthLink(site, month+1)}
	for i := range 7 {
		view.Days = append(view.Days, k.list("office.day.wd", (i+1)%7))
	}
	err = s.store.View(scope(c), func(v *store.View) error {
		days, err := v.Days(site.ID, forms.MonthStart(month), forms.MonthStart(month+1)-1)
		if err != nil {
			return err
		}
		rounds, err := s.calendarRounds(v, site)
		if err != nil {
			return err
		}
		s.calendarWeeks(days, rounds, site, today, &view)
		view.Heading = k.say("kept.calendar", "site", site.Name, "month", k.month(month))
		return s.calendarPauses(v, site, forms.MonthStart(month), forms.MonthStart(month+1)-1, &view)
	})
	if err != nil {
		return err
	}
	return s.page(c, http.StatusOK, "calendar.html", view)
}

func (s *Server) monthLink(site store.Site, month int32) link {
	return link{Href: siteHref(site) + "/calendar?month=" + forms.MonthStart(month).String()[:7], Text: s.ink().month(month)}
}

// calendarWeeks lays days out in weeks (ISO 8601: from Monday).
func (s *Server) calendarWeeks(days []store.DayRow, rounds map[forms.Day][]link, site store.Site, today forms.Day, view *calendarPage) {
	k, sum := s.ink(), store.DayRow{}
	week := make([]calendarDay, (int(days[0].Day.Time().Weekday())+6)%7, 7)
	for _, d := range days {
		one := calendarDay{Number: strconv.Itoa(d.Day.Time().Day()), Name: k.longDay(d.Day), Today: d.Day == today, Rounds: rounds[d.Day]}
		say := func(n int, key string) string {
			if n == 0 {
				return ""
			}
			return k.say(key, "n", n)
		}
		one.Done, one.Late, one.Missed, one.Coming = say(d.InTime, "kept.cell_done"), say(d.Late, "kept.cell_late"), say(d.Missed, "kept.cell_missed"), say(d.Open, "kept.cell_due")
		if d.Missed+d.Open > 0 {
			one.Href = "/dates?within=all&site=" + site.Code
		}
		sum.InTime, sum.Late, sum.Missed, sum.Open = sum.InTime+d.InTime, sum.Late+d.Late, sum.Missed+d.Missed, sum.Open+d.Open
		if week = append(week, one); len(week) == 7 {
			view.Weeks, week = append(view.Weeks, week), nil
		}
	}
	if len(week) > 0 {
		view.Weeks = append(view.Weeks, append(week, make([]calendarDay, 7-len(week))...))
	}
	view.Under = k.say("kept.calendar_under", "done", count(sum.InTime), "late", count(sum.Late), "missed", count(sum.Missed), "open", count(sum.Open))
}

// calendarRounds gives a site's rounds by the day they are planned for; those called off are left out.
func (s *Server) calendarRounds(v *store.View, site store.Site) (map[forms.Day][]link, error) {
	rounds, err := v.Rounds(site.ID)
	out := map[forms.Day][]link{}
	for _, r := range rounds {
		if r.State != store.RoundOff && r.Day != forms.NoDay {
			out[r.Day] = append(out[r.Day], link{Href: "/rounds/" + r.ID, Text: s.words.Say("kept.cell_round", "done", r.Counts[store.StopDone], "of", total(r.Counts))})
		}
	}
	return out, err
}

// calendarPauses says which pauses fall into the month, and why.
func (s *Server) calendarPauses(v *store.View, site store.Site, from, until forms.Day, view *calendarPage) error {
	k := s.ink()
	pauses, err := v.Pauses(site.ID)
	if err != nil {
		return err
	}
	for _, p := range pauses {
		if p.From > until || p.Until < from {
			continue
		}
		where, err := s.whichDevices(v, p.Devices, s.today(site))
		if err != nil {
			return err
		}
		view.Pauses = append(view.Pauses, k.say("kept.paused", "from", k.day(p.From), "until", k.day(p.Until), "where", where, "reason", p.Reason))
	}
	return nil
}
