package server

import (
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
			{Legend: k.say("office.device.group_place"), Fields: []field{q("building"), q("floor"), q("room"), q("name", needed), q("order"), q("critical_load"), q("whom_to_tell"),
				q("test_from", func(f *field) { f.Type = "time" }), q("test_until", func(f *field) { f.Type = "time" })}},
			{Legend: k.say("office.device.group_device"), Fields: []field{
				q("kind", needed, func(f *field) { f.Options = kinds }), q("make"), q("model"), q("serial"), q("rating_a"), q("nominal_v"), q("rated_residual_ma"),
				q("installed", func(f *field) { f.Type = "date" }),
				q("equipment_ground", func(f *field) {
					f.Options = optional(k.say("office.device.not_said"), "yes", k.say("office.device.ground_yes"), "none-permitted", k.say("office.device.ground_none"))
				}),
				q("delayed", func(f *field) { f.Type = "check" }), q("note", func(f *field) { f.Type, f.Wide = "text-area", true }),
			}},
			{Legend: k.say("office.device.group_supply"), Fields: []field{q("panel"), q("circuit"), q("breaker_a"), q("supply", func(f *field) {
				f.Options = optional(k.say("office.device.not_said"), "grounded", k.say("office.device.supply_grounded"), "isolated", k.say("office.device.supply_isolated"))
			})}},
		},
	}
	if d != nil {
		p.Frame, p.Heading = s.frame(c, k.say("office.device.edit"), "sites"), k.say("office.device.edit_head", "spot", s.spot(d.DeviceRow))
		p.Crumbs = append(p.Crumbs, link{Href: "/devices/" + d.ID, Text: s.spot(d.DeviceRow)})
		p.Action, p.Submit, p.Cancel = "/devices/"+d.ID+"/edit", k.say("office.device.save"), "/devices/"+d.ID
		return p
	}
	if place := f.Get("place"); place != "" {
		p.Hidden = append(p.Hidden, hidden{"place", place})
		p.Lead = k.say("office.device.move_hint")
		return p
	}
	p.Groups = append(p.Groups, fieldGroup{Legend: k.say("office.device.group_label"), Fields: []field{q("tag"), q("mint", func(f *field) { f.Type = "check" })}})
	return p
}
