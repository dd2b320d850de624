package calendar

import (
	"bytes"
	"fmt"
	"strings"
	"testing"
	"time"

	"github.com/emersion/go-ical"

	"tripwell/forms"
	"tripwell/store"
	"tripwell/store/record"
)

func must(t testing.TB, err error) {
	t.Helper()
	if err != nil {
		t.Fatal(err)
	}
}

// parsed writes a feed and reads it with another library than the one that wrote it.
func parsed(t testing.TB, f Feed) (raw string, events map[string]ical.Event) {
	t.Helper()
	var b bytes.Buffer
	must(t, Write(&b, f))
	raw = b.String()
	cal, err := ical.NewDecoder(strings.NewReader(raw)).Decode()
	must(t, err)
	events = map[string]ical.Event{}
	for _, e := range cal.Events() {
		uid, err := e.Props.Text(ical.PropUID)
		must(t, err)
		if _, twice := events[uid]; twice {
			t.Errorf("the UID %s stands twice", uid)
		}
		events[uid] = e
	}
	// What another writer would make of it must be readable too: the decoder's own checks of required properties.
	must(t, ical.NewEncoder(&bytes.Buffer{}).Encode(cal))
	return raw, events
}

func TestWrite_LinesAndValues(t *testing.T) {
	long := strings.Repeat("Prüfstraße – Gerätehaus; Nord, ", 12) + `C:\Keller`
	f := Feed{Name: "Dates, all; of them", Stamp: time.Date(2026, 12, 1, 0, 0, 0, 0, time.UTC), Events: []Event{
		{UID: "a@tripwell", Day: forms.Date(2007, 6, 28), Summary: long, Text: "one\r\ntwo\x07"},
		{UID: "b@tripwell", Starts: time.Date(1998, 1, 19, 7, 0, 0, 0, time.UTC), Minutes: 60, Summary: "Round", Busy: true},
	}}
	raw, events := parsed(t, f)
	for i, line := range strings.Split(strings.TrimSuffix(raw, "\r\n"), "\r\n") {
		// RFC 5545 3.1: lines of text SHOULD NOT be longer than 75 octets, excluding the line break, and end in CRLF.
		if len(line) > 75 {
			t.Errorf("line %d has %d octets: %q", i+1, len(line), line)
		}
		if strings.ContainsAny(line, "\r\n") || !strings.HasPrefix(line, " ") && !strings.Contains(line, ":") && !strings.Contains(line, ";") {
			t.Errorf("line %d: %q", i+1, line)
		}
		if strings.ToValidUTF8(line, "?") != line {
			t.Errorf("line %d is cut within a character: %q", i+1, line)
		}
	}
	a, b := events["a@tripwell"], events["b@tripwell"]
	if got, err := a.Props.Text(ical.PropSummary); err != nil || got != strings.Join(strings.Fields(long), " ") {
		t.Errorf("summary came back as %q, %v", got, err)
	}
	if got, _ := a.Props.Text(ical.PropDescription); got != "one two" {
		t.Errorf("description came back as %q", got)
	}
	for _, want := range []string{
		`Nord\,`, `haus\;`, `C:\\Keller`, // RFC 5545 3.3.11: ESCAPED-CHAR = ("\\" / "\;" / "\," / "\N" / "\n")
		"DTSTART;VALUE=DATE:20070628\r\n",                        // RFC 5545 3.6.1, the example of the festival that begins on 28 June 2007
		"DTEND;VALUE=DATE:20070629\r\n",                          // its end is the day after the last (3.6.1: non-inclusive)
		"DTSTART:19980119T070000Z\r\n",                           // RFC 5545 3.3.5, form #2: January 19, 1998, at 0700 UTC
		"DTEND:19980119T080000Z\r\n", "DTSTAMP:20261201T000000Z", // 3.8.7.2: in the UTC time format
		"VERSION:2.0\r\n", "PRODID:", "TRANSP:TRANSPARENT", "TRANSP:OPAQUE",
	} {
		if !strings.Contains(strings.ReplaceAll(raw, "\r\n ", ""), want) {
			t.Errorf("%q is not in %s", want, raw)
		}
	}
	if at, err := b.DateTimeStart(time.UTC); err != nil || !at.Equal(f.Events[1].Starts) {
		t.Errorf("got %v %v", at, err)
	}
}

// town is a real store with a site of two devices in a zone.
type town struct {
	*store.Store
	t   *testing.T
	now time.Time
}

func newTown(t *testing.T, now time.Time) *town {
	h := &town{t: t, now: now}
	s, err := store.Open(t.TempDir(), store.Options{Now: func() time.Time { return h.now }, Create: true})
	must(t, err)
	t.Cleanup(func() { must(t, s.Close()) })
	h.Store = s
	return h
}

func (h *town) append(drafts ...store.Draft) {
	h.t.Helper()
	for i := range drafts {
		drafts[i].By = h.ID()
	}
	_, err := h.Append(h.t.Context(), drafts...)
	must(h.t, err)
}

func (h *town) site(code, zone string, devices int) string {
	id := record.NamedID("site", code)
	h.append(store.Draft{Kind: "site.registered", Log: id, Subject: id, Body: map[string]any{"set": map[string]any{"code": code, "name": code + " House", "zone": zone, "standard": "NEC"}}})
	for i := range devices {
		h.append(store.Draft{Kind: "device.registered", Log: id, Subject: record.NamedID("device", code, fmt.Sprint(i)), Body: map[string]any{"set": map[string]any{"kind": "gfci-receptacle", "where": "Spot"}}})
	}
	return id
}

