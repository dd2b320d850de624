package demo

import (
	"time"

	"tripwell/forms"
	"tripwell/store"
)

// ahead is how many days before its date a crew takes a yearly test along on its monthly round.
const ahead = 35

// workday gives the n-th working day (Monday to Friday) of the month a day is in, from 1.
func workday(month forms.Day, n int) forms.Day {
	day := firstOfMonth(month, 0)
	for ; ; day++ {
		if wd := day.Time().Weekday(); wd != time.Saturday && wd != time.Sunday {
			if n--; n == 0 {
				return day
			}
		}
	}
}

// lastWorkday gives the newest working day before a day.
func lastWorkday(before forms.Day) forms.Day {
	day := before - 1
	for wd := day.Time().Weekday(); wd == time.Saturday || wd == time.Sunday; wd = day.Time().Weekday() {
		day--
	}
	return day
}

// roundsOf puts the part of the month's round that falls on a day on that day.
func (b *builder) roundsOf(s *site, day forms.Day) {
	if day < b.first {
		return
	}
	parts := (len(s.devices) + s.perDay - 1) / s.perDay
	for part := range parts {
		if workday(day, s.firstWorkday+part) != day {
			continue
		}
		end := min((part+1)*s.perDay, len(s.devices))
		p := b.phoneFor(s, day, part)
		b.visit(s, p, day, s.devices[part*s.perDay:end])
	}
}

// phoneFor says who walks a part of a round: Crew 1 at Bracken Row, Crew 2 at Ottermoor, both in turn at Kiln Lane. On
// one round there Crew 2 used an old phone.
func (b *builder) phoneFor(s *site, day forms.Day, part int) *phone {
	switch {
	case s.code == bracken || s.code == kilnLane && part%2 == 0:
		return b.phones[phone1]
	case s.code == kilnLane && day >= firstOfMonth(b.first, 6) && day < firstOfMonth(b.first, 7):
		return b.phones[phoneOld]
	}
	return b.phones[phone2]
}

// missedShare is the share of a site's devices that a round leaves out: Ottermoor fell behind in its last two full months.
func (b *builder) missedShare(s *site, day forms.Day) float64 {
	if s.code != ottermoor {
		return 0
	}
	switch firstOfMonth(day, 0) {
	case firstOfMonth(b.today, -1):
		return 0.45
	case firstOfMonth(b.today, -2):
		return 0.14
	}
	return 0.02
}

// visit lets a crew walk along some devices on a day, without signal; the phone sends everything when it is back in
// the van. In one month the phone lay in a drawer for twelve days first.
func (b *builder) visit(s *site, p *phone, day forms.Day, devices []*device) {
	y, m, d := day.Time().Date()
	start := time.Date(y, m, d, 7, 30, 0, 0, s.zone)
	b.on(start, func() error {
		at := start
		month := day.String()[:7]
		for _, dev := range devices {
			task := b.dueTask(dev, day)
			if task == "" || dev.failed {
				continue
			}
			if chance("left out", dev.id, month).Float64() < b.missedShare(s, day) {
				continue
			}
			var err error
			if at, err = b.test(p, dev, task, at); err != nil {
				return err
			}
		}
		send := at.Add(25 * time.Minute)
		if s.code == ottermoor && firstOfMonth(day, 0) == firstOfMonth(b.first, 4) {
			send = send.AddDate(0, 0, 12)
		}
		b.on(send, func() error { return p.push(b.ctx, b.store, b.clock.Now()) })
		return nil
	})
}

// dueTask says what a round does at a device: its yearly test when that is due soon, else the button where a plan asks it.
func (b *builder) dueTask(d *device, day forms.Day) string {
	soon := func(task string, days forms.Day) bool {
		last, done := d.last[task]
		return !done || last+days <= day+ahead
	}
	switch d.kind {
	case "hospital-receptacle", "protected-receptacle", "receptacle":
		if soon("receptacle", 365) {
			return "receptacle"
		}
	case "cord-set":
		if soon("receptacle", 92) {
			return "receptacle"
		}
	case "rcd", "rcbo":
		if soon("instrument", 365) {
			return "instrument"
		}
		if soon("button", 182) {
			return "button"
		}
	case "gfci-receptacle", "gfci-breaker", "portable-gfci":
		if soon("instrument", 365) && !d.yearlyBehind {
			return "instrument"
		}
		return "button"
	}
	return ""
}

