package server

import (
	"fmt"
	"slices"
	"strings"
	"time"

	"tripwell/forms"
	"tripwell/store"
)

// outsideShown is how many stops a warning names.
const outsideShown = 4

// hourOf reads 15:04 as minutes from midnight.
func hourOf(clock string) (minutes int, ok bool) {
	t, err := time.Parse("15:04", clock)
	return t.Hour()*60 + t.Minute(), err == nil
}

func clockOf(minutes int) string { return fmt.Sprintf("%02d:%02d", minutes/60%24, minutes%60) }

// hoursOf are the hours in which a place may be tested; nil is any hour.
func hoursOf(p store.Place) *forms.Hours {
	from, ok := hourOf(p.TestFrom)
	until, both := hourOf(p.TestUntil)
	if !ok || !both {
		return nil
	}
	return &forms.Hours{From: from, Until: until}
}

// outsideHours warns where a round that starts at an hour reaches places outside the hours in which they may be tested, by the
// minutes the site's own history gives; "" where there is nothing to warn of. It says which start suits all of them.
func (s *Server) outsideHours(v *store.View, site, starts string, stops []string) (string, error) {
	start, ok := hourOf(starts)
	if !ok || len(stops) == 0 {
		return "", nil
	}
	pace, err := v.Pace(site)
	if err != nil {
		return "", err
	}
	minutes, hours, places := make([]float64, len(stops)), make([]*forms.Hours, len(stops)), make([]store.Place, len(stops))
	for i, stop := range stops {
		minutes[i] = pace[stop[37:]].Minutes
		d, err := v.Device(stop[:36], forms.DayOf(s.store.Now()))
		switch {
		case err == nil:
			hours[i], places[i] = hoursOf(d.Place), d.Place
		case !isRefusal(err):
			return "", err
		}
	}
	outside := forms.OutsideHours(start, minutes, hours)
	if len(outside) == 0 {
		return "", nil
	}
	return s.outsideWords(start, minutes, hours, places, outside), nil
}

func (s *Server) outsideWords(start int, minutes []float64, hours []*forms.Hours, places []store.Place, outside []int) string {
	k, reached := s.ink(), forms.Reached(start, minutes)
	var said []string
	for _, i := range outside {
		one := k.say("office.hours.outside", "place", places[i].Name, "at", clockOf(int(reached[i])), "from", places[i].TestFrom, "until", places[i].TestUntil)
		if !slices.Contains(said, one) {
			said = append(said, one)
		}
	}
	if more := len(said) - outsideShown; more > 0 {
		said = append(said[:outsideShown], k.say("office.hours.more", "n", more))
	}
	if better, ok := forms.SuitingStart(start, minutes, hours); ok {
		return strings.Join(append(said, k.say("office.hours.better", "at", clockOf(better))), " ")
	}
	return strings.Join(append(said, k.say("office.hours.none")), " ")
}

// tellHours warns on the page of a round that is still to be walked.
func (s *Server) tellHours(v *store.View, r store.Round, view *roundPage) error {
	if r.State != store.RoundMade {
		return nil
	}
	warning, err := s.outsideHours(v, r.Site, r.Starts, r.StopTexts())
	if warning != "" {
		view.Tell = append([]string{warning}, view.Tell...)
	}
	return err
}

// Fields with which somebody lets a round be made outside the hours of its places.
const (
	outsideField = "outside"
	outsideAsked = "outside_asked"
)

// warnOfHours refuses an hour that does not suit, until somebody says that it shall be so all the same.
func (s *Server) warnOfHours(f *typedForm, warning string) {
	if warning != "" && f.Get(outsideField) != "yes" {
		f.refuse("starts", warning)
		f.Set(outsideAsked, "yes")
	}
}

// outsideTick is the box under a warning of hours.
func (s *Server) outsideTick(f *typedForm) []field {
	if f.Get(outsideAsked) != "yes" {
		return nil
	}
	return []field{{Name: outsideField, Label: s.words.Say("office.hours.same"), Type: "check"}}
}
