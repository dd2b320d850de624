package store

import (
	"slices"

	"tripwell/forms"
	"tripwell/store/record"
)

// Scope is who asks and what they may see. Every read needs one; a site outside it is not_found.
type Scope struct {
	Person string
	Role   string // manager | crew | auditor | owner
	All    bool
	Sites  []string   // site ids
	Period *Period    // test days that may be seen; nil = all
	Until  *forms.Day // the last day of the access, told on pages and in files; signing in asks it
}

// Period is a span of days, both included.
type Period struct {
	From forms.Day `json:"from"`
	To   forms.Day `json:"to"`
}

// Shows reports whether the scope shows what is of a day.
func (sc Scope) Shows(day forms.Day) bool {
	return sc.Period == nil || day >= sc.Period.From && day <= sc.Period.To
}

// May reports whether the scope covers a site.
func (sc Scope) May(site string) bool { return sc.All || slices.Contains(sc.Sites, site) }

// mayRead reports whether the scope may read a log: org is everybody's who signed in, office is for whole-organisation
// managers (and the owner of the folder).
func (sc Scope) mayRead(log string) bool {
	switch log {
	case record.Org:
		return sc.All || sc.Person != "" || len(sc.Sites) > 0
	case record.Office:
		return sc.All && (sc.Role == "manager" || sc.Role == "owner")
	}
	return sc.May(log)
}
