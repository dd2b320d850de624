package server

import (
	"cmp"
	"strings"

	"github.com/labstack/echo/v4"

	"tripwell/store"
)

// Kinds of breaker, as a directory names them.
var breakerTypes = []string{"standard", "gfci", "afci", "dual", "mcb", "rcbo"}

// Fields of a circuit's form by how they are read. The names are those of the register.
var (
	circuitTexts   = []string{"numbers", "conductor", "feeds"}
	circuitFigures = []string{"breaker_a", "poles", "voltage_v"}
)

func (s *Server) panelNew(c echo.Context) error {
	site, err := s.siteOf(c)
	if err != nil {
		return err
	}
	f, err := s.blankForm(nil)
	if err != nil {
		return err
	}
	return s.formBack(c, f, s.panelForm(c, site, nil))
}

func (s *Server) panelCreate(c echo.Context) error {
	site, err := s.siteOf(c)
	if err != nil {
		return err
	}
	f, err := s.typedForm(c)
	if err != nil {
		return err
	}
	panel := store.Panel{ID: f.id(subjectField)}
	return s.panelSave(c, site, nil, panel, f)
}

func (s *Server) panelEdit(c echo.Context) error {
	panel, site, err := s.panelAt(c)
	if err != nil {
		return err
	}
	f, err := s.editForm(panelValues(panel), panel.Conflicts)
	if err != nil {
		return err
	}
	return s.formBack(c, f, s.panelForm(c, site, &panel))
}

func (s *Server) panelUpdate(c echo.Context) error {
	panel, site, err := s.panelAt(c)
	if err != nil {
		return err
	}
	f, err := s.typedForm(c)
	if err != nil {
		return err
	}
	f.meanwhile(panelValues(panel))
	return s.panelSave(c, site, &panel, panel, f)
}

func panelValues(p store.Panel) map[string]string {
	return map[string]string{"name": p.Name, "location": p.Location}
}

// panelSave writes what a panel's form changed; was is nil where the panel is new.
func (s *Server) panelSave(c echo.Context, site store.Site, was *store.Panel, panel store.Panel, f *typedForm) error {
	first, set := f.id(recordField), map[string]any{}
	f.setText(set, "name", "name", f.needed("name", s.words.Say("office.circuit.ask.panel"), 40))
	f.setText(set, "location", "location", f.line("location", 200))
	if f.ok() {
		var err error
		if len(set) > 0 {
			err = s.append(c, store.Draft{ID: first, Kind: "panel.set", Log: site.ID, Subject: panel.ID, Body: f.setBody(set)})
		}
		if err == nil {
			return toPage(c, "/panels/"+panel.ID)
		}
		if err := f.takeRefusal(err); err != nil {
			return err
		}
	}
	return s.formBack(c, f, s.panelForm(c, site, was))
}

func (s *Server) panelForm(c echo.Context, site store.Site, panel *store.Panel) formPage {
	k := s.ink()
	p := formPage{
		Frame: s.frame(c, k.say("office.circuit.panel_new"), "sites"), Crumbs: []link{{Href: siteHref(site), Text: site.Name}, {Href: siteHref(site) + "/circuits", Text: k.say("office.circuit.list")}},
		Heading: k.say("office.circuit.panel_new_head", "site", site.Name), Action: siteHref(site) + "/panels", Submit: k.say("office.circuit.panel_save"), Cancel: siteHref(site) + "/circuits",
		Groups: []fieldGroup{{Fields: []field{
			{Name: "name", Label: k.say("office.circuit.ask.panel"), Hint: k.say("office.circuit.hint.panel"), Required: true},
			{Name: "location", Label: k.say("office.circuit.ask.location"), Hint: k.say("office.circuit.hint.location")},
		}}},
	}
	if panel != nil {
		p.Frame, p.Heading = s.frame(c, k.say("office.circuit.panel_edit"), "sites"), k.say("office.circuit.panel_edit_head", "panel", unbroken(panel.Name))
		p.Action, p.Cancel = "/panels/"+panel.ID+"/edit", "/panels/"+panel.ID
	}
	return p
}

func (s *Server) panelAt(c echo.Context) (p store.Panel, site store.Site, err error) {
	err = s.store.View(scope(c), func(v *store.View) (err error) {
		p, site, err = v.Panel(c.Param("panel"))
		return err
	})
	return p, site, err
}

func (s *Server) circuitNew(c echo.Context) error {
	site, err := s.siteOf(c)
	if err != nil {
		return err
	}
	f, err := s.blankForm(map[string]string{"panel": c.QueryParam("panel"), "standard": site.Standard, "supply": "grounded"})
	if err != nil {
		return err
	}
	return s.circuitBack(c, site, nil, f)
}

func (s *Server) circuitCreate(c echo.Context) error {
	site, err := s.siteOf(c)
	if err != nil {
		return err
	}
	f, err := s.typedForm(c)
	if err != nil {
		return err
	}
	return s.circuitSave(c, site, nil, f.id(subjectField), f)
}

func (s *Server) circuitEdit(c echo.Context) error {
	one, site, lost, err := s.circuitAt(c)
	if err != nil {
		return err
	}
	f, err := s.editForm(circuitValues(one), lost)
	if err != nil {
		return err
	}
	return s.circuitBack(c, site, &one, f)
}

func (s *Server) circuitUpdate(c echo.Context) error {
	one, site, _, err := s.circuitAt(c)
	if err != nil {
		return err
	}
	f, err := s.typedForm(c)
	if err != nil {
		return err
	}
	f.meanwhile(circuitValues(one))
	return s.circuitSave(c, site, &one, one.ID, f)
}

