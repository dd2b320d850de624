package demo

import (
	"strings"
	"time"

	"tripwell/forms"
	"tripwell/store"
)

// madeRounds puts rounds of the office on their days, so that each state is there on the last: accepted, ended and not yet
// accepted, being walked, not begun, called off.
func (b *builder) madeRounds() {
	for _, s := range b.sites {
		switch day := b.lastRound(s); s.code {
		case bracken:
			b.monthly(s, day, "Keys of the laundries at the caretaker's, Middle row.", true)
			b.ahead(s)
		case kilnLane:
			b.monthly(s, day, "Sign in at the desk first.", false)
			b.calledOff(s)
		case ottermoor:
			b.catchUp(s)
		}
	}
}

// lastRound is the newest day on which a site's monthly round began.
func (b *builder) lastRound(s *site) forms.Day {
	for day := b.today - 2; ; day-- {
		if workday(day, s.firstWorkday) == day {
			return day
		}
	}
}

// stopsOn asks the store what a visit on a day would do, among the devices one takes.
func (b *builder) stopsOn(s *site, day, until forms.Day, takes func(store.VisitStop) bool) (stops []string, minutes int, err error) {
	err = b.store.View(store.Scope{Role: "owner", All: true}, func(v *store.View) error {
		visit, err := v.Visit(store.VisitAsk{Site: s.id, Day: day, Until: until, Most: 24 * 60})
		total := 0.0
		for _, stop := range visit.Stops {
			if takes(stop) {
				stops, total = append(stops, stop.Device.ID+"/"+stop.Task), total+stop.Minutes
			}
		}
		minutes = int(total + 0.5)
		return err
	})
	return stops, minutes, err
}

// make makes a round at the clock's moment; it gives its id, "" where nothing was due.
func (b *builder) make(s *site, name string, day, until forms.Day, fields map[string]any, takes func(store.VisitStop) bool) (string, []string, error) {
	stops, minutes, err := b.stopsOn(s, day, until, takes)
	if err != nil || len(stops) == 0 {
		return "", nil, err
	}
	set := map[string]any{"stops": stops, "day": day.String(), "until": until.String(), "minutes": minutes}
	for k, v := range fields {
		set[k] = v
	}
	id := newID(b.clock.Now(), "round", s.code, name)
	return id, stops, b.office(s.id, store.Draft{Kind: "round.made", Subject: id, Body: map[string]any{"set": set}})
}

func (b *builder) moment(s *site, day forms.Day, hour, minute int) time.Time {
	y, m, d := day.Time().Date()
	return time.Date(y, m, d, hour, minute, 0, 0, s.zone)
}

// monthly makes the first day of a monthly round the day before it is walked, has it ended on the phone, and accepts it.
func (b *builder) monthly(s *site, day forms.Day, note string, accept bool) {
	p := b.phoneFor(s, day, 0)
	first := map[string]bool{}
	for _, d := range s.devices[:min(s.perDay, len(s.devices))] {
		first[d.id] = true
	}
	b.on(b.moment(s, day-1, 15, 20), func() error {
		until := firstOfMonth(day, 1) - 1
		if !accept { // takes along what is due much later: some of it stays
			until = firstOfMonth(day, 3) - 1
		}
		id, stops, err := b.make(s, "monthly", day, until, map[string]any{"people": []string{p.person}, "starts": "07:30", "note": note},
			func(stop store.VisitStop) bool { return first[stop.Device.ID] })
		if err != nil || id == "" {
			return err
		}
		b.on(b.moment(s, day, 16, 40), func() error { return b.end(s, p, id, day, len(stops)) })
		if accept {
			b.on(b.moment(s, day+1, 9, 5), func() error {
				return b.office(s.id, store.Draft{Kind: "round.accepted", Subject: id, Body: map[string]any{"note": "What is left goes along on the next visit."}})
			})
		}
		return nil
	})
}

// end closes a round on the phone; two of what is left were passed over with a reason.
func (b *builder) end(s *site, p *phone, id string, day forms.Day, of int) error {
	var round store.Round
	err := b.store.View(store.Scope{Role: "owner", All: true}, func(v *store.View) (err error) {
		round, err = v.Round(id)
		return err
	})
	if err != nil {
		return err
	}
	var passed []any
	for _, stop := range round.Stops {
		if stop.State == store.StopLeft && len(passed) < 2 {
			passed = append(passed, map[string]any{"device": stop.Device, "task": stop.Task, "reason": []string{"in-use", "nobody-there"}[len(passed)]})
		}
	}
	at := b.clock.Now()
	proof := func(hour int) map[string]any {
		return map[string]any{"at": b.moment(s, day, hour, 25).Format(time.RFC3339), "works": true}
	}
	body := map[string]any{"day": day.String(), "done": round.Counts[store.StopDone], "back": round.Counts[store.StopBack], "skipped": len(passed),
		"left": of - round.Counts[store.StopDone] - round.Counts[store.StopBack] - len(passed), "proved": map[string]any{"first": proof(7), "last": proof(16)}}
	if len(passed) > 0 {
		body["passed"] = passed
	}
	if _, err := p.keep("", "round.closed", s.id, id, at, body); err != nil {
		return err
	}
	return p.push(b.ctx, b.store, b.clock.Now())
}

// ahead makes the round that waits on the last day.
func (b *builder) ahead(s *site) {
	b.on(b.moment(s, b.today-1, 15, 45), func() error {
		_, _, err := b.make(s, "ahead", b.today, firstOfMonth(b.today, 1)-1, map[string]any{"people": []string{b.phones[phone1].person}, "starts": "07:30", "note": "The garages first: they are locked from ten."},
			func(stop store.VisitStop) bool { return stop.Device.Place.Building == "South row" })
		return err
	})
}

// calledOff makes a round that did not take place.
func (b *builder) calledOff(s *site) {
	b.on(b.moment(s, b.today-20, 10, 0), func() error {
		id, _, err := b.make(s, "called off", b.today-15, b.today, map[string]any{"crew": "Crew 2 and a helper"}, func(stop store.VisitStop) bool {
			return strings.HasPrefix(stop.Device.Place.Room, "Recovery") || stop.Task == "instrument"
		})
		if err != nil || id == "" {
			return err
		}
		b.on(b.moment(s, b.today-16, 12, 0), func() error {
			return b.office(s.id, store.Draft{Kind: "round.set", Subject: id, Body: map[string]any{"set": map[string]any{"off": true, "note": "The ward stays in use that week."}}})
		})
		return nil
	})
}

// catchUp makes a round of what is overdue where the crew fell behind, and walks a part of it on the last working day.
func (b *builder) catchUp(s *site) {
	day := lastWorkday(b.today)
	p := b.phones[phone2]
	b.on(b.moment(s, day-1, 14, 0), func() error {
		id, stops, err := b.make(s, "catch up", day, firstOfMonth(day, 1)-1, map[string]any{"people": []string{p.person}, "note": "Pool deck before the hall opens at ten."},
			func(stop store.VisitStop) bool { return stop.Task == "button" && stop.Device.Place.Room == "Pool deck" })
		if err != nil || id == "" {
			return err
		}
		walks := map[string]bool{}
		for _, stop := range stops[:len(stops)/3] {
			walks[stop[:36]] = true
		}
		b.on(b.moment(s, day, 8, 0), func() error {
			at := b.clock.Now()
			for _, d := range s.devices {
				if !walks[d.id] || d.failed || told[d.story] != "" {
					continue
				}
				if at, err = b.test(p, d, "button", at); err != nil {
					return err
				}
			}
			return p.push(b.ctx, b.store, at)
		})
		return nil
	})
}
