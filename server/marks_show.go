package server

import (
	"cmp"
	"net/http"
	"net/url"
	"slices"

	"github.com/labstack/echo/v4"

	"tripwell/forms"
	"tripwell/store"
)

// marksPage is the legend of a plan's marks, to be posted where the things are taken from, and what is not for use.
type marksPage struct {
	Frame
	Crumbs         []link
	Heading, Under string
	Marks          []markRow
	Old            []dateRow
	More           string
}

func (s *Server) marksShow(c echo.Context) error {
	all, site, err := s.planNow(c)
	if err != nil {
		return err
	}
	k, p, today := s.ink(), newestRevisions(all)[0].Plan, forms.DayOf(s.store.Now())
	if p.Marks == nil {
		return refuse(codeNotFound, "", k.say("marks.none"))
	}
	view := marksPage{Frame: s.frame(c, s.planName(p), "set-up"), Heading: k.say("marks.heading", "plan", s.planName(p)), Under: k.say("marks.under", "day", k.day(today)),
		Crumbs: []link{{Href: "/plans", Text: k.say("plans.title")}, {Href: planHref(p.ID, site.ID), Text: s.planName(p)}}}
	err = s.store.View(scope(c), func(v *store.View) error { return s.buildMarks(v, p, site.ID, today, &view) })
	if err != nil {
		return err
	}
	return s.page(c, http.StatusOK, "marks.html", view)
}

// buildMarks lists what carries an old mark or none, and gives each mark its last day: never later than the earliest
// date of the things that carry it.
func (s *Server) buildMarks(v *store.View, p *forms.Plan, site string, today forms.Day, view *marksPage) error {
	k, last := s.ink(), map[forms.Day]forms.Day{}
	for row, err := range v.Due(store.DueAsk{On: today, Until: forms.NoDay, Task: p.Task, Site: site}) {
		if err != nil {
			return err
		}
		if row.Plan != p.ID {
			continue
		}
		period, marked := p.Marks.On(row.Last)
		if marked && row.Last != forms.NoDay {
			if first, known := last[period.From]; !known || row.Due.Due < first {
				last[period.From] = row.Due.Due
			}
		}
		if row.State != forms.Overdue && row.Last != forms.NoDay {
			continue
		}
		if len(view.Old) == datesShown {
			view.More = k.say("office.dates.more", "n", count(datesShown))
			continue
		}
		old := dateRow{Href: "/devices/" + url.PathEscape(row.Device.ID), Spot: s.spot(row.Device), Tag: k.tag(row.Device.Tag), Where: cmp.Or(row.Device.Place.Context(), row.Device.Where), State: k.named("state", row.State), Last: k.say("marks.no_mark"), Late: row.State == forms.Overdue}
		if row.Last != forms.NoDay {
			old.Last = period.Word
		}
		view.Old = append(view.Old, old)
	}
	now, _ := p.Marks.On(today)
	before, _ := p.Marks.On(now.From - 1)
	for _, period := range []forms.MarkPeriod{before, now, p.Marks.After(now)} {
		row := markRow{Word: period.Word, Colour: period.Colour, Now: period == now, Days: k.say("plans.mark_days", "from", k.day(period.From), "until", k.day(period.Until))}
		if until, known := last[period.From]; known {
			key := "marks.good_until"
			if until < today {
				key = "marks.old_since"
			}
			row.Days = k.say(key, "days", row.Days, "day", k.day(until))
		}
		view.Marks = append(view.Marks, row)
	}
	return nil
}

// markFacts says which mark a device carries, and whether it is still good: the mark of the last test's period, where that was
// answered as put on.
func (s *Server) markFacts(v *store.View, d store.Device, entries []store.Entry, today forms.Day) ([]fact, error) {
	k := s.ink()
	all, err := v.Marks(d.Site, today)
	var out []fact
	for _, m := range all {
		i := slices.IndexFunc(d.Due, func(due store.Due) bool { return due.Task == m.Task })
		if m.Kind != d.Kind || i < 0 {
			continue
		}
		one, due := fact{Name: k.say("marks.fact")}, d.Due[i]
		now, _ := m.On(today)
		switch last, ok := m.On(due.Last); {
		case due.Last == forms.NoDay || !ok:
			one.Value = k.say("marks.fact_none", "now", now.Word)
		case !putOn(entries, m.Task, due.Last):
			one.Value = k.say("marks.fact_left_off", "word", last.Word, "day", k.day(due.Last))
		case due.State == forms.Overdue:
			one.Value = k.say("marks.fact_old", "word", last.Word, "day", k.day(due.Due))
		default:
			one.Value = k.say("marks.fact_good", "word", last.Word, "on", k.day(due.Last), "day", k.day(due.Due))
		}
		one.Href = planHref(due.Plan, "")
		out = append(out, one)
	}
	return out, err
}

// putOn says whether the mark was put on after the test of a day: it was, where nobody says otherwise.
func putOn(entries []store.Entry, task string, day forms.Day) bool {
	for _, e := range entries {
		if r, asked := e.Body.Readings["mark"]; asked && e.Task == task && e.Day == day && e.Withdrawn == nil {
			return r.Value == "yes"
		}
	}
	return true
}
