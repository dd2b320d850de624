package forms

import "slices"

const delayedMark = " delayed"

// StandsForKind reports whether a set is meant for devices of a kind for which none is chosen by name.
func (s *LimitSet) StandsForKind(kind string, delayed bool) bool {
	if delayed {
		kind += delayedMark
	}
	return slices.Contains(s.StandsFor, kind)
}

// StandingFor finds, among revisions in force on one day, the set that stands for a kind: of several the one in force
// last, then that of the larger revision, then the later id. "" where none does.
func StandingFor(sets []*LimitSet, kind string, delayed bool) string {
	var in *LimitSet
	for _, s := range sets {
		if !s.StandsForKind(kind, delayed) {
			continue
		}
		if in == nil || s.InForce > in.InForce || s.InForce == in.InForce && (s.Revision > in.Revision || s.Revision == in.Revision && s.ID > in.ID) {
			in = s
		}
	}
	if in == nil {
		return ""
	}
	return in.ID
}
