package server

import (
	"slices"
	"strings"

	"github.com/labstack/echo/v4"

	"tripwell/forms"
	"tripwell/store"
)

// sourceMap reads the map a device's source is chosen on: that of its circuit, else what is around it.
func (s *Server) sourceMap(c echo.Context, d store.Device) (p *store.Protection, circuit string, err error) {
	circuit, _ = d.Fields["circuit"].(string)
	err = s.store.View(scope(c), func(v *store.View) (err error) {
		site, err := v.Site(d.Site)
		if err != nil {
			return err
		}
		if circuit != "" {
			if p, err = v.ProtectionOn(circuit, s.today(site)); err == nil {
				return nil
			}
		}
		p, err = v.ProtectionOf(d.ID, s.today(site))
		return err
	})
	return p, circuit, err
}

// deviceSources are the devices one may hang on by LOAD terminals: the others of its circuit, and one of elsewhere where it is
// chosen. Nothing to choose from where the map cannot be read.
func (s *Server) deviceSources(c echo.Context, d store.Device, chosen string) []option {
	p, circuit, err := s.sourceMap(c, d)
	if err != nil {
		return nil
	}
	own, _ := p.Device(d.ID)
	own.ID, own.Source = d.ID, ""
	if named, _ := d.Fields["fed_by"].(string); named != "" {
		own.Source = named
	}
	out := s.sourcesOffered(p, alongCircuit(p, circuit), own)
	if other, _, err := s.deviceAt(c, chosen); err == nil && other.Site == d.Site && !slices.ContainsFunc(out, func(o option) bool { return o.Value == chosen }) {
		out = append(out, option{Value: chosen, Text: s.elsewhere(other.DeviceRow)})
	}
	return out
}

// elsewhere names a source of another circuit, with that circuit.
func (s *Server) elsewhere(d store.DeviceRow) string {
	return joined(s.spotIn(d), circuit(d), s.ink().tag(d.Tag))
}

// sourcesNamed are what may be typed for a source of the site that stands on no list: devices that switch off on a ground fault.
func (s *Server) sourcesNamed(c echo.Context, d store.Device) (known []string) {
	const most = 200
	err := s.store.View(scope(c), func(v *store.View) error {
		for row, err := range v.Devices(d.Site) {
			if err != nil || len(known) == most {
				return err
			}
			if row.ID != d.ID && !row.Retired && forms.Protects(row.Kind) && !forms.IsPortable(row.Kind) {
				known = append(known, s.elsewhere(row))
			}
		}
		return nil
	})
	if err != nil {
		return nil
	}
	return known
}

// sourceTyped reads a source of the site by its tag or by words of its spot, room, panel and circuit, and chooses it.
func (s *Server) sourceTyped(c echo.Context, d store.Device, f *typedForm) error {
	typed := f.line("fed_find", 200)
	if typed == "" {
		return nil
	}
	var found []store.DeviceRow
	err := s.store.View(scope(c), func(v *store.View) error {
		match, k := newSearch(strings.ReplaceAll(typed, "·", " ")), s.ink()
		for row, err := range v.Devices(d.Site) {
			if err != nil {
				return err
			}
			switch {
			case row.ID == d.ID || row.Retired || forms.IsPortable(row.Kind):
			case s.elsewhere(row) == typed:
				found = []store.DeviceRow{row}
				return nil
			case match.hits(row, k):
				found = append(found, row)
			}
		}
		return nil
	})
	switch {
	case err != nil:
		return err
	case len(found) == 0:
		f.refuse("fed_find", s.words.Say("office.device.source_none"))
	case len(found) > 1:
		var names []string
		for _, row := range found[:min(len(found), 5)] {
			names = append(names, s.elsewhere(row))
		}
		f.refuse("fed_find", s.words.Say("office.device.source_many", "n", len(found), "list", strings.Join(names, "; ")))
	default:
		f.Set("fed_by", found[0].ID)
	}
	return nil
}

// sourceInput refuses a source that is none of the site, and one that would close a loop.
func (s *Server) sourceInput(c echo.Context, d store.Device, f *typedForm) error {
	if !f.Has("fed_by") || !f.changed("fed_by") {
		return nil
	}
	source := f.Get("fed_by")
	if !slices.ContainsFunc(s.deviceSources(c, d, source), func(o option) bool { return o.Value == source }) {
		f.refuse("fed_by", s.words.Say("office.form.choice"))
	}
	return s.store.View(scope(c), func(v *store.View) error {
		p, err := v.SiteProtection(d.Site, forms.DayOf(s.store.Now())) // a source of another circuit may close a loop over the whole site
		if err == nil && len(p.With(map[string]string{d.ID: source})) > 0 {
			f.refuse("fed_by", s.words.Say("office.circuit.would_loop"))
		}
		return err
	})
}

// usualOptions are the kinds of place a place may be said to be.
func (s *Server) usualOptions(c echo.Context, site store.Site) []option {
	k := s.ink()
	out := optional(k.say("office.protection.by_names"), forms.NoUsualPlace, k.say("office.protection.none_of_them"))
	err := s.store.View(scope(c), func(v *store.View) error {
		list, _, err := v.UsualPlaces(site.ID, s.today(site))
		if err != nil || list == nil {
			return err
		}
		for _, p := range list.Places {
			out = append(out, option{Value: p.Place, Text: p.Name})
		}
		return nil
	})
	if err != nil {
		return out[:2]
	}
	return out
}
