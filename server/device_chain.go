package server

import (
	"cmp"

	"tripwell/forms"
	"tripwell/store"
)

// chainShown is a device's place on the protection map: what is ahead of it, and what goes dark with it.
type chainShown struct {
	Circuit  link
	Breaker  string
	Cover    mark
	Ahead    []runShown // nearest first
	Behind   []runShown // critical loads first
	Critical string
	Dark     string // heading of what goes dark
	Loops    []string
	Marking  string // what an outlet without an equipment ground carries
	Order    link
	Foreign  string // its source hangs on another circuit than it does
}

// deviceChain reads a device's chain; portable items have none.
func (s *Server) deviceChain(v *store.View, d store.Device, today forms.Day, change bool) (*chainShown, error) {
	if d.Place.ID == "" || d.Retired {
		return nil, nil
	}
	p, err := v.ProtectionOf(d.ID, today)
	if err != nil {
		return nil, err
	}
	k, own := s.ink(), store.OnMap{}
	own, _ = p.Device(d.ID)
	out := &chainShown{Cover: s.coverMark(p, own), Loops: s.loops(p)}
	if id, _ := d.Fields["circuit"].(string); id != "" {
		c, _, _, err := v.Circuit(id)
		if err == nil {
			out.Circuit, out.Breaker = link{Href: "/circuits/" + c.ID, Text: circuit(d.DeviceRow)}, joined(s.breaker(c), s.conductor(c))
			if change {
				out.Order = link{Href: "/circuits/" + c.ID + "/order", Text: k.say("office.circuit.order")}
			}
		}
	}
	if own.EquipmentGround == forms.NoGroundPermitted && forms.IsOutlet(own.Kind) {
		out.Marking = k.say("office.protection.carries", "marking", k.say("office.protection.marking."+forms.MarkingFor(own.Kind)))
	}
	for _, id := range p.Ahead(d.ID) {
		if ahead, ok := p.Device(id); ok {
			out.Ahead = append(out.Ahead, s.chainRow(p, ahead))
		}
	}
	if source, ok := p.Device(own.Source); ok && source.Panel+source.Circuit != own.Panel+own.Circuit && circuit(source.DeviceRow) != "" {
		out.Foreign = k.say("office.protection.foreign", "source", s.spotIn(source.DeviceRow), "circuit", circuit(source.DeviceRow), "own", cmp.Or(circuit(own.DeviceRow), dash))
	}
	lost := p.Lost(d.ID)
	_, out.Critical = s.goesDark(lost)
	for _, behind := range lost {
		if behind.ID != d.ID && !behind.Retired {
			out.Behind = append(out.Behind, s.chainRow(p, behind))
		}
	}
	out.Dark = k.say("office.protection.dark", "n", len(out.Behind))
	return out, nil
}

func (s *Server) chainRow(p *store.Protection, d store.OnMap) runShown {
	return runShown{Href: "/devices/" + d.ID, Spot: s.spot(d.DeviceRow), What: joined(s.ink().named("kind", d.Kind), d.Place.Context(), circuit(d.DeviceRow)), Critical: d.Place.CriticalLoad, Cover: s.coverMark(p, d)}
}
