package demo

import (
	"fmt"
	"slices"
	"strings"
	"time"

	"tripwell/forms"
	"tripwell/store"
)

// fate is how a test turns out, before it is judged.
type fate string

const (
	sound    fate = "sound"
	locked   fate = "locked"  // could not get in
	slipped  fate = "slipped" // typed with the decimal point in the wrong place, corrected at once
	noTrip   fate = "no-trip"
	noReset  fate = "no-reset"
	burnt    fate = "burnt"
	slow     fate = "slow"     // trips, but outside the time for the test current
	highTrip fate = "high"     // rising current far above its band
	loose    fate = "loose"    // ground blade held too weakly
	reversed fate = "reversed" // hot and neutral reversed
)

func (f fate) fails() bool { return f != sound && f != locked && f != slipped }

// noteOf is what a crew writes beside a test that turned out so.
func noteOf(f fate) string {
	return map[fate]string{
		locked: "Room locked", burnt: "Face browned round the ground opening", noTrip: "Pressed TEST three times",
		noReset: "Stays out", loose: "Gauge slid out",
	}[f]
}

// quiet is how many days before the end nothing fails by chance, so that the failures still open are the told ones.
const quiet = 25

// fate draws how a test turns out; the stories decide it for their devices.
func (b *builder) fate(d *device, task string, day forms.Day) fate {
	if f, told := told[d.story]; told {
		if day == b.storyDay(d.story) {
			return f
		}
		return sound
	}
	if d.kind == forms.CordSet {
		return sound
	}
	r := chance("fate", d.id, task, day.String())
	x := r.Float64()
	if x < 0.013 && d.room != "" && d.kind != "rcd" && d.kind != "rcbo" {
		return locked
	}
	x = r.Float64()
	late := day >= b.today-quiet
	switch task {
	case "button":
		switch {
		case x < 0.0016 && !late:
			return noTrip
		case x < 0.0030 && !late:
			return noReset
		case x < 0.0036 && !late:
			return burnt
		}
	case "instrument":
		switch {
		case x < 0.012 && !late && d.residualMA == 0:
			return slow
		case x < 0.020 && !late && d.residualMA == 0:
			return highTrip
		case x < 0.035 && !d.noGround && d.residualMA == 0:
			return slipped
		}
	case "receptacle":
		switch {
		case x < 0.035 && !late:
			return loose
		case x < 0.045 && !late && !d.isolated:
			return reversed
		}
	}
	return sound
}

// told are the stories whose failures are still open at the end, with what fails.
var told = map[string]fate{"open-slow": slow, "open-retention": loose, "open-no-reset": noReset, "open-no-trip": noTrip}

// storyDay is the day on which a told failure happens: the last one on the newest working day.
func (b *builder) storyDay(story string) forms.Day {
	switch story {
	case "open-slow":
		return lastWorkday(b.today - 18)
	case "open-retention":
		return lastWorkday(b.today - 10)
	case "open-no-reset":
		return lastWorkday(b.today - 4)
	}
	return lastWorkday(b.today)
}

// stories puts the told visits on their days.
func (b *builder) stories() {
	behind := 0
	for _, s := range b.sites {
		for _, d := range s.devices {
			if _, ok := told[d.story]; ok {
				task := "button"
				switch d.story {
				case "open-slow":
					task = "instrument"
				case "open-retention":
					task = "receptacle"
				}
				p := b.phones[phone2]
				if s.code == bracken {
					p = b.phones[phone1]
				}
				b.visitOnce(d, p, task, b.storyDay(d.story), 11)
			}
			// Six yearly measurements on the clinic's first floor ran out a few days ago: instrument B was away.
			if s.code == kilnLane && d.kind == "gfci-receptacle" && d.floor == "First floor" && behind < 6 {
				d.yearlyBehind = true
				b.visitOnce(d, b.phones[phone2], "instrument", lastWorkday(b.today-367-forms.Day(2*behind)), 16)
				behind++
			}
		}
	}
	b.withdraw()
	b.ring()
	b.lend()
	b.trip()
}

