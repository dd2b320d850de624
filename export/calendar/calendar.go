// Package calendar writes what is due as an iCalendar feed (RFC 5545): one event for each site, day and test, one for each
// certificate of an instrument, one for each round. It names no person and holds nothing of a single device.
//
// It writes to an io.Writer from values read within a store.View; it opens no files and knows no HTTP.
package calendar

import (
	"fmt"
	"io"
	"net/url"
	"strings"
	"time"

	ical "github.com/arran4/golang-ical"

	"tripwell/export"
	"tripwell/forms"
	"tripwell/static"
	"tripwell/store"
)

// Ahead is how many days ahead the feed reaches; behind, it keeps what is overdue, as long as it is.
const Ahead = 400

// Event is one entry of the feed: a whole day, or a span of time where Starts is set.
type Event struct {
	UID     string // stays the same as long as the thing does (RFC 5545 3.8.4.7)
	Day     forms.Day
	Starts  time.Time // zero for a whole day
	Minutes int       // of a span
	Summary string
	Text    string
	Link    string
	Busy    bool // blocks time; dates do not
}

// Feed is everything of it. Stamp is DTSTAMP of all events: without METHOD it says when they were last changed here
// (RFC 5545 3.8.7.2), and one moment a day keeps unchanged feeds byte for byte alike.
type Feed struct {
	Name   string
	Stamp  time.Time
	Events []Event
}

// FeedOf reads the feed of a view's scope. base is the address of the office for links, "" for none.
func FeedOf(v *store.View, now time.Time, base string) (Feed, error) {
	words, err := static.ReadWords("en")
	if err != nil {
		return Feed{}, err
	}
	f := Feed{Name: words.Say("calendar.name"), Stamp: now.UTC().Truncate(24 * time.Hour)}
	r := reader{v, words, strings.TrimSuffix(base, "/"), now}
	sites, err := v.Sites()
	if err != nil {
		return f, err
	}
	for _, site := range sites {
		for _, read := range []func(store.Site) ([]Event, error){r.dates, r.rounds} {
			events, err := read(site)
			if err != nil {
				return f, err
			}
			f.Events = append(f.Events, events...)
		}
	}
	events, err := r.certificates()
	f.Events = append(f.Events, events...)
	return f, err
}

type reader struct {
	v     *store.View
	words *static.Words
	base  string
	now   time.Time
}

func (r reader) link(path string) string {
	if r.base == "" {
		return ""
	}
	return r.base + path
}

// dates gives an event for each day and test with how many there are. What is overdue stands on the day it was due.
func (r reader) dates(site store.Site) ([]Event, error) {
	today := forms.DayOf(r.now.In(site.Location()))
	counts, err := r.v.DueCounts(site.ID, today, today+Ahead)
	if err != nil {
		return nil, err
	}
	type key struct {
		day  forms.Day
		task string
	}
	sums, late := map[key]int{}, map[key]int{}
	var order []key
	for _, c := range counts {
		if c.State == forms.Paused {
			continue
		}
		k := key{c.Day, c.Task}
		if sums[k] == 0 {
			order = append(order, k)
		}
		sums[k] += c.N
		if c.State == forms.Overdue {
			late[k] += c.N
		}
	}
	var out []Event
	for _, k := range order {
		n := sums[k]
		e := Event{UID: fmt.Sprintf("due-%s-%s-%s@tripwell", site.ID, k.day, k.task), Day: k.day, Link: r.link("/dates?" + url.Values{"site": {site.ID}, "task": {k.task}, "within": {"all"}}.Encode()),
			Summary: r.words.Say("calendar.due", "site", site.Name, "n", n, "task", r.task(k.task)), Text: r.words.Say("calendar.due_text", "n", n, "site", site.Name, "code", site.Code)}
		if late[k] > 0 {
			e.Summary = r.words.Say("calendar.overdue", "site", site.Name, "n", late[k], "task", r.task(k.task))
			e.Link = r.link("/dates?" + url.Values{"site": {site.ID}, "task": {k.task}, "within": {"late"}}.Encode())
		}
		out = append(out, e)
	}
	return out, nil
}

