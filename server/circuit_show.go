package server

import (
	"cmp"
	"net/http"
	"strings"

	"github.com/labstack/echo/v4"

	"tripwell/forms"
	"tripwell/store"
)

// circuitPage is one circuit: drawn, told, and held against its nameplate.
type circuitPage struct {
	Frame
	Crumbs        []link
	Heading, Lead string
	State         []mark
	Conflicts     []conflictLine
	Loops         []string
	Off           []string // what switching the breaker off takes the power from, critical loads first
	OffCritical   string
	Drawing       drawing
	Told          []runShown
	Differs       []foundShown // found otherwise than the map says
	Checks        []checkShown
	Facts         []fact
	Actions       []link
}

// runShown is a device in the told form of a drawing.
type runShown struct {
	Href, Spot, What, Critical string
	Cover                      mark
	Found                      *foundShown // when somebody tripped what is ahead of it; nil where nothing is known
	Load                       []runShown
}

// foundShown is what an outlet was found to be, with who saw it and when.
type foundShown struct {
	Mark       mark
	Spot, Text string // Text says what the map says instead, "" where it agrees
	Href       string // the test or the defect that says so
}

func (s *Server) circuitShow(c echo.Context) error {
	view := circuitPage{Frame: s.frame(c, "", "sites")}
	err := s.store.View(scope(c), func(v *store.View) error {
		one, site, lost, err := v.Circuit(c.Param("circuit"))
		if err != nil {
			return err
		}
		p, err := v.ProtectionOn(one.ID, s.today(site))
		if err != nil {
			return err
		}
		view.Conflicts = s.conflicts(v, lost, s.today(site))
		found, err := s.foundOn(v, site, p, p.OnCircuit(one.ID), &view)
		if err != nil {
			return err
		}
		s.buildCircuit(site, one, p, found, &view)
		return nil
	})
	if err != nil {
		return err
	}
	return s.page(c, http.StatusOK, "circuit.html", view)
}

func (s *Server) buildCircuit(site store.Site, c store.Circuit, p *store.Protection, found map[string]*foundShown, view *circuitPage) {
	k := s.ink()
	on := alongCircuit(p, c.ID)
	view.Title = k.say("office.circuit.title", "circuit", cmp.Or(circuitName(c), dash))
	view.Heading = k.say("office.circuit.feeds", "n", len(on), "circuit", cmp.Or(circuitName(c), dash))
	view.Lead = joined(s.breaker(c), s.conductor(c), c.Text("feeds"))
	view.Crumbs = []link{{Href: siteHref(site), Text: site.Name}, {Href: siteHref(site) + "/circuits", Text: k.say("office.circuit.list")}}
	if c.PanelID != "" && c.Panel != "" {
		view.Crumbs = append(view.Crumbs, link{Href: "/panels/" + c.PanelID, Text: unbroken(c.Panel)})
	}
	for _, d := range on {
		if word := s.standsBadly(d); word != "" {
			view.State = append(view.State, mark{standsShape(d.Stands), s.spot(d.DeviceRow) + ": " + lowerFirst(word)})
		}
	}
	view.Loops = s.loops(p)
	view.Off, view.OffCritical = s.goesDark(p.Dead(c.ID))
	view.Drawing = s.drawCircuit(p, c)
	breakers, runs := p.Runs(c.ID)
	for _, b := range breakers {
		view.Told = append(view.Told, s.inWords(p, []forms.Run{{ID: b}}, found)...)
	}
	view.Told = append(view.Told, s.inWords(p, runs, found)...)
	view.Checks, view.Facts = s.circuitChecks(p, c), s.circuitFactsShown(c)
	if view.Change {
		view.Actions = []link{{Href: "/circuits/" + c.ID + "/order", Text: k.say("office.circuit.order")}, {Href: "/circuits/" + c.ID + "/edit", Text: k.say("office.circuit.edit")}}
	}
}

