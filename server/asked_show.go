package server

import (
	"cmp"
	"net/http"
	"net/url"

	"github.com/labstack/echo/v4"

	"tripwell/store"
)

// askedPage lists what made tests due at once at a site, and the days on which none are asked for.
type askedPage struct {
	Frame
	Crumbs        []link
	Heading, Lead string
	Actions       []link
	Occasions     []askedRow
	Pauses        []askedRow
}

// askedRow is an occasion or a pause.
type askedRow struct {
	Href, What, Days, Where, Text, By string
	Now                               bool
}

func (s *Server) askedShow(c echo.Context) error {
	site, err := s.siteOf(c)
	if err != nil {
		return err
	}
	k := s.ink()
	view := askedPage{Frame: s.frame(c, k.say("asked.title"), "sites"), Crumbs: []link{{Href: siteHref(site), Text: site.Name}}, Heading: k.say("asked.heading", "site", site.Name), Lead: k.say("asked.lead")}
	if view.Change {
		view.Actions = []link{{Href: siteHref(site) + "/occasion", Text: k.say("asked.occasion_new"), Here: true}, {Href: siteHref(site) + "/pause", Text: k.say("asked.pause_new")}}
	}
	err = s.store.View(scope(c), func(v *store.View) error { return s.buildAsked(v, site, &view) })
	if err != nil {
		return err
	}
	return s.page(c, http.StatusOK, "asked.html", view)
}

func (s *Server) buildAsked(v *store.View, site store.Site, view *askedPage) error {
	k, today := s.ink(), s.today(site)
	occasions, err := v.Occasions(site.ID)
	if err != nil {
		return err
	}
	for _, o := range occasions {
		view.Occasions = append(view.Occasions, askedRow{What: s.cause(o.Cause), Days: k.near(o.On, today), Where: s.howMany(o.Devices), Text: o.Text, By: v.PersonName(o.By)})
	}
	pauses, err := v.Pauses(site.ID)
	if err != nil {
		return err
	}
	for _, p := range pauses {
		row := askedRow{Days: k.say("plans.mark_days", "from", k.day(p.From), "until", k.day(p.Until)), Where: s.howMany(len(p.Devices)), Text: p.Reason, By: v.PersonName(p.By), Now: p.Holds(today)}
		if view.Change {
			row.Href = siteHref(site) + "/pause?pause=" + url.QueryEscape(p.ID)
		}
		view.Pauses = append(view.Pauses, row)
	}
	return nil
}

// cause names what made tests due at once; a cause of a newer program stands as it was written.
func (s *Server) cause(cause string) string {
	if s.words.Has("plans.cause." + cause) {
		return s.words.Say("plans.cause." + cause)
	}
	return cmp.Or(cause, dash)
}

func (s *Server) howMany(devices int) string {
	if devices == 0 {
		return s.words.Say("asked.whole")
	}
	return s.words.Say("office.overview.sum_devices", "n", devices)
}