func (r reader) task(task string) string {
	if key := "task." + task; r.words.Has(key) {
		return lowerFirst(r.words.Say(key))
	}
	return task
}

func lowerFirst(s string) string {
	if s == "" {
		return s
	}
	return strings.ToLower(s[:1]) + s[1:]
}

// rounds gives an event for each round that waits to be walked: at its hour where it has one.
func (r reader) rounds(site store.Site) ([]Event, error) {
	rounds, err := r.v.Rounds(site.ID)
	var out []Event
	for _, one := range rounds {
		if one.Day == forms.NoDay || one.Walk() || one.State != store.RoundMade && one.State != store.RoundWalking {
			continue
		}
		n := len(one.Stops)
		e := Event{UID: "round-" + one.ID + "@tripwell", Day: one.Day, Minutes: max(one.Minutes, 15), Busy: true, Link: r.link("/rounds/" + one.ID),
			Summary: r.words.Say("calendar.round", "site", site.Name, "n", n), Text: r.words.Say("calendar.round_text", "done", one.Counts[store.StopDone], "n", n)}
		if at, err := time.Parse("15:04", one.Starts); err == nil {
			y, m, d := one.Day.Time().Date()
			// The hour at the site on that day; written in UTC, which needs no VTIMEZONE and is right on both sides of a change of clocks.
			e.Starts = time.Date(y, m, d, at.Hour(), at.Minute(), 0, 0, site.Location()).UTC()
		}
		out = append(out, e)
	}
	return out, err
}

// certificates gives the day on which each instrument's calibration ends.
func (r reader) certificates() ([]Event, error) {
	instruments, err := r.v.Instruments()
	var out []Event
	for _, i := range instruments {
		if i.Retired || i.CalibrationDue == forms.NoDay {
			continue
		}
		name := i.Name
		if i.Serial != "" {
			name += " (" + i.Serial + ")"
		}
		out = append(out, Event{UID: "calibration-" + i.ID + "@tripwell", Day: i.CalibrationDue, Summary: r.words.Say("calendar.calibration", "name", name), Text: r.words.Say("calendar.calibration_text"), Link: r.link("/set-up")})
	}
	return out, err
}

// Write writes a feed: CRLF at every end of line, lines folded at 75 octets (3.1), texts escaped (3.3.11).
func Write(w io.Writer, f Feed) error {
	cal := ical.NewCalendar()
	cal.SetProductId("-//Tripwell//Tripwell//EN")
	cal.SetCalscale("GREGORIAN")
	cal.SetXWRCalName(f.Name)
	cal.SetName(f.Name)            // RFC 7986 5.1
	cal.SetRefreshInterval("PT6H") // RFC 7986 5.7
	cal.SetXPublishedTTL("PT6H")   // what older readers look at
	for _, e := range f.Events {
		v := cal.AddEvent(e.UID)
		v.SetDtStampTime(f.Stamp)
		if e.Starts.IsZero() {
			v.SetAllDayStartAt(e.Day.Time())
			v.SetAllDayEndAt((e.Day + 1).Time()) // the end is not part of it (3.6.1)
		} else {
			v.SetStartAt(e.Starts)
			v.SetEndAt(e.Starts.Add(time.Duration(e.Minutes) * time.Minute))
		}
		v.SetSummary(oneText(e.Summary))
		v.SetDescription(oneText(e.Text))
		if e.Link != "" {
			v.SetURL(e.Link)
		}
		v.SetTimeTransparency(ical.TransparencyTransparent)
		if e.Busy {
			v.SetTimeTransparency(ical.TransparencyOpaque)
		}
	}
	return cal.SerializeTo(w, ical.WithNewLine("\r\n"))
}

// oneText leaves nothing that ends a line by itself or may not stand in a text (3.3.11: no control but HTAB).
func oneText(s string) string { return export.Printable(strings.ReplaceAll(s, "\r\n", "\n")) }