// standsShape is the shape of a protector's standing.
func standsShape(stands string) string {
	switch stands {
	case forms.StandsFailed, forms.StandsRemoved:
		return "fail"
	case forms.StandsOverdue:
		return "watch"
	case forms.StandsWell:
		return "pass"
	}
	return "none"
}

// inWords is the drawing in words.
func (s *Server) inWords(p *store.Protection, runs []forms.Run, found map[string]*foundShown) (out []runShown) {
	k := s.ink()
	for _, run := range runs {
		d, ok := p.Device(run.ID)
		if !ok || d.Retired {
			continue
		}
		out = append(out, runShown{Href: "/devices/" + d.ID, Spot: s.spot(d.DeviceRow), What: joined(k.named("kind", d.Kind), d.Place.Context()),
			Critical: d.Place.CriticalLoad, Cover: s.coverMark(p, d), Found: found[d.ID], Load: s.inWords(p, run.Load, found)})
	}
	return out
}

// coverMark says in one mark how a device is protected.
func (s *Server) coverMark(p *store.Protection, d store.OnMap) mark {
	k, cover := s.ink(), p.Cover(d.ID)
	if cover.State == forms.Unprotected {
		return mark{"none", k.say("office.protection.cover.none")}
	}
	by, _ := p.Device(cover.By)
	key := "office.protection.cover." + cover.State
	if cover.By == d.ID {
		key = "office.protection.self." + cover.State
	}
	return mark{standsShape(cover.State), k.say(key, "by", s.spot(by.DeviceRow))}
}

// goesDark names what loses power, and apart from it the critical loads.
func (s *Server) goesDark(list []store.OnMap) (all []string, critical string) {
	var loads []string
	for _, d := range list {
		if d.Retired {
			continue
		}
		name := s.spotIn(d.DeviceRow)
		if load := d.Place.CriticalLoad; load != "" {
			name += ": " + load
			loads = append(loads, load)
		}
		all = append(all, name)
	}
	return all, strings.Join(uniqueTexts(loads), "; ")
}

func uniqueTexts(list []string) (out []string) {
	met := map[string]bool{}
	for _, text := range list {
		if !met[text] {
			met[text] = true
			out = append(out, text)
		}
	}
	return out
}

// loops tells the LOAD edges that were left out.
func (s *Server) loops(p *store.Protection) (out []string) {
	for _, f := range p.LeftOut() {
		device, _ := p.Device(f.Device)
		source, _ := p.Device(f.Source)
		if f.Device == f.Source {
			out = append(out, s.words.Say("office.protection.loop_self", "device", s.spot(device.DeviceRow)))
			continue
		}
		out = append(out, s.words.Say("office.protection.loop", "device", s.spot(device.DeviceRow), "source", s.spot(source.DeviceRow)))
	}
	return out
}

// circuitFactsShown are the nameplate's facts that have a value.
func (s *Server) circuitFactsShown(c store.Circuit) (out []fact) {
	k := s.ink()
	add := func(name, value string) {
		if value != "" {
			out = append(out, fact{Name: k.say("office.circuit.ask." + name), Value: value})
		}
	}
	add("panel", unbroken(c.Panel))
	add("numbers", c.Numbers)
	add("breaker_a", s.breaker(c))
	if n := c.Number("poles"); n > 0 {
		add("poles", number(n))
	}
	if n := c.Number("voltage_v"); n > 0 {
		add("voltage_v", k.amount(number(n), "V"))
	}
	add("conductor", s.conductor(c))
	add("supply", k.named("office.device.answer.supply", c.Text("supply")))
	add("standard", c.Text("standard"))
	add("feeds", c.Text("feeds"))
	return out
}

// circuitAria says a drawing in one sentence.
func (s *Server) circuitAria(p *store.Protection, c store.Circuit) string {
	var names []string
	for _, d := range alongCircuit(p, c.ID) {
		names = append(names, s.spot(d.DeviceRow))
	}
	return s.words.Say("office.circuit.aria", "circuit", circuitName(c), "breaker", joined(s.breaker(c), s.conductor(c)), "devices", strings.Join(names, ", "))
}
