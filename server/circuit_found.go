package server

import (
	"tripwell/forms"
	"tripwell/store"
)

// foundOn tells of a circuit's outlets what they were found to be while what is ahead of them was off, by id, and adds those the
// map cannot explain to the page.
func (s *Server) foundOn(v *store.View, site store.Site, p *store.Protection, ids []string, view *circuitPage) (map[string]*foundShown, error) {
	k, today := s.ink(), s.today(site)
	all, err := v.FoundOn(p, ids, today)
	if err != nil {
		return nil, err
	}
	out := map[string]*foundShown{}
	for _, id := range ids {
		f, ok := all[id]
		if !ok {
			continue
		}
		d, _ := p.Device(id)
		one := &foundShown{Mark: mark{"none", k.say("office.protection.found."+f.What, "when", k.near(f.Day, today), "by", s.personName(v, f.By))}, Spot: s.spotIn(d.DeviceRow), Href: "/entries/" + f.Entry}
		if f.Defect != "" {
			one.Href = "/defects/" + f.Defect
		}
		switch {
		case f.Differs:
			one.Mark.Shape = map[string]string{forms.FoundLive: "fail", forms.FoundDead: "watch"}[f.What]
			one.Text = k.say("office.protection.differs."+f.What, "source", s.protectorAhead(p, id))
			view.Differs = append(view.Differs, *one)
		case f.What == forms.FoundDead:
			one.Mark.Shape = "pass"
		}
		out[id] = one
	}
	return out, nil
}

// protectorAhead names the nearest device ahead of one that switches off on a ground fault, "" for none.
func (s *Server) protectorAhead(p *store.Protection, id string) string {
	for _, by := range p.Ahead(id) {
		if d, ok := p.Device(by); ok && forms.Protects(d.Kind) {
			return s.spotIn(d.DeviceRow)
		}
	}
	return ""
}
