package server

import (
	"tripwell/forms"
	"tripwell/store"
)

// setApplying says which limit set applies to a device today, and why.
func (s *Server) setApplying(v *store.View, device string, today forms.Day) (fact, error) {
	k := s.ink()
	st, err := v.StandingFor(device, today)
	if err != nil {
		return fact{}, err
	}
	out := fact{Name: k.say("config.applies")}
	switch {
	case st.ID == "":
		out.Value = k.say("config.applies_none")
	case st.Set == nil:
		out.Value = k.say("config.applies_unknown", "name", k.named("limit_set", st.ID))
	default:
		out.Value, out.Href = k.say("config.applies_"+st.Why, "name", s.setName(st.Set), "rev", st.Set.Revision), "/limits/"+st.ID
		if st.OwnRevision {
			out.Value = joined(out.Value, k.say("config.applies_own"))
		}
	}
	return out, nil
}
