package server

import (
	"strings"
	"time"

	"tripwell/forms"
	"tripwell/store"
)

// sealedText says of a record that lost its bytes why, by whom and when.
func (s *Server) sealedText(v *store.View, seal *store.Seal, zone *time.Location) string {
	k := s.ink()
	return k.say("office.seal.text", "day", k.day(forms.DayOf(seal.At.In(zone))), "by", s.personName(v, seal.By), "reason", strings.TrimSuffix(seal.Reason, "."))
}
