// Package demo builds an invented organisation: three sites, their devices and fourteen months of rounds until
// yesterday, with failures, drifts, gaps, corrections and a replaced device or two. Nobody in it is real.
//
// Everything goes in through the ordinary doors: office records through Append, phones through Enrol and Push, with a
// clock that walks through the months, so `received` follows `at` as it does in a real store. What a phone showed its
// tester is what forms.Judge says. The same end date makes the same organisation again (ids, tags, readings); only the
// store's own id and its keys are random.
package demo

import (
	"context"
	"fmt"
	"sort"
	"time"

	"tripwell/forms"
	"tripwell/store"
)

// LabelURL is where the labels of the demo point; the host does not exist (RFC 6761 6.4 keeps .example for such use).
const LabelURL = "https://demo.tripwell.example"

// Months is how far back the entries go.
const Months = 14

// Build makes a demo store in dir, which must hold none, with entries until the day before now, and closes it. progress
// hears how many days are done of how many; it may be nil.
func Build(ctx context.Context, dir string, now time.Time, progress func(done, total int)) error {
	today := forms.DayOf(now.UTC())
	first := firstOfMonth(today, -Months)
	b := &builder{
		ctx: ctx, today: today, first: first,
		clock: &clock{t: (first - setupDays).Time().Add(14 * time.Hour)},
	}
	s, err := store.Open(dir, store.Options{Now: b.clock.Now, Create: true, Demo: true, URL: LabelURL})
	if err != nil {
		return fmt.Errorf("demo store: %w", err)
	}
	b.store = s
	if progress == nil {
		progress = func(int, int) {}
	}
	if err := b.all(progress); err != nil {
		_ = s.Close()
		return fmt.Errorf("demo organisation: %w", err)
	}
	return s.Close()
}

// setupDays is how long before the first round the register was set up.
const setupDays = 12

// firstOfMonth gives the first day of the month some months after (or before) the one day is in.
func firstOfMonth(day forms.Day, months int) forms.Day {
	y, m, _ := day.Time().Date()
	return forms.DayOf(time.Date(y, m+time.Month(months), 1, 0, 0, 0, 0, time.UTC))
}

// builder is the organisation while it is being built.
type builder struct {
	ctx          context.Context
	clock        *clock
	store        *store.Store
	rules        *rules
	first, today forms.Day // first day of rounds; the day after the last entry

	manager     store.Person
	crews       [2]store.Person
	phones      map[string]*phone
	instruments map[string]*instrument
	sites       []*site
	events      map[forms.Day][]event
}

// event is something that happens at a moment: a push of a phone or an act in the office.
type event struct {
	at  time.Time
	act func() error
}

// on puts an event on the day of its moment; days that are past or not before today are left out.
func (b *builder) on(at time.Time, act func() error) {
	day := forms.DayOf(at.UTC())
	b.events[day] = append(b.events[day], event{at, act})
}

// all sets the organisation up and walks through its days. Acts may put further events on later days.
func (b *builder) all(progress func(done, total int)) error {
	b.events = map[forms.Day][]event{}
	if err := b.setUp(); err != nil {
		return err
	}
	b.stories()
	b.defects()
	b.asked()
	b.madeRounds()
	for day := b.first - setupDays; day < b.today; day++ {
		if err := b.ctx.Err(); err != nil {
			return err
		}
		for _, s := range b.sites {
			b.roundsOf(s, day)
		}
		if err := b.live(day); err != nil {
			return fmt.Errorf("%s: %w", day, err)
		}
		progress(int(day-b.first)+setupDays+1, int(b.today-b.first)+setupDays)
	}
	return nil
}

// live runs the events of a day in the order of their moments.
func (b *builder) live(day forms.Day) error {
	for len(b.events[day]) > 0 {
		todo := b.events[day]
		sort.SliceStable(todo, func(i, j int) bool { return todo[i].at.Before(todo[j].at) })
		next := todo[0]
		b.events[day] = todo[1:]
		b.clock.walkTo(next.at)
		if err := next.act(); err != nil {
			return err
		}
	}
	delete(b.events, day)
	return nil
}