// test makes the entry of one test at a moment and what follows from it; it gives the moment the crew moves on.
func (b *builder) test(p *phone, d *device, task string, at time.Time) (time.Time, error) {
	day := forms.DayOf(at)
	f := b.fate(d, task, day)
	done := at.Add(time.Duration(40+chance("pace", d.id, day.String()).IntN(50)) * time.Second)
	if task != "button" {
		done = done.Add(3 * time.Minute)
	}
	id, err := b.enter(p, d, task, f, done, noteOf(f))
	if err != nil {
		return at, err
	}
	switch {
	case f == locked:
		b.returnTo(d, p, task, day)
	case f == slipped && !d.noGround:
		return b.correct(p, d, id, task, done)
	case f.fails():
		return done, b.afterFail(p, d, f, done)
	default:
		d.did(task, day)
	}
	return done, nil
}

// did notes a test that counts; an instrument test with its button steps also meets the button's date.
func (d *device) did(task string, day forms.Day) {
	d.last[task] = day
	if task == "instrument" {
		d.last["button"] = day
	}
}

// body is the body of entry.made.
type body struct {
	Form     string                   `json:"form"`
	Given    forms.Given              `json:"given"`
	Readings map[string]forms.Reading `json:"readings"`
	Series   []forms.SeriesReading    `json:"series,omitempty"`
	Shown    store.Shown              `json:"shown"`
	Source   string                   `json:"source"`
	Note     string                   `json:"note,omitempty"`
}

// enter puts the entry of a test into the phone's tray with what the phone showed its tester; it gives the entry's id.
func (b *builder) enter(p *phone, d *device, task string, f fate, at time.Time, note string) (string, error) {
	e, told, err := b.entryOf(d, task, f, at, b.instrumentOf(p))
	if err != nil {
		return "", err
	}
	return p.keep("", "entry.made", d.site.id, d.id, at, body{e.Form, e.Given, e.Readings, e.Series, told, "phone", note})
}

// instrumentOf says which instrument a crew carries.
func (b *builder) instrumentOf(p *phone) *instrument {
	if p.name == phone1 {
		return b.instruments["A"]
	}
	return b.instruments["B"]
}

// returnTo puts a locked room on a list; the crew comes back three days later, except at Ottermoor.
func (b *builder) returnTo(d *device, p *phone, task string, day forms.Day) {
	if d.site.code == ottermoor {
		return
	}
	back := day + 3
	for wd := back.Time().Weekday(); wd == time.Saturday || wd == time.Sunday; wd = back.Time().Weekday() {
		back++
	}
	b.visitOnce(d, p, task, back, 15)
}

// visitOnce lets a crew test one device on a day at an hour.
func (b *builder) visitOnce(d *device, p *phone, task string, day forms.Day, hour int) {
	y, m, dd := day.Time().Date()
	at := time.Date(y, m, dd, hour, 10, 0, 0, d.site.zone)
	b.on(at, func() error {
		done, err := b.test(p, d, task, at)
		if err != nil {
			return err
		}
		b.on(done.Add(5*time.Minute), func() error { return p.push(b.ctx, b.store, b.clock.Now()) })
		return nil
	})
}

// correct mends a slip of the decimal point two minutes after the entry.
func (b *builder) correct(p *phone, d *device, entry, task string, at time.Time) (time.Time, error) {
	at = at.Add(2 * time.Minute)
	e, _, err := b.entryOf(d, task, sound, at, b.instrumentOf(p))
	if err != nil {
		return at, err
	}
	mended := map[string]any{"entry": entry, "readings": e.Readings, "reason": "Decimal point slipped"}
	if len(e.Series) > 0 {
		mended["series"] = e.Series
	}
	_, err = p.keep("", "entry.corrected", d.site.id, entry, at, mended)
	d.did(task, forms.DayOf(at))
	return at, err
}
