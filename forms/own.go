package forms

import "slices"

// OwnNames gives what forms call the checks an organisation added to them, by code; nil where they have none. A code that
// forms give several names carries them all, in the order of the forms.
func OwnNames(list ...*Form) map[string]string {
	var names map[string]string
	said := map[string][]string{}
	for _, f := range list {
		for i := range f.Steps {
			for j := range f.Steps[i].Asks {
				a := &f.Steps[i].Asks[j]
				if a.Name == "" || slices.Contains(said[a.Reading], a.Name) {
					continue
				}
				if names == nil {
					names = map[string]string{}
				}
				if said[a.Reading] = append(said[a.Reading], a.Name); len(said[a.Reading]) == 1 {
					names[a.Reading] = a.Name
				} else {
					names[a.Reading] += " / " + a.Name
				}
			}
		}
	}
	return names
}

// OwnNamesUnder gives what the forms call their own checks that a limit set may judge.
func OwnNamesUnder(set *LimitSet, list []*Form) map[string]string {
	var judged []*Form
	for _, f := range list {
		if f.LimitSet == set.ID || slices.ContainsFunc(f.Kinds, func(kind string) bool { return slices.Contains(set.Kinds, kind) }) {
			judged = append(judged, f)
		}
	}
	return OwnNames(judged...)
}
