package server

import (
	"slices"

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

// deviceSources are the devices one may hang on by LOAD terminals; nothing to choose from where the map cannot be read.
func (s *Server) deviceSources(c echo.Context, d store.Device) []option {
	p, circuit, err := s.sourceMap(c, d)
	if err != nil {
		return nil
	}
	own, _ := p.Device(d.ID)
	own.ID, own.Source = d.ID, ""
	if named, _ := d.Fields["fed_by"].(string); named != "" {
		own.Source = named
	}
	return s.sourcesOffered(p, alongCircuit(p, circuit), own)
}

// sourceInput refuses a source that is not offered, and one that would close a loop.
func (s *Server) sourceInput(c echo.Context, d store.Device, f *typedForm) error {
	if !f.Has("fed_by") || !f.changed("fed_by") {
		return nil
	}
	source := f.Get("fed_by")
	p, _, err := s.sourceMap(c, d)
	if err != nil {
		return err
	}
	if !slices.ContainsFunc(s.deviceSources(c, d), func(o option) bool { return o.Value == source }) {
		f.refuse("fed_by", s.words.Say("office.form.choice"))
	}
	if len(p.With(map[string]string{d.ID: source})) > 0 {
		f.refuse("fed_by", s.words.Say("office.circuit.would_loop"))
	}
	return nil
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
