package server

import (
	"strings"

	"tripwell/store"
	"tripwell/store/record"
)

// search finds devices in a register: every word must be somewhere in what the register says of the device.
type search struct {
	words []string
	tag   string // the query read as a tag in any form, or empty
}

func newSearch(query string) search {
	s := search{words: strings.Fields(strings.ToLower(strings.ReplaceAll(query, hyphen, "-")))}
	if tag, ok := record.ParseTag(strings.ReplaceAll(query, hyphen, "-")); ok {
		s.tag = tag
	}
	return s
}

func (s search) hits(d store.DeviceRow, k ink) bool {
	if len(s.words) == 0 {
		return true
	}
	if s.tag != "" && d.Tag != "" {
		if tag, ok := record.ParseTag(d.Tag); ok && tag == s.tag {
			return true
		}
	}
	text := strings.ToLower(strings.Join([]string{
		d.Place.Building, d.Place.Floor, d.Place.Room, d.Place.Name, d.Place.CriticalLoad, d.Panel + " / " + d.Circuit, d.Panel + "/" + d.Circuit,
		d.Make, d.Model, k.named("kind", d.Kind), d.Kind, d.Tag, showTag(d.Tag),
	}, "\n"))
	for _, w := range s.words {
		if !strings.Contains(text, w) {
			return false
		}
	}
	return true
}

// showTag writes a tag in its three groups; what is no tag stays as it is.
func showTag(tag string) string {
	if plain, ok := record.ParseTag(tag); ok {
		return record.ShowTag(plain)
	}
	return tag
}