// ring lets the office say that two counter outlets feed each other: the map leaves the later statement out and shows it.
func (b *builder) ring() {
	for _, s := range b.sites {
		at := map[string]*device{}
		for _, d := range s.devices {
			if s.code == kilnLane && d.panel == "LP-2" {
				at[d.name] = d
			}
		}
		left, right := at["Counter, left"], at["Counter, right"]
		if left == nil || right == nil {
			continue
		}
		b.on((b.today - 30).Time().Add(15*time.Hour), func() error {
			return b.office(s.id, store.Draft{Kind: "device.set", Subject: left.id, Body: set("fed_by", right.id)})
		})
	}
}

// lend lets a portable item of one site be taken to another by the crew that has both.
func (b *builder) lend() {
	for _, s := range b.sites {
		for _, d := range s.devices {
			if d.kind != "portable-gfci" || s == b.sites[0] {
				continue
			}
			at, p := s.at(lastWorkday(b.today-12), 9, 10), b.phones[phone1]
			b.on(at, func() error {
				if _, err := p.keep("", "device.set", s.id, d.id, at, set("at_site", b.sites[0].id, "where", "Workshop")); err != nil {
					return err
				}
				return p.push(b.ctx, b.store, at)
			})
			return
		}
	}
}

// trip lets a crew trip a counter outlet and look what goes dark: one that the map has behind it stays live.
func (b *builder) trip() {
	for _, s := range b.sites {
		i := slices.IndexFunc(s.devices, func(d *device) bool { return d.source != "" })
		if i < 0 {
			continue
		}
		d := s.devices[i]
		b.say(d, lastWorkday(b.today-4), "defect.opened", map[string]any{"cause": "protection-lost", "protector": d.source, "text": "Stayed live while its protector was tripped", "severity": forms.SeverityUnsafe})
		return
	}
}

// withdraw lets one entry be taken back: it was made at the outlet next to the labelled one.
func (b *builder) withdraw() {
	d := b.sites[0].devices[20]
	p := b.phones[phone1]
	day := workday(firstOfMonth(b.first, 8), 12)
	y, m, dd := day.Time().Date()
	at := time.Date(y, m, dd, 10, 5, 0, 0, d.site.zone)
	b.on(at, func() error {
		id, err := b.enter(p, d, "button", sound, at, "")
		if err != nil {
			return err
		}
		later := at.Add(6 * time.Minute)
		if _, err := p.keep("", "entry.withdrawn", d.site.id, id, later, map[string]any{"entry": id, "reason": "Entered on the outlet next to it"}); err != nil {
			return err
		}
		b.on(later.Add(4*time.Minute), func() error { return p.push(b.ctx, b.store, b.clock.Now()) })
		return nil
	})
}

// afterFail makes a failed device safe and has it replaced some days later, unless its story stays open. One told
// failure is not made safe: it is still in use.
func (b *builder) afterFail(p *phone, d *device, f fate, at time.Time) error {
	d.failed = true
	if d.story != "open-no-trip" {
		defect := newID(at, "defect", d.id)
		if _, err := p.keep("", "defect.made_safe", d.site.id, defect, at.Add(3*time.Minute), map[string]any{
			"device": d.id, "how": "Breaker " + d.panel + " / " + d.circuit + " off and tagged"}); err != nil {
			return err
		}
	}
	if _, open := told[d.story]; open {
		return nil
	}
	wait := 2 + chance("repair", d.id, at.String()).IntN(9)
	day := forms.DayOf(at) + forms.Day(wait)
	for wd := day.Time().Weekday(); wd == time.Saturday || wd == time.Sunday; wd = day.Time().Weekday() {
		day++
	}
	y, m, dd := day.Time().Date()
	when := time.Date(y, m, dd, 13, 20, 0, 0, d.site.zone)
	b.on(when, func() error { return b.replace(p, d, f, when) })
	return nil
}