func (s *Server) circuitAt(c echo.Context) (one store.Circuit, site store.Site, lost []store.Conflict, err error) {
	err = s.store.View(scope(c), func(v *store.View) (err error) {
		one, site, lost, err = v.Circuit(c.Param("circuit"))
		return err
	})
	return one, site, lost, err
}

func circuitValues(c store.Circuit) map[string]string {
	out := map[string]string{"panel": c.PanelID, "numbers": c.Numbers, "conductor": c.Text("conductor"), "feeds": c.Text("feeds"),
		"standard": c.Text("standard"), "supply": c.Text("supply"), "breaker_type": c.Text("breaker_type")}
	for _, name := range circuitFigures {
		if out[name] = ""; c.Number(name) != 0 {
			out[name] = plainFigure(c.Number(name))
		}
	}
	return out
}

// circuitSave writes what a circuit's form changed; was is nil where the circuit is new.
func (s *Server) circuitSave(c echo.Context, site store.Site, was *store.Circuit, subject string, f *typedForm) error {
	panels, circuits, err := s.wiringOf(c, site)
	if err != nil {
		return err
	}
	first, set := f.id(recordField), s.circuitSet(f, panels)
	for _, other := range circuits {
		if other.ID != subject && other.PanelID == f.Get("panel") && strings.EqualFold(other.Numbers, strings.TrimSpace(f.Get("numbers"))) && other.Numbers != "" {
			f.refuse("numbers", s.words.Say("office.circuit.taken", "circuit", circuitName(other)))
		}
	}
	if f.ok() {
		if len(set) > 0 {
			err = s.append(c, store.Draft{ID: first, Kind: "circuit.set", Log: site.ID, Subject: subject, Body: f.setBody(set)})
		}
		if err == nil {
			return toPage(c, "/circuits/"+subject)
		}
		if err := f.takeRefusal(err); err != nil {
			return err
		}
	}
	return s.circuitBack(c, site, was, f)
}

func (s *Server) circuitSet(f *typedForm, panels []store.Panel) map[string]any {
	set, ids := map[string]any{}, []string{}
	for _, p := range panels {
		ids = append(ids, p.ID)
	}
	f.setText(set, "panel", "panel", f.choice("panel", ids...))
	f.needed("numbers", s.words.Say("office.circuit.ask.numbers"), 40)
	for _, name := range circuitTexts {
		f.setText(set, name, name, f.line(name, 200))
	}
	for _, name := range circuitFigures {
		f.setFigure(set, name, name, f.figure(name))
	}
	f.setText(set, "breaker_type", "breaker_type", f.choice("breaker_type", append([]string{""}, breakerTypes...)...))
	f.setText(set, "standard", "standard", f.choice("standard", "", "NEC", "IEC"))
	f.setText(set, "supply", "supply", f.choice("supply", "", "grounded", "isolated"))
	return set
}

func (s *Server) wiringOf(c echo.Context, site store.Site) (panels []store.Panel, circuits []store.Circuit, err error) {
	err = s.store.View(scope(c), func(v *store.View) (err error) {
		if panels, err = v.Panels(site.ID); err != nil {
			return err
		}
		circuits, err = v.Circuits(site.ID)
		return err
	})
	return panels, circuits, err
}

// circuitBack sends the page of a new circuit, or of one that is there.
func (s *Server) circuitBack(c echo.Context, site store.Site, one *store.Circuit, f *typedForm) error {
	panels, _, err := s.wiringOf(c, site)
	if err != nil {
		return err
	}
	k := s.ink()
	q := func(name, kind string, options ...option) field {
		out := field{Name: name, Label: k.say("office.circuit.ask." + name), Type: kind, Options: options}
		if key := "office.circuit.hint." + name; k.words.Has(key) {
			out.Hint = k.say(key)
		}
		return out
	}
	var named, types []option
	for _, p := range panels {
		named = append(named, option{Value: p.ID, Text: p.Name})
	}
	types = optional(k.say("office.device.not_said"))
	for _, t := range breakerTypes {
		types = append(types, option{Value: t, Text: k.say("office.circuit.type." + t)})
	}
	numbers, breaker, volts := q("numbers", ""), q("breaker_a", "number"), q("voltage_v", "number")
	numbers.Required, breaker.Unit, volts.Unit = true, "A", "V"
	p := formPage{
		Frame: s.frame(c, k.say("office.circuit.new"), "sites"), Crumbs: []link{{Href: siteHref(site), Text: site.Name}, {Href: siteHref(site) + "/circuits", Text: k.say("office.circuit.list")}},
		Heading: k.say("office.circuit.new_head", "site", site.Name), Action: siteHref(site) + "/circuits", Submit: k.say("office.circuit.save"), Cancel: siteHref(site) + "/circuits",
		Groups: []fieldGroup{
			{Fields: []field{q("panel", "", named...), numbers, q("feeds", "")}},
			{Legend: k.say("office.circuit.facts"), Fields: []field{breaker, q("breaker_type", "", types...), q("poles", "number"), volts, q("conductor", ""),
				q("supply", "", optional(k.say("office.device.not_said"), "grounded", k.say("office.device.supply_grounded"), "isolated", k.say("office.device.supply_isolated"))...),
				q("standard", "", optional(k.say("office.device.not_said"), "NEC", k.say("office.site.nec"), "IEC", k.say("office.site.iec"))...)}},
		},
	}
	if len(panels) == 0 {
		p.Lead = k.say("office.circuit.panel_first")
	}
	if one != nil {
		p.Frame, p.Heading = s.frame(c, k.say("office.circuit.edit"), "sites"), k.say("office.circuit.edit_head", "circuit", cmp.Or(circuitName(*one), dash))
		p.Action, p.Cancel = "/circuits/"+one.ID+"/edit", "/circuits/"+one.ID
	}
	return s.formBack(c, f, p)
}
