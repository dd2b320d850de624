package server

import (
	"slices"
	"strings"
	"unicode"

	"tripwell/store"
)

// alsoFeeds says what else goes dark with the breaker of a device, critical loads by name and first.
func (s *Server) alsoFeeds(v *store.View, d store.DeviceRow, site store.Site) (string, error) {
	k := s.ink()
	if d.Panel == "" || d.Circuit == "" {
		return k.say("office.defect.feeds_unknown"), nil
	}
	others, err := s.breakerFeeds(v, d, site)
	if err != nil || len(others) == 0 {
		return k.say("office.defect.feeds_none", "circuit", circuit(d)), err
	}
	return k.say("office.defect.feeds", "circuit", circuit(d), "list", strings.Join(others, "; ")), nil
}

// breakerFeeds names what else the breaker of a device feeds: those on its circuit and what their LOAD terminals feed, with
// their critical loads, those first.
func (s *Server) breakerFeeds(v *store.View, d store.DeviceRow, site store.Site) (others []string, err error) {
	full, err := v.Device(d.ID, s.today(site))
	if err != nil {
		return nil, err
	}
	id, _ := full.Fields["circuit"].(string)
	p, err := v.ProtectionOn(id, s.today(site))
	if err != nil {
		return nil, err
	}
	for _, row := range p.Dead(id) {
		if row.ID == d.ID || row.Retired {
			continue
		}
		name := s.spot(row.DeviceRow)
		if load := row.Place.CriticalLoad; load != "" {
			name += " (" + load + ")"
		}
		others = append(others, name)
	}
	return others, nil
}

// darkMeanwhile says what stays without power with a defect that was made safe: for certain where the words name the breaker,
// else should the breaker be what was switched off. "" where nothing else hangs on it.
func (s *Server) darkMeanwhile(v *store.View, d *store.Defect, site store.Site) (string, error) {
	if d.Safe == nil || d.Closed != nil || d.Device.Panel == "" || d.Device.Circuit == "" {
		return "", nil
	}
	others, err := s.breakerFeeds(v, d.Device, site)
	if err != nil || len(others) == 0 {
		return "", err
	}
	key := "office.defect.dark_if"
	if namesBreaker(d.Safe.Text, d.Device.Circuit) {
		key = "office.defect.dark_now"
	}
	return s.words.Say(key, "circuit", circuit(d.Device), "list", strings.Join(others, "; ")), nil
}

// namesBreaker tells whether words name a circuit by one of its numbers.
func namesBreaker(text, numbers string) bool {
	words := func(s string) []string {
		return strings.FieldsFunc(strings.ToUpper(s), func(r rune) bool { return !unicode.IsLetter(r) && !unicode.IsDigit(r) })
	}
	said := words(text)
	return slices.ContainsFunc(words(numbers), func(n string) bool { return slices.Contains(said, n) })
}