func (h *town) feed(scope store.Scope) (raw string, events map[string]ical.Event) {
	h.t.Helper()
	var f Feed
	must(h.t, h.View(scope, func(v *store.View) (err error) {
		f, err = FeedOf(v, h.now, "https://tests.example")
		return err
	}))
	return parsed(h.t, f)
}

// A round begins at its hour at the site, on both sides of a change of clocks. Local times and UTC from the rules in force:
// United States, Energy Policy Act of 2005 section 110 (ends on the first Sunday of November); European Union, Directive
// 2000/84/EC (last Sunday of October, 01:00 UTC); New South Wales, Standard Time Act 1987 (begins on the first Sunday of October).
func TestFeed_RoundsInThreeZonesOverAChangeOfClocks(t *testing.T) {
	h := newTown(t, time.Date(2026, 9, 1, 8, 0, 0, 0, time.UTC))
	for _, c := range []struct{ zone, day, utc string }{
		{"America/Chicago", "2026-10-31", "2026-10-31T12:30:00Z"}, // UTC−5
		{"America/Chicago", "2026-11-01", "2026-11-01T13:30:00Z"}, // UTC−6 from 02:00 on
		{"Europe/Berlin", "2026-10-24", "2026-10-24T05:30:00Z"},   // UTC+2
		{"Europe/Berlin", "2026-10-25", "2026-10-25T06:30:00Z"},   // UTC+1
		{"Australia/Sydney", "2026-10-03", "2026-10-02T21:30:00Z"},
		{"Australia/Sydney", "2026-10-04", "2026-10-03T20:30:00Z"},
	} {
		code := strings.ToUpper(c.zone[len(c.zone)-4:])
		site := h.site(code, c.zone, 1)
		round := record.NamedID("round", c.zone, c.day)
		h.append(store.Draft{Kind: "round.made", Log: site, Subject: round, Body: map[string]any{"set": map[string]any{"stops": []string{record.NamedID("device", code, "0") + "/button"}, "day": c.day, "starts": "07:30", "minutes": 40}}})
		_, events := h.feed(store.Scope{All: true, Role: "owner"})
		e, there := events["round-"+round+"@tripwell"]
		if !there {
			t.Fatalf("%s %s: the round is not in the feed", c.zone, c.day)
		}
		zone, err := time.LoadLocation(c.zone)
		must(t, err)
		at, err := e.DateTimeStart(time.UTC)
		must(t, err)
		end, err := e.DateTimeEnd(time.UTC)
		must(t, err)
		if got := at.UTC().Format(time.RFC3339); got != c.utc || at.In(zone).Format("15:04") != "07:30" || end.Sub(at) != 40*time.Minute {
			t.Errorf("%s %s: got %s to %s, want %s", c.zone, c.day, got, end, c.utc)
		}
	}
}

func TestFeed_CountsDatesWithinTheScopeAndNamesNobody(t *testing.T) {
	h := newTown(t, time.Date(2026, 11, 3, 8, 0, 0, 0, time.UTC))
	elm := h.site("ELM", "America/Chicago", 3)
	h.site("OAK", "Europe/Berlin", 1)
	person, err := h.PutPerson(t.Context(), "", store.Person{Name: "Unmistakable Name", Role: "crew", Sites: []string{elm}, Active: true})
	must(t, err)
	h.append(store.Draft{Kind: "instrument.set", Log: "org", Subject: record.NamedID("instrument"), Body: map[string]any{"set": map[string]any{"name": "Analyser 2", "serial": "TW-1", "calibration_due": "2027-02-28"}}},
		store.Draft{Kind: "round.made", Log: elm, Subject: record.NamedID("round"), Body: map[string]any{"set": map[string]any{"stops": []string{record.NamedID("device", "ELM", "0") + "/button"}, "day": "2026-11-10", "people": []string{person.ID}, "crew": "Unmistakable Name's", "note": "Ask Unmistakable Name"}}})
	raw, events := h.feed(person.Scope())
	if strings.Contains(strings.ReplaceAll(raw, "\r\n ", ""), "Unmistakable") || strings.Contains(raw, "OAK") {
		t.Errorf("the feed names a person or another's site: %s", raw)
	}
	// A monthly button plan: three devices registered on 3 November have their first date on the 30th.
	due, there := events["due-"+elm+"-2026-11-30-button@tripwell"]
	if summary, _ := due.Props.Text(ical.PropSummary); !there || summary != "ELM House: 3 × button test due" {
		t.Errorf("got %q in %s", summary, raw)
	}
	if _, there := events["calibration-"+record.NamedID("instrument")+"@tripwell"]; !there {
		t.Error("the certificate is not in the feed")
	}
	h.now = time.Date(2026, 12, 5, 8, 0, 0, 0, time.UTC)
	raw, events = h.feed(person.Scope())
	due, there = events["due-"+elm+"-2026-11-30-button@tripwell"]
	if summary, _ := due.Props.Text(ical.PropSummary); !there || summary != "ELM House: 3 × button test overdue" {
		t.Errorf("a month on, under the same UID: got %q in %s", summary, raw)
	}
	again, _ := h.feed(person.Scope())
	if again != raw {
		t.Error("read twice on one day, the feed differs")
	}
}
