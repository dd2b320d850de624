package server

import (
	"slices"

	"github.com/labstack/echo/v4"

	"tripwell/forms"
	"tripwell/store"
)

// deviceForm is the page of a new device, or of one that is there.
func (s *Server) deviceForm(c echo.Context, site store.Site, d *store.Device, f *typedForm) formPage {
	k := s.ink()
	q := func(name string, more ...func(*field)) field {
		out := field{Name: name, Label: k.say("office.device.ask." + name), Unit: fieldUnits[name]}
		if k.words.Has("office.device.hint." + name) {
			out.Hint = k.say("office.device.hint." + name)
		}
		if fieldUnits[name] != "" || name == "order" {
			out.Type = "number"
		}
		for _, m := range more {
			m(&out)
		}
		return out
	}
	needed := func(f *field) { f.Required = true }
	kinds := make([]option, 0, len(forms.Kinds()))
	for _, kind := range forms.Kinds() {
		kinds = append(kinds, option{Value: kind, Text: k.named("kind", kind)})
	}
	p := formPage{
		Frame: s.frame(c, k.say("office.device.new"), "sites"), Crumbs: []link{{Href: siteHref(site), Text: site.Name}},
		Heading: k.say("office.device.new_head", "site", site.Name), Action: siteHref(site) + "/devices", Submit: k.say("office.device.save_new"), Cancel: siteHref(site),
		Groups: []fieldGroup{
			{Legend: k.say("office.device.group_place"), Fields: []field{q("building"), q("floor"), q("room"), q("name", needed), q("order"), q("critical_load"), q("whom_to_tell"), q("usual", func(f *field) { f.Options = s.usualOptions(c, site) }),
				q("test_from", func(f *field) { f.Type = "time" }), q("test_until", func(f *field) { f.Type = "time" })}},
			{Legend: k.say("office.device.group_device"), Fields: []field{
				q("kind", needed, func(f *field) { f.Options = kinds }), q("make"), q("model"), q("serial"), q("rating_a"), q("nominal_v"), q("rated_residual_ma"),
				q("installed", func(f *field) { f.Type = "date" }),
				q("equipment_ground", func(f *field) {
					f.Options = optional(k.say("office.device.not_said"), "yes", k.say("office.device.ground_yes"), "none-permitted", k.say("office.device.ground_none"))
				}),
				q("faces", func(f *field) {
					f.Options = optional(k.say("office.device.not_said"), "2", k.say("office.device.faces_two"), "1", k.say("office.device.faces_one"))
				}),
				q("delayed", func(f *field) { f.Type = "check" }), q("note", func(f *field) { f.Type, f.Wide = "text-area", true }),
			}},
			{Legend: k.say("office.device.group_supply"), Fields: []field{q("panel"), q("circuit"), q("breaker_a"), q("supply", func(f *field) {
				f.Options = optional(k.say("office.device.not_said"), "grounded", k.say("office.device.supply_grounded"), "isolated", k.say("office.device.supply_isolated"))
			})}},
		},
	}
	if d != nil {
		if travels(d) {
			p.Groups[0] = s.itemGroup(c, site, d, q)
		}
		if traits := s.traitGroup(d.Kind, site, q); len(traits.Fields) > 0 {
			p.Groups = slices.Insert(p.Groups, 2, traits)
		}
		if !travels(d) {
			supply := &p.Groups[len(p.Groups)-1]
			supply.Fields = append(supply.Fields, q("fed_by", func(q *field) { q.Options = s.deviceSources(c, *d, f.Get("fed_by")) }), q("fed_find", func(f *field) { f.Known, f.Wide = s.sourcesNamed(c, *d), true }))
		}
		p.Frame, p.Heading = s.frame(c, k.say("office.device.edit"), "sites"), k.say("office.device.edit_head", "spot", s.spot(d.DeviceRow))
		p.Crumbs = append(p.Crumbs, link{Href: "/devices/" + d.ID, Text: s.spot(d.DeviceRow)})
		p.Action, p.Submit, p.Cancel = "/devices/"+d.ID+"/edit", k.say("office.device.save"), "/devices/"+d.ID
		return p
	}
	p.Groups[1].Note = k.say("office.device.traits_later")
	if place := f.Get("place"); place != "" {
		p.Hidden = append(p.Hidden, hidden{"place", place}, hidden{"fed_by", f.Get("fed_by")})
		p.Lead = k.say("office.device.move_hint")
		return p
	}
	p.Groups = append(p.Groups, fieldGroup{Legend: k.say("office.device.group_label"), Fields: []field{q("tag"), q("mint", func(f *field) { f.Type = "check" })}})
	return p
}

// traitGroup asks what the limits of a kind depend on, and only of a kind whose limits do.
func (s *Server) traitGroup(kind string, site store.Site, q func(name string, more ...func(*field)) field) fieldGroup {
	k := s.ink()
	g := fieldGroup{Legend: k.say("office.device.group_traits"), Note: k.say("office.device.traits_note")}
	for _, t := range forms.TraitsOf(kind, site.Standard) {
		g.Fields = append(g.Fields, q(t.Field, func(f *field) {
			if t.Figure {
				f.Type = "number"
			}
			if len(t.Options) > 0 {
				f.Options = []option{{Text: k.say("office.device.not_said")}}
			}
			for _, o := range t.Options {
				f.Options = append(f.Options, option{Value: o, Text: s.traitText(t, o)})
			}
		}))
	}
	return g
}

// traitText writes what a trait says.
func (s *Server) traitText(t forms.Trait, value string) string {
	k := s.ink()
	switch key := "office.device.answer." + t.Field + "." + value; {
	case t.IsYesNo() && value == "yes":
		return k.say("office.yes")
	case t.IsYesNo() && value == "no":
		return k.say("office.no")
	case k.words.Has(key):
		return k.say(key)
	}
	return value
}

// traitInput reads what a form may change of them; a form that does not ask for one leaves it as it is.
func traitInput(f *typedForm, set map[string]any) {
	for _, t := range forms.Traits() {
		switch name := t.Field; {
		case !f.Has(name):
		case t.Figure:
			f.setFigure(set, name, name, f.figure(name))
		case t.IsYesNo():
			if v := f.choice(name, "", "yes", "no"); f.changed(name) {
				if set[name] = v == "yes"; v == "" {
					set[name] = nil
				}
			}
		case len(t.Options) > 0:
			f.setText(set, name, name, f.choice(name, append([]string{""}, t.Options...)...))
		default:
			f.setText(set, name, name, f.line(name, 40))
		}
	}
}

// traitValues puts a device's traits into the values of its form.
func traitValues(fields map[string]any, out map[string]string) {
	for _, t := range forms.Traits() {
		switch v := fields[t.Field].(type) {
		case bool:
			out[t.Field] = map[bool]string{true: "yes", false: "no"}[v]
		case float64:
			out[t.Field] = plainFigure(v)
		case string:
			out[t.Field] = v
		default:
			out[t.Field] = ""
		}
	}
}
