package demo

import (
	"time"

	"tripwell/forms"
	"tripwell/store"
)

// at gives an hour of a day at a site.
func (s *site) at(day forms.Day, hour, minute int) time.Time {
	y, m, d := day.Time().Date()
	return time.Date(y, m, d, hour, minute, 0, 0, s.zone)
}

// defects tells the stories of what failed and what was done about it, so that there is one in every state: assigned with
// its parts, repaired and waiting for its test, closed before its test, seen by hand, opened again. What failed and is
// still in use is told by the tests themselves.
func (b *builder) defects() {
	for _, s := range b.sites {
		for _, d := range s.devices {
			switch d.story {
			case "open-retention":
				b.say(d, lastWorkday(b.today-7), "defect.assigned", map[string]any{"to": b.crews[1].ID, "due": b.today + 5, "parts": []string{"Hospital receptacle, 20 A", "Wall plate"}})
			case "open-slow":
				b.say(d, lastWorkday(b.today-6), "defect.repaired", map[string]any{"how": "Load side rewired, module reseated"})
				b.say(d, lastWorkday(b.today-5), "defect.closed", map[string]any{"reason": "Seen to by Crew 1"})
			case "open-no-reset":
				b.say(d, lastWorkday(b.today-3), "defect.noted", map[string]any{"text": "Same make as the two before it", "parts": []string{"GFCI receptacle, 20 A"}})
			}
		}
	}
	first := b.sites[0].devices
	b.say(first[31%len(first)], lastWorkday(b.today-8), "defect.opened", map[string]any{"text": "Cover plate cracked", "severity": forms.SeverityRepair, "due": b.today + 20, "parts": []string{"Wall plate"}})
	again := first[44%len(first)]
	id := b.say(again, lastWorkday(b.today-75), "defect.opened", map[string]any{"text": "Trips when the extractor starts", "severity": forms.Nuisance})
	b.sayOf(id, again, lastWorkday(b.today-72), "defect.repaired", map[string]any{"how": "Extractor moved to its own circuit"})
	b.sayOf(id, again, lastWorkday(b.today-2), "defect.reopened", map[string]any{"reason": "Trips again since the cold days"})
	b.certificates()
}

// say puts what the manager says of a device's defects on a day; it gives the id it is said under.
func (b *builder) say(d *device, day forms.Day, kind string, body map[string]any) string {
	id := newID(d.site.at(day, 15, 20), kind, d.site.code, d.story, day.String())
	b.sayOf(id, d, day, kind, body)
	return id
}

func (b *builder) sayOf(subject string, d *device, day forms.Day, kind string, body map[string]any) {
	b.on(d.site.at(day, 15, 20), func() error {
		body["device"] = d.id
		return b.office(d.site.id, store.Draft{Kind: kind, Subject: subject, Body: body})
	})
}

// certificates tells of Instrument A: found in order six weeks ago, then out of tolerance. What Crew 1 measured in between
// is in doubt.
func (b *builder) certificates() {
	in, home := b.instruments["A"], b.sites[0]
	for _, c := range []struct {
		before forms.Day
		body   map[string]any
	}{
		{44, map[string]any{"certificate": "A-0417/5"}},
		{9, map[string]any{"certificate": "A-0417/6", "out": true, "errors": map[string]any{"trip_current_ma": map[string]any{"percent": -8}, "trip_time_ms": map[string]any{"plus": 2}}}},
	} {
		day := lastWorkday(b.today - c.before)
		c.body["on"], c.body["due"] = day, max(day+365, in.due)
		b.on(home.at(day, 12, 0), func() error {
			return b.office("org", store.Draft{Kind: "instrument.calibrated", Subject: in.id, Body: c.body})
		})
	}
	b.on(home.at(lastWorkday(b.today-9), 16, 0), func() error {
		return b.office("org", store.Draft{Kind: "instrument.proved", Subject: in.id, Body: map[string]any{"on": lastWorkday(b.today - 9), "where": "Workshop, bench outlet", "works": true}})
	})
}
