package server

import (
	"cmp"
	"maps"
	"net/url"
	"slices"
	"strings"

	"tripwell/forms"
	"tripwell/store"
	"tripwell/store/record"
)

func (s *Server) ink() ink { return ink{words: s.words} }

// today is the civil day at a site.
func (s *Server) today(site store.Site) forms.Day {
	return forms.DayOf(s.store.Now().In(site.Location()))
}

func siteHref(site store.Site) string {
	return "/sites/" + url.PathEscape(cmp.Or(site.Code, site.ID))
}

// spot names a device by where it sits, or by what it is where it has no place.
func (s *Server) spot(d store.DeviceRow) string {
	if d.Place.Name != "" {
		return d.Place.Name
	}
	return cmp.Or(strings.TrimSpace(d.Make+" "+d.Model), s.ink().named("kind", d.Kind), d.ID)
}

// spotIn names a device with its room, where the spot does not say the room already.
func (s *Server) spotIn(d store.DeviceRow) string {
	spot := s.spot(d)
	if strings.Contains(spot, d.Place.Room) {
		return spot
	}
	return joined(spot, d.Place.Room)
}

// place names the room a register groups by.
func (s *Server) place(p store.Place) string {
	if p.ID == "" {
		return s.words.Say("office.register.portable")
	}
	return cmp.Or(joined(p.Building, p.Floor, p.Room), s.words.Say("office.register.no_place"))
}

func (s *Server) kindAndRating(d store.DeviceRow) string {
	k := s.ink()
	text := k.named("kind", d.Kind)
	if d.RatingA > 0 {
		text += ", " + k.amount(number(d.RatingA), "A")
	}
	if d.RatedResidualMA > 0 {
		text += ", " + k.amount(number(d.RatedResidualMA), "mA")
	}
	return text
}

// circuit writes panel and circuit as electricians do: LP-2 / 14.
func circuit(d store.DeviceRow) string {
	panel := strings.ReplaceAll(d.Panel, "-", hyphen)
	switch {
	case d.Panel != "" && d.Circuit != "":
		return panel + "\u00a0/\u00a0" + d.Circuit
	default:
		return panel + d.Circuit
	}
}

// joined puts the parts that are there side by side with a middle dot.
func joined(parts ...string) string {
	var there []string
	for _, p := range parts {
		if p != "" {
			there = append(there, p)
		}
	}
	return strings.Join(there, " · ")
}

func sortedKeys[V any](m map[string]V) []string { return slices.Sorted(maps.Keys(m)) }

// link is a link with its text; Here marks the one that leads to the present page, or the main one of several.
type link struct {
	Href, Text string
	Here       bool
}

// option is one choice of a list.
type option struct {
	Value, Text string
	Chosen      bool
}

// choices makes options of pairs of value and text.
func choices(chosen string, pairs ...string) []option {
	var out []option
	for i := 0; i+1 < len(pairs); i += 2 {
		out = append(out, option{pairs[i], pairs[i+1], pairs[i] == chosen})
	}
	return out
}

// conflictLine is one value that lost to a concurrent one, in a sentence.
type conflictLine struct{ Text, Href string }

func (s *Server) conflicts(v *store.View, lost []store.Conflict, today forms.Day) []conflictLine {
	k := s.ink()
	var out []conflictLine
	for _, c := range lost {
		name := c.Field
		if key := "office.device.field." + c.Field; k.words.Has(key) {
			name = k.say(key)
		}
		line := conflictLine{Text: k.say("office.conflict.line", "field", name, "winner", cmp.Or(c.Winner, dash), "value", cmp.Or(c.Value, dash), "by", s.personName(v, c.By), "day", k.day(forms.DayOf(c.At)))}
		if c.Record != "" {
			line.Href = "/records/" + c.Record
		}
		out = append(out, line)
	}
	return out
}

// personName is a name from the directory; who is no longer there is shown by a short piece of the id.
func (s *Server) personName(v *store.View, id string) string {
	if id == "" {
		return dash
	}
	if name := v.PersonName(id); name != "" {
		return name
	}
	if id == s.store.ID() {
		return s.words.Say("office.store_owner")
	}
	if !record.IsID(id) { // a crew, or whoever was written down by name
		return id
	}
	return s.words.Say("office.former_member", "id", id[:8])
}

// readingOrder lists reading codes in the order of the work; codes nobody knows follow by name.
func readingOrder(readings map[string]forms.Reading) []string {
	var out []string
	for _, c := range forms.Codes() {
		if _, ok := readings[c.Code]; ok {
			out = append(out, c.Code)
		}
	}
	for _, code := range sortedKeys(readings) {
		if _, known := forms.CodeOf(code); !known {
			out = append(out, code)
		}
	}
	return out
}
