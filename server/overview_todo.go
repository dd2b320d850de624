package server

import (
	"cmp"
	"net/url"
	"slices"

	"tripwell/forms"
	"tripwell/store"
)

// How far the list of what waits for a manager looks.
const (
	todoSites     = 3   // sites with overdue tests it names
	todoRoundDays = 120 // an ended round older than that is left to the list of rounds
	todoAhead     = 31  // days before a certificate ends
)

// todo says in sentences what waits for a manager beside the defects, each with where to do it.
func (s *Server) todo(v *store.View, sums []store.SiteSums, view *overviewPage) error {
	if !view.Change {
		return nil
	}
	k, today := s.ink(), forms.DayOf(s.store.Now())
	add := func(href, key string, values ...any) {
		view.Todo = append(view.Todo, link{Href: href, Text: k.say("office.todo."+key, values...)})
	}
	byOverdue := slices.Clone(sums)
	slices.SortStableFunc(byOverdue, func(a, b store.SiteSums) int { return cmp.Compare(b.Overdue, a.Overdue) })
	for i, one := range byOverdue[:min(len(byOverdue), todoSites)] {
		if one.Overdue > 0 {
			add("/rounds/new?site="+url.QueryEscape(byOverdue[i].Site.Code), "overdue", "n", one.Overdue, "site", one.Site.Name)
		}
	}
	waiting, err := v.RoundsWaiting(s.store.Now().AddDate(0, 0, -todoRoundDays))
	switch {
	case err != nil:
		return err
	case len(waiting) == 1:
		add("/rounds/"+waiting[0], "round")
	case len(waiting) > 1:
		add("/rounds", "rounds", "n", len(waiting))
	}
	instruments, err := v.Instruments()
	if err != nil {
		return err
	}
	for _, i := range instruments {
		switch due := i.CalibrationDue; {
		case i.Retired || due == forms.NoDay || due > today+todoAhead:
		case due < today:
			add("/instruments/"+i.ID+"/past", "certificate_over", "name", joined(i.Name, i.Serial), "day", k.near(due, today))
		default:
			add("/instruments/"+i.ID+"/past", "certificate_ends", "name", joined(i.Name, i.Serial), "day", k.near(due, today))
		}
	}
	for _, one := range byOverdue {
		if one.Paused > 0 && len(view.Todo) < decideShown {
			add(siteHref(one.Site)+"/asked", "paused", "n", one.Paused, "site", one.Site.Name)
		}
	}
	return nil
}
