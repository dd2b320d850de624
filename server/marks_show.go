package server

import (
	"net/http"
	"net/url"

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
		old := dateRow{Href: "/devices/" + url.PathEscape(row.Device.ID), Spot: s.spot(row.Device), Tag: k.tag(row.Device.Tag), Where: row.Device.Place.Context(), State: k.named("state", row.State), Last: k.say("marks.no_mark"), Late: row.State == forms.Overdue}
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
			row.Days = k.say("marks.good_until", "days", row.Days, "day", k.day(until))
		}
		view.Marks = append(view.Marks, row)
	}
	return nil
}
