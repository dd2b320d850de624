package store

import "tripwell/forms"

// UsualPlaces gives the list of places that usually need protection as it stands at a site on a day: the site's own where it has
// one, else the organisation's. of is "site" or "organisation"; with site "" it is the organisation's.
func (v *View) UsualPlaces(site string, on forms.Day) (list *forms.UsualPlaces, of string, err error) {
	if site != "" {
		sv, err := v.siteNamed(site)
		if err != nil {
			return nil, "", err
		}
		if list := v.rules().usualOn(sv.ord, on); list != nil && !list.Follows {
			return list, BySite, nil
		}
	}
	return v.rules().usualOn(v.orgLog(), on), ByOrganisation, nil
}

// NextUsual gives the revision the next change of a list takes, and the list's id in the book.
func (v *View) NextUsual(site string) (revision int, err error) {
	ord := v.orgLog()
	if site != "" {
		sv, err := v.siteNamed(site)
		if err != nil {
			return 0, err
		}
		ord = sv.ord
	}
	for _, u := range rulesUnder[forms.UsualPlaces](v.rules(), rulePrefix(ruleUsual, ord, "")) {
		revision = max(revision, u.Revision)
	}
	return revision + 1, nil
}

// usualOn gives a log's list in force on a day, nil where it has none: of several the one in force last, then the larger
// revision.
func (ru *rules) usualOn(log uint32, on forms.Day) (in *forms.UsualPlaces) {
	if log == 0 {
		return nil
	}
	for _, u := range rulesUnder[forms.UsualPlaces](ru, rulePrefix(ruleUsual, log, "")) {
		if u.InForce <= on && (in == nil || u.InForce >= in.InForce) { // by revision
			in = u
		}
	}
	return in
}
