package server

import (
	"slices"
	"strings"

	"tripwell/store"
)

// roundPart is a short list of stops with why they are listed.
type roundPart struct {
	Name string
	Rows []stopRow
}

// stopGroup is a room with its stops.
type stopGroup struct {
	Place string
	Rows  []stopRow
}

type stopRow struct {
	Href, Spot, Tag, Task, Where string
	State                        mark
	EntryHref, Said              string
}

// stopRows fills the list of a round, by room, and the places where somebody must be told first.
func (s *Server) stopRows(v *store.View, r store.Round, site store.Site, view *roundPage) ([]stopRow, error) {
	k, today := s.ink(), s.today(site)
	var rows []stopRow
	var tell telling
	for _, stop := range r.Stops {
		d, err := v.Device(stop.Device, today)
		if err != nil && !isRefusal(err) {
			return nil, err
		}
		row := stopRow{Task: k.named("task", stop.Task), Spot: k.say("office.round.unknown_device"), State: s.stopMark(stop)}
		if err == nil {
			row.Href, row.Spot, row.Tag, row.Where = "/devices/"+d.ID, s.spot(d.DeviceRow), k.tag(d.Tag), s.place(d.Place)
			tell.add(d.Place)
		}
		if stop.Entry != "" {
			row.EntryHref = "/entries/" + stop.Entry
			row.Said = joined(s.personName(v, stop.By), k.near(stop.Day, today))
			if stop.Paper {
				row.Said = joined(row.Said, k.say("office.round.on_paper"))
			}
		} else if stop.Reason != "" {
			row.Said = k.named("office.round.reason", stop.Reason)
		}
		rows = append(rows, row)
		if n := len(view.Groups); n == 0 || view.Groups[n-1].Place != row.Where {
			view.Groups = append(view.Groups, stopGroup{Place: row.Where})
		}
		g := &view.Groups[len(view.Groups)-1]
		g.Rows = append(g.Rows, row)
	}
	view.Tell = tell.lines(k)
	return rows, s.tellHours(v, r, view)
}

// stopMark is the verdict of a stop that was done, else its state.
func (s *Server) stopMark(stop store.RoundStop) mark {
	k := s.ink()
	switch stop.State {
	case store.StopDone:
		return k.verdict(stop.Result)
	case store.StopBack:
		return mark{"watch", k.say("office.round.stop.back")}
	}
	if stop.Retired {
		return mark{"none", k.say("office.round.stop.retired")}
	}
	return mark{"none", k.say("office.round.stop." + stop.State)}
}

// attention puts what needs somebody first: the failed, those to come back to, those passed over.
func (p *roundPage) attention(k ink, rows []stopRow) {
	for _, part := range []struct {
		name string
		is   func(stopRow) bool
	}{
		{"failed", func(r stopRow) bool { return r.State.Shape == "fail" }},
		{"back", func(r stopRow) bool { return r.State.Word == k.say("office.round.stop.back") }},
		{"passed", func(r stopRow) bool { return r.State.Word == k.say("office.round.stop.passed") }},
	} {
		var list []stopRow
		for _, r := range rows {
			if part.is(r) {
				list = append(list, r)
			}
		}
		if len(list) > 0 {
			p.Attention = append(p.Attention, roundPart{k.say("office.round.part."+part.name, "n", len(list)), list})
		}
	}
}

// telling gathers whom to tell before TEST, and when it may be pressed, place by place.
type telling struct{ list []told }

type told struct {
	who, load, from, until string
	places                 []string
}

func (t *telling) add(p store.Place) {
	if p.WhomToTell == "" && p.CriticalLoad == "" && p.TestFrom == "" {
		return
	}
	one := told{who: p.WhomToTell, load: p.CriticalLoad, from: p.TestFrom, until: p.TestUntil}
	for i := range t.list {
		if o := &t.list[i]; o.who == one.who && o.load == one.load && o.from == one.from && o.until == one.until {
			if !slices.Contains(o.places, p.Name) {
				o.places = append(o.places, p.Name)
			}
			return
		}
	}
	one.places = []string{p.Name}
	t.list = append(t.list, one)
}

func (t *telling) lines(k ink) []string {
	var out []string
	for _, o := range t.list {
		var said []string
		if o.from != "" {
			said = append(said, k.say("office.round.window", "from", o.from, "until", o.until))
		}
		if o.who != "" {
			said = append(said, k.say("office.round.tell", "who", o.who))
		}
		if o.load != "" {
			said = append(said, k.say("office.round.load", "load", o.load))
		}
		out = append(out, strings.Join(o.places, "; ")+": "+strings.Join(said, " "))
	}
	return out
}
