package server

import (
	"cmp"
	"net/http"
	"net/url"
	"strings"

	"github.com/labstack/echo/v4"

	"tripwell/forms"
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
		where, err := s.whichDevices(v, o.Devices, today)
		if err != nil {
			return err
		}
		view.Occasions = append(view.Occasions, askedRow{What: s.cause(o.Cause), Days: k.near(o.On, today), Where: where, Text: o.Text, By: v.PersonName(o.By)})
	}
	pauses, err := v.Pauses(site.ID)
	if err != nil {
		return err
	}
	for _, p := range pauses {
		where, err := s.whichDevices(v, p.Devices, today)
		if err != nil {
			return err
		}
		row := askedRow{Days: k.say("plans.mark_days", "from", k.day(p.From), "until", k.day(p.Until)), Where: where, Text: p.Reason, By: v.PersonName(p.By), Now: p.Holds(today)}
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

// devicesNamed is how many devices a list names one by one.
const devicesNamed = 3

// whichDevices names the devices something was said of, or says how many they are.
func (s *Server) whichDevices(v *store.View, ids []string, today forms.Day) (string, error) {
	switch {
	case len(ids) == 0:
		return s.words.Say("asked.whole"), nil
	case len(ids) > devicesNamed:
		return s.words.Say("asked.devices", "n", len(ids)), nil
	}
	names := make([]string, 0, len(ids))
	for _, id := range ids {
		d, err := v.Device(id, today)
		switch {
		case err == nil:
			names = append(names, s.spotIn(d.DeviceRow))
		case isRefusal(err):
			names = append(names, s.words.Say("office.round.unknown_device"))
		default:
			return "", err
		}
	}
	return strings.Join(names, "; "), nil
}