// replace puts a new device in the place of a failed one and tests it fully: the plan's device becomes the new one.
func (b *builder) replace(p *phone, d *device, f fate, at time.Time) error {
	old := d.id
	d.generation++
	d.id = newID(at, "device", old, fmt.Sprint(d.generation))
	d.nature(d.id)
	d.installed = forms.DayOf(at)
	d.failed = false
	d.last = map[string]forms.Day{}
	if _, err := p.keep("", "device.registered", d.site.id, d.id, at, d.fields()); err != nil {
		return err
	}
	if _, err := p.keep("", "device.replaced", d.site.id, old, at.Add(time.Minute), map[string]any{
		"with": d.id, "reason": reasonOf(f), "on": forms.DayOf(at)}); err != nil {
		return err
	}
	task, note := "instrument", "New device, LINE and LOAD checked"
	if strings.HasSuffix(d.kind, "receptacle") && d.kind != "gfci-receptacle" {
		task, note = "receptacle", "New device"
	}
	done := at.Add(9 * time.Minute)
	if _, err := b.enter(p, d, task, sound, done, note); err != nil {
		return err
	}
	d.did(task, forms.DayOf(done))
	b.on(done.Add(10*time.Minute), func() error { return p.push(b.ctx, b.store, b.clock.Now()) })
	return nil
}

func reasonOf(f fate) string {
	return map[fate]string{noTrip: "Did not trip on TEST", noReset: "Did not reset", burnt: "Burnt", slow: "Trips too slowly",
		highTrip: "Trips at too high a current", loose: "Ground blade loose", reversed: "Terminals damaged while correcting the wiring"}[f]
}

// importHistory takes in what an older list knew: the newest yearly tests before the first round, and for a few devices
// the figures of earlier years.
func (b *builder) importHistory() error {
	for _, s := range b.sites {
		var drafts []store.Draft
		add := func(d *device, task string, day forms.Day) {
			form, _ := forms.FormFor(d.kind, task)
			d.did(task, day)
			drafts = append(drafts, store.Draft{Kind: "entry.imported", Subject: d.id, ID: newID(b.clock.Now(), "imported", d.id, task, day.String()),
				Body: map[string]any{"form": form, "day": day, "result": forms.Pass, "source": "spreadsheet"}})
		}
		for _, d := range s.devices {
			r := chance("history", d.id)
			day := b.first - setupDays - 1 - forms.Day(r.IntN(310))
			switch d.kind {
			case "gfci-receptacle", "gfci-breaker", "portable-gfci", "rcd", "rcbo":
				add(d, "instrument", day)
			case "hospital-receptacle", "receptacle", "protected-receptacle":
				add(d, "receptacle", day)
			}
			if d.story == "drift" {
				earlier, err := b.earlierYears(d, day)
				if err != nil {
					return err
				}
				drafts = append(drafts, earlier...)
			}
		}
		if err := b.office(s.id, drafts...); err != nil {
			return err
		}
	}
	return nil
}

// earlierYears are full measurements of three earlier years, taken from a paper log.
func (b *builder) earlierYears(d *device, last forms.Day) ([]store.Draft, error) {
	var out []store.Draft
	for year := 3; year >= 1; year-- {
		day := last - forms.Day(365*year)
		at := day.Time().Add(16 * time.Hour)
		e, _, err := b.entryOf(d, "instrument", sound, at, nil)
		if err != nil {
			return nil, err
		}
		out = append(out, store.Draft{Kind: "entry.imported", Subject: d.id, At: at, ID: newID(b.clock.Now(), "imported", d.id, day.String()),
			Body: map[string]any{"form": e.Form, "given": e.Given, "readings": e.Readings, "source": "paper"}})
	}
	return out, nil
}
