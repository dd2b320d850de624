package server

import (
	"cmp"
	"fmt"
	"net/http"
	"slices"
	"strings"

	"github.com/labstack/echo/v4"

	"tripwell/forms"
	"tripwell/store"
)

// circuitsPage lists a site's panels with their circuits, or is the directory of one panel, to be printed and hung in its
// door.
type circuitsPage struct {
	Frame
	Crumbs        []link
	Heading, Lead string
	Conflicts     []conflictLine
	Actions       []link
	Panels        []panelShown
	None          string
	Note          string
}

// panelShown is a panel with its directory.
type panelShown struct {
	Name, Href, Where string
	Circuits          []circuitRow
}

// circuitRow is a circuit in a directory.
type circuitRow struct {
	Href, Numbers, Breaker, Poles, Conductor string
	Feeds                                    string
	Devices                                  []link // in order from the breaker on
	Flags                                    []mark
}

func (s *Server) circuitsShow(c echo.Context) error {
	view := circuitsPage{Frame: s.frame(c, s.words.Say("office.circuit.list"), "sites")}
	err := s.store.View(scope(c), func(v *store.View) error {
		site, err := v.Site(c.Param("site"))
		if err != nil {
			return err
		}
		return s.buildCircuits(v, site, "", &view)
	})
	if err != nil {
		return err
	}
	return s.page(c, http.StatusOK, "circuits.html", view)
}

func (s *Server) panelShow(c echo.Context) error {
	view := circuitsPage{Frame: s.frame(c, "", "sites")}
	err := s.store.View(scope(c), func(v *store.View) error {
		panel, site, err := v.Panel(c.Param("panel"))
		if err != nil {
			return err
		}
		if err := s.buildCircuits(v, site, panel.ID, &view); err != nil {
			return err
		}
		k := s.ink()
		view.Title = k.say("office.circuit.panel_title", "panel", panel.Name)
		view.Heading, view.Lead = k.say("office.circuit.directory", "panel", unbroken(panel.Name)), joined(site.Name, panel.Location)
		view.Note = k.say("office.circuit.directory_note")
		view.Conflicts = s.conflicts(v, panel.Conflicts, s.today(site))
		view.Crumbs = append(view.Crumbs, link{Href: siteHref(site) + "/circuits", Text: k.say("office.circuit.list")})
		if view.Actions = nil; view.Change {
			view.Actions = []link{{Href: "/panels/" + panel.ID + "/edit", Text: k.say("office.circuit.panel_edit")}, {Href: siteHref(site) + "/circuits/new?panel=" + panel.ID, Text: k.say("office.circuit.new")}}
		}
		return nil
	})
	if err != nil {
		return err
	}
	return s.page(c, http.StatusOK, "circuits.html", view)
}

// buildCircuits fills the directories of a site's panels, or of one.
func (s *Server) buildCircuits(v *store.View, site store.Site, only string, view *circuitsPage) error {
	k := s.ink()
	panels, err := v.Panels(site.ID)
	if err != nil {
		return err
	}
	circuits, err := v.Circuits(site.ID)
	if err != nil {
		return err
	}
	p, err := v.SiteProtection(site.ID, s.today(site))
	if err != nil {
		return err
	}
	shown := map[string]int{}
	for _, panel := range panels {
		if only == "" || only == panel.ID {
			shown[panel.ID] = len(view.Panels)
			view.Panels = append(view.Panels, panelShown{Name: unbroken(panel.Name), Href: "/panels/" + panel.ID, Where: panel.Location})
		}
	}
	n, flagged := 0, 0
	for _, one := range circuits {
		at, ok := shown[one.PanelID]
		if !ok {
			if only != "" {
				continue
			}
			at, shown[one.PanelID] = len(view.Panels), len(view.Panels)
			view.Panels = append(view.Panels, panelShown{Name: cmp.Or(unbroken(one.Panel), k.say("office.circuit.no_panel"))})
		}
		row := s.circuitRow(p, one)
		if n++; len(row.Flags) > 0 {
			flagged++
		}
		view.Panels[at].Circuits = append(view.Panels[at].Circuits, row)
	}
	view.Title, view.Crumbs = k.say("office.circuit.list"), []link{{Href: siteHref(site), Text: site.Name}}
	view.Heading = k.say("office.circuit.heading", "n", n, "panels", k.say("office.circuit.panels", "n", len(panels)))
	if view.None = k.say("office.circuit.none"); flagged > 0 {
		view.Lead = k.say("office.circuit.flagged", "n", flagged)
	}
	view.Actions = []link{{Href: siteHref(site) + "/protection", Text: k.say("office.protection.title")}}
	if view.Change {
		view.Actions = append(view.Actions, link{Href: siteHref(site) + "/panels/new", Text: k.say("office.circuit.panel_new")}, link{Href: siteHref(site) + "/circuits/new", Text: k.say("office.circuit.new")})
	}
	return nil
}

func (s *Server) circuitRow(p *store.Protection, c store.Circuit) circuitRow {
	k := s.ink()
	row := circuitRow{Href: "/circuits/" + c.ID, Numbers: cmp.Or(c.Numbers, dash), Breaker: s.breaker(c), Conductor: s.conductor(c), Feeds: c.Text("feeds")}
	if poles := c.Number("poles"); poles > 0 {
		row.Poles = number(poles)
	}
	var rooms []string
	for _, d := range alongCircuit(p, c.ID) {
		row.Devices = append(row.Devices, link{Href: "/devices/" + d.ID, Text: s.spot(d.DeviceRow)})
		if room := cmp.Or(d.Place.Room, d.Place.Floor); room != "" && !slices.Contains(rooms, room) {
			rooms = append(rooms, room)
		}
	}
	if row.Feeds == "" {
		row.Feeds = strings.Join(rooms, ", ")
	}
	for _, check := range s.circuitChecks(p, c) {
		if check.Mark.Shape == "watch" {
			row.Flags = append(row.Flags, mark{"watch", k.say("office.circuit.check." + check.kind + ".short")})
		}
	}
	row.Flags = slices.Compact(row.Flags)
	return row
}

// alongCircuit gives the devices of a circuit from its breaker on, each followed by what its LOAD terminals feed.
func alongCircuit(p *store.Protection, circuit string) (out []store.OnMap) {
	breakers, runs := p.Runs(circuit)
	add := func(id string) {
		if d, ok := p.Device(id); ok && !d.Retired {
			out = append(out, d)
		}
	}
	var walk func([]forms.Run)
	walk = func(runs []forms.Run) {
		for _, r := range runs {
			add(r.ID)
			walk(r.Load)
		}
	}
	for _, b := range breakers {
		add(b)
	}
	walk(runs)
	return out
}

// breaker writes a circuit's breaker: 20 A, GFCI.
func (s *Server) breaker(c store.Circuit) string {
	k, text := s.ink(), ""
	if a := c.Number("breaker_a"); a > 0 {
		text = k.amount(number(a), "A")
	}
	if kind := c.Text("breaker_type"); kind != "" {
		text = strings.TrimPrefix(fmt.Sprintf("%s, %s", text, k.named("office.circuit.type", kind)), ", ")
	}
	return text
}

func (s *Server) conductor(c store.Circuit) string {
	return strings.ReplaceAll(c.Text("conductor"), " ", "\u00a0")
}

// circuitName writes panel and circuit as electricians do: LP-2 / 14.
func circuitName(c store.Circuit) string {
	return circuit(store.DeviceRow{Panel: c.Panel, Circuit: c.Numbers})
}

// unbroken keeps a panel's name in one piece.
func unbroken(name string) string { return strings.ReplaceAll(name, "-", hyphen) }
