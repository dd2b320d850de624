package server

import (
	"cmp"
	"slices"
	"strconv"

	"github.com/labstack/echo/v4"

	"tripwell/store"
	"tripwell/store/record"
)

// Names of the fields of an order form: the place along the circuit and the source, each of one device.
const (
	atPrefix  = "at."
	fedPrefix = "fed."
)

func (s *Server) orderEdit(c echo.Context) error {
	one, site, lost, p, err := s.orderAt(c)
	if err != nil {
		return err
	}
	f, err := s.editForm(orderValues(p, one), slices.DeleteFunc(lost, func(l store.Conflict) bool { return l.Field != "order" }))
	if err != nil {
		return err
	}
	return s.formBack(c, f, s.orderForm(c, site, one, p))
}

func (s *Server) orderUpdate(c echo.Context) error {
	one, site, _, p, err := s.orderAt(c)
	if err != nil {
		return err
	}
	f, err := s.typedForm(c)
	if err != nil {
		return err
	}
	first := f.id(recordField)
	f.meanwhile(orderValues(p, one))
	drafts := s.orderDrafts(site, one, p, f, first)
	if f.ok() {
		if len(drafts) > 0 {
			err = s.append(c, drafts...)
		}
		if err == nil {
			return toPage(c, "/circuits/"+one.ID)
		}
		if err := f.takeRefusal(err); err != nil {
			return err
		}
	}
	return s.formBack(c, f, s.orderForm(c, site, one, p))
}

func (s *Server) orderAt(c echo.Context) (one store.Circuit, site store.Site, lost []store.Conflict, p *store.Protection, err error) {
	err = s.store.View(scope(c), func(v *store.View) (err error) {
		if one, site, lost, err = v.Circuit(c.Param("circuit")); err != nil {
			return err
		}
		p, err = v.ProtectionOn(one.ID, s.today(site))
		return err
	})
	return one, site, lost, p, err
}

func orderValues(p *store.Protection, c store.Circuit) map[string]string {
	out := map[string]string{}
	for i, d := range alongCircuit(p, c.ID) {
		out[atPrefix+d.ID], out[fedPrefix+d.ID] = strconv.Itoa(i+1), d.Source
	}
	return out
}

// orderDrafts are the records an order form asks for: the circuit's order, and what each device hangs on. A source that would
// close a loop is refused here; the exchange takes it and leaves the newest edge of the loop out.
func (s *Server) orderDrafts(site store.Site, c store.Circuit, p *store.Protection, f *typedForm, first string) (drafts []store.Draft) {
	on := alongCircuit(p, c.ID)
	at, moved, sources := map[string]float64{}, f.changed("order"), map[string]string{} // settled, where two people's orders stood
	var allowed []string
	for _, o := range s.sourcesOffered(p, on, store.OnMap{}) {
		allowed = append(allowed, o.Value)
	}
	for i, d := range on {
		n := f.figure(atPrefix + d.ID)
		if at[d.ID] = float64(i + 1); n != nil {
			at[d.ID] = *n
		}
		moved = moved || f.changed(atPrefix+d.ID)
		if source := f.choice(fedPrefix+d.ID, append(allowed, d.Source)...); f.changed(fedPrefix + d.ID) {
			sources[d.ID] = source
		}
	}
	for _, loop := range p.With(sources) {
		f.refuse(fedPrefix+loop.Device, s.words.Say("office.circuit.would_loop"))
	}
	if moved {
		slices.SortStableFunc(on, func(a, b store.OnMap) int { return cmp.Compare(at[a.ID], at[b.ID]) })
		ids := []string{}
		for _, d := range on {
			ids = append(ids, d.ID)
		}
		drafts = append(drafts, store.Draft{ID: first, Kind: "circuit.set", Log: site.ID, Subject: c.ID, Body: f.setBody(map[string]any{"order": ids})})
	}
	for _, id := range sortedKeys(sources) {
		set := map[string]any{"fed_by": nil}
		if sources[id] != "" {
			set["fed_by"] = sources[id]
		}
		drafts = append(drafts, store.Draft{ID: record.NamedID(first, "fed", id), Kind: "device.set", Log: site.ID, Subject: id, Body: f.setBody(set)})
	}
	return drafts
}

// sourcesOffered are the devices one may hang on by LOAD terminals: the others of its circuit, and what it names now.
func (s *Server) sourcesOffered(p *store.Protection, on []store.OnMap, of store.OnMap) []option {
	out := optional(s.words.Say("office.circuit.straight"))
	for _, d := range on {
		if d.ID != of.ID {
			out = append(out, option{Value: d.ID, Text: s.spotIn(d.DeviceRow)})
		}
	}
	if of.Source != "" && !slices.ContainsFunc(out, func(o option) bool { return o.Value == of.Source }) {
		text := s.words.Say("office.circuit.gone")
		if d, ok := p.Device(of.Source); ok {
			text = joined(s.spot(d.DeviceRow), circuit(d.DeviceRow))
		}
		out = append(out, option{Value: of.Source, Text: text})
	}
	return out
}

func (s *Server) orderForm(c echo.Context, site store.Site, one store.Circuit, p *store.Protection) formPage {
	k := s.ink()
	out := formPage{
		Frame: s.frame(c, k.say("office.circuit.order"), "sites"), Crumbs: []link{{Href: siteHref(site), Text: site.Name}, {Href: siteHref(site) + "/circuits", Text: k.say("office.circuit.list")}, {Href: "/circuits/" + one.ID, Text: circuitName(one)}},
		Heading: k.say("office.circuit.order_head", "circuit", circuitName(one)), Lead: k.say("office.circuit.order_lead"), Action: "/circuits/" + one.ID + "/order", Submit: k.say("office.circuit.order_save"), Cancel: "/circuits/" + one.ID,
	}
	on := alongCircuit(p, one.ID)
	for _, d := range on {
		out.Groups = append(out.Groups, fieldGroup{Legend: s.spotIn(d.DeviceRow), Note: k.named("kind", d.Kind), Fields: []field{
			{Name: atPrefix + d.ID, Label: k.say("office.circuit.at"), Type: "number"},
			{Name: fedPrefix + d.ID, Label: k.say("office.circuit.fed"), Options: s.sourcesOffered(p, on, d)},
		}})
	}
	if len(on) == 0 {
		out.Lead = k.say("office.circuit.nothing")
	}
	return out
}
