package server

import (
	"cmp"
	"fmt"
	"math"
	"net/http"
	"slices"
	"strings"

	"github.com/labstack/echo/v4"

	"tripwell/forms"
	"tripwell/store"
)

// devicePage is one device with everything that was ever said of it.
type devicePage struct {
	Frame
	Crumbs                      []link
	Heading, Tag, What, Retired string
	Last                        mark
	Next                        []dated
	Conflicts                   []conflictLine
	Clash                       string
	Same                        link // two items that hold one label are one; "" where they cannot be
	Columns                     []column
	Entries                     []entryRow
	Defects                     []defectRow
	Gone                        []conflictLine // what was said of defects that a correction took away
	Chain                       *chainShown
	Facts                       []fact
	Actions                     []link
	SheetHref                   string // the device sheet, "" for who may not take it
	Label                       *label
	NoLabel                     string
	Earlier                     []link
}

// dated is a sentence about a date; Late when the date has passed.
type dated struct {
	Text string
	Late bool
}

// column is a column of readings in a device's entries; only columns that have a reading are shown.
type column struct {
	Text string
	Num  bool
}

// entryRow is one entry of a device; Cells follow the page's columns.
type entryRow struct {
	Href, Day, Task string
	Cells           []string
	Verdict         mark
	Why, By         string
}

// fact is one named value.
type fact struct {
	Name, Value string
	Mono        bool   // an id
	Href        string // "" = no link
}

func (s *Server) deviceShow(c echo.Context) error {
	view := devicePage{Frame: s.frame(c, s.words.Say("office.device.title"), "sites")}
	err := s.store.View(scope(c), func(v *store.View) error {
		row, err := v.Device(c.Param("device"), forms.DayOf(s.store.Now()))
		if err != nil {
			return err
		}
		site, err := v.Site(row.Site)
		if err != nil {
			return err
		}
		if row, err = v.Device(row.ID, s.today(site)); err != nil {
			return err
		}
		return s.buildDevice(v, site, row, &view)
	})
	if err != nil {
		return err
	}
	switch {
	case may(c, office):
		view.SheetHref = "/device-sheet?device=" + c.Param("device")
	case view.Label != nil: // downloads are not open to crew
		view.Label.Sheet, view.Label.PNG, view.Label.SVG = "", "", ""
	}
	return s.page(c, http.StatusOK, "device.html", view)
}

func (s *Server) buildDevice(v *store.View, site store.Site, d store.Device, view *devicePage) error {
	entries, err := v.Entries(d.ID)
	if err != nil {
		return err
	}
	names, err := instrumentNames(v)
	if err != nil {
		return err
	}
	k, today := s.ink(), s.today(site)
	view.Title = s.spot(d.DeviceRow)
	view.Heading, view.Tag, view.What = view.Title, k.tag(d.Tag), s.whatItIs(d.DeviceRow)
	view.Crumbs = []link{{Href: siteHref(site), Text: site.Name}}
	if context := d.Place.Context(); context != "" {
		view.Crumbs = append(view.Crumbs, link{Text: context})
	}
	view.Last = k.verdict("")
	if task, last, ok := lastStanding(d.DeviceRow); ok {
		view.Last = k.verdict(last.Result)
		view.Last.Word += ": " + lowerFirst(k.named("task", task)) + ", " + k.near(last.Day, today)
	}
	if view.Next = s.nextDates(d.DeviceRow, today); d.Retired {
		view.Next, view.Retired = nil, k.say("office.device.retired")
	}
	view.Conflicts = s.conflicts(v, d.Conflicts, today)
	if len(d.TagClash) > 0 {
		view.Clash = k.say("office.device.clash", "tag", view.Tag)
		like, err := s.itemsLike(v, d)
		if err != nil {
			return err
		}
		if view.Change && len(like) > 0 {
			view.Same = link{Href: "/devices/" + d.ID + "/same", Text: k.say("office.item.same")}
		}
	}
	s.entryTable(v, entries, names, view)
	if view.Chain, err = s.deviceChain(v, d, today, view.Change); err != nil {
		return err
	}
	view.Facts = s.deviceFacts(d)
	applies, err := s.setApplying(v, d.ID, today)
	if err != nil {
		return err
	}
	at, err := s.itemFacts(v, d, today)
	if err != nil {
		return err
	}
	view.Facts = append(append(append(view.Facts, applies), at...), s.formerFact(v, d, today)...)
	marks, err := s.markFacts(v, d, entries, today)
	if err != nil {
		return err
	}
	view.Facts = append(view.Facts, marks...)
	s.labelOf(d, view)
	if err := s.defectsOf(v, d, site, view); err != nil {
		return err
	}
	for _, e := range d.Earlier {
		view.Earlier = append(view.Earlier, link{Href: "/devices/" + e.ID, Text: s.earlier(e)})
	}
	if view.Change {
		view.Actions = []link{{Href: "/devices/" + d.ID + "/edit", Text: k.say("office.device.edit")}, {Href: "/devices/" + d.ID + "/defects/new", Text: k.say("office.defect.new")}}
		if !d.Retired {
			view.Actions = append(view.Actions, link{Href: "/devices/" + d.ID + "/retire", Text: k.say("office.device.retire")},
				link{Href: siteHref(site) + "/occasion?device=" + d.ID, Text: k.say("asked.occasion_new")}, link{Href: siteHref(site) + "/pause?device=" + d.ID, Text: k.say("asked.pause_new")})
		} else if d.Place.ID != "" {
			view.Actions = append(view.Actions, link{Href: siteHref(site) + "/devices/new?after=" + d.ID, Text: k.say("office.device.successor")})
		}
	}
	return nil
}

// whatItIs is the line under a device's heading: GFCI receptacle, 20 A · LP-2 / 14 · installed 3 Mar 2021.
func (s *Server) whatItIs(d store.DeviceRow) string {
	text := joined(s.kindAndRating(d), circuit(d))
	if d.Installed != forms.NoDay && d.Installed != 0 {
		text = joined(text, s.words.Say("office.device.installed", "day", s.ink().day(d.Installed)))
	}
	return text
}

func (s *Server) earlier(d store.DeviceRow) string {
	text := joined(s.kindAndRating(d), strings.TrimSpace(d.Make+" "+d.Model))
	if d.Installed != forms.NoDay && d.Installed != 0 {
		text = joined(text, s.words.Say("office.device.installed", "day", s.ink().day(d.Installed)))
	}
	return text
}

// nextDates says each date of a device in a sentence, the passed ones first.
func (s *Server) nextDates(d store.DeviceRow, today forms.Day) []dated {
	k := s.ink()
	if len(d.Due) == 0 {
		return []dated{{Text: k.say("office.device.no_dates")}}
	}
	var out []dated
	for _, due := range d.Due {
		key := map[string]string{"overdue": "office.device.next_overdue", "in-grace": "office.device.next_grace"}[due.State]
		if due.Due == forms.NoDay {
			key = "office.device.next_never"
		}
		text := k.say(cmp.Or(key, "office.device.next"), "task", k.named("task", due.Task), "day", k.near(due.Due, today))
		switch {
		case due.State == forms.Paused:
			text = k.say("asked.device_paused", "task", k.named("task", due.Task), "day", k.near(due.Paused.Until, today), "reason", due.Paused.Reason)
		case due.Cause != "":
			text = k.say("asked.device_cause", "what", text, "cause", s.cause(due.Cause))
		}
		out = append(out, dated{Text: text, Late: due.State == "overdue"})
	}
	slices.SortStableFunc(out, func(a, b dated) int { return cmp.Compare(b2i(b.Late), b2i(a.Late)) })
	return out
}

func b2i(b bool) int {
	if b {
		return 1
	}
	return 0
}

// tableReadings are the readings a device's entries are compared by, in the order of the work.
var tableReadings = []string{"trip_current_ma", "trip_time_ms", "wiring", "ground_ohm", "retention_g"}

// tableOwn is the most checks of the organisation's own that the table gives columns of their own.
const tableOwn = 3

// entryTable fills the entries with the columns at least one of them has a reading for.
func (s *Server) entryTable(v *store.View, entries []store.Entry, instruments map[string]string, view *devicePage) {
	k := s.ink()
	cells := make([]map[string]string, len(entries))
	used := map[string]bool{}
	for i, e := range entries {
		cells[i] = map[string]string{}
		for _, code := range tableReadings {
			if text := s.tableCell(e, code); text != "" {
				cells[i][code], used[code] = text, true
			}
		}
	}
	var codes []string
	for _, code := range tableReadings {
		if used[code] {
			codes = append(codes, code)
			view.Columns = append(view.Columns, column{Text: k.reading(code), Num: unitOf(code) != ""})
		}
	}
	for _, name := range s.ownCells(entries, cells) {
		codes = append(codes, name)
		view.Columns = append(view.Columns, column{Text: name})
	}
	for i, e := range entries {
		row := entryRow{Href: "/entries/" + e.ID, Day: k.day(e.Day), Task: k.named("task", e.Task), Verdict: k.verdict(e.Verdict.Result), By: s.testedBy(v, e)}
		if name := instruments[e.Body.Given.Instrument]; name != "" {
			row.By = k.say("office.device.by_with", "by", row.By, "instrument", name)
		}
		if e.Verdict.Result == forms.NotTested {
			row.Why = lowerFirst(whyNot(k, e.Body))
		}
		if e.Withdrawn != nil {
			row.Verdict, row.Why = mark{"none", k.say("office.entry.withdrawn_short")}, ""
		}
		if e.Sealed != nil {
			row.Verdict, row.Why = mark{"none", k.say("office.seal.short")}, k.say("office.seal.why", "reason", e.Sealed.Reason, "by", s.personName(v, e.Sealed.By), "day", k.day(forms.DayOf(e.Sealed.At)))
		}
		for _, code := range codes {
			row.Cells = append(row.Cells, cells[i][code])
		}
		view.Entries = append(view.Entries, row)
	}
}

// ownCells adds what entries say to the checks of the organisation's own, by the name their form gave each, since forms may
// use one code for two checks; it gives the names in order.
func (s *Server) ownCells(entries []store.Entry, cells []map[string]string) (names []string) {
	for i, e := range entries {
		for _, code := range sortedKeys(e.OwnNames) {
			text, name := s.tableCell(e, code), e.OwnNames[code]
			if text == "" {
				continue
			}
			if cells[i][name] = text; !slices.Contains(names, name) {
				names = append(names, name)
			}
		}
	}
	slices.Sort(names)
	return names[:min(len(names), tableOwn)]
}

// tableCell writes one reading of an entry for the table; a trip time stands with the current it was measured at. Of a
// series the worst finding's reading stands for all.
func (s *Server) tableCell(e store.Entry, code string) string {
	k := s.ink()
	r, ok := e.Body.Readings[code]
	if !ok {
		if at := worstOfSeries(e, code); at >= 0 {
			text := k.value(code, e.Body.Series[at].Readings[code])
			if multiple, ok := e.Body.Series[at].At["multiple"]; ok {
				text = k.say("office.device.at_multiple", "value", text, "n", fmt.Sprint(multiple))
			}
			return text
		}
		return ""
	}
	if r.Missing != "" {
		return ""
	}
	text := k.value(code, r)
	if current, ok := e.Body.Readings["test_current_ma"]; ok && code == "trip_time_ms" && current.Missing == "" {
		text = k.say("office.device.at_current", "time", text, "current", k.value("test_current_ma", current))
	}
	return text
}

// worstOfSeries finds the series reading that stands for all in a table: the one with the worst finding; of equal ones
// that at the rated current, and of those the longest. −1 where there is none.
func worstOfSeries(e store.Entry, code string) int {
	found, worst := -1, math.Inf(-1)
	for i, one := range e.Body.Series {
		r, ok := one.Readings[code]
		if !ok || r.Missing != "" {
			continue
		}
		bad := 0.0
		for _, f := range e.Verdict.Findings {
			if f.Reading == code && sameConditions(f.At, one.At) {
				bad = max(bad, 1000*float64(severity(f.Verdict)))
			}
		}
		if v, ok := r.Value.(float64); ok && fmt.Sprint(one.At["multiple"]) == "1" {
			bad += 1 + v/(1+math.Abs(v))
		}
		if bad > worst {
			found, worst = i, bad
		}
	}
	return found
}

// whyNot gives the reason an entry has no test: the first reading that says why it is missing.
func whyNot(k ink, body forms.Entry) string {
	for _, code := range sortedKeys(body.Readings) {
		if why := body.Readings[code].Missing; why != "" {
			return k.named("missing", why)
		}
	}
	return ""
}

// testedBy names who tested: who read the figures where somebody else typed them.
func (s *Server) testedBy(v *store.View, e store.Entry) string {
	if e.ReadBy != "" {
		return s.personName(v, e.ReadBy)
	}
	if e.Imported {
		return s.words.Say("office.device.imported")
	}
	return s.personName(v, e.By)
}

func instrumentNames(v *store.View) (map[string]string, error) {
	all, err := v.Instruments()
	names := map[string]string{}
	for _, i := range all {
		names[i.ID] = i.Name
	}
	return names, err
}

// factOrder are the register fields a device page shows, in this order; fields of newer programs follow by name.
var factOrder = []string{"make", "model", "serial", "rating_a", "nominal_v", "rated_residual_ma", "delayed", "waveform", "equipment_ground", "faces", "installed", "gauge", "length_m",
	"locking", "quiet_ground", "new_construction", "no_neutral", "supply_edition", "double_insulated", "earthing", "distribution", "special_location", "limit_set", "note"}

// fieldUnits are the units of register fields that are figures.
var fieldUnits = map[string]string{"rating_a": "A", "nominal_v": "V", "rated_residual_ma": "mA", "length_m": "m", "breaker_a": "A"}

func (s *Server) deviceFacts(d store.Device) []fact {
	k := s.ink()
	out := []fact{{Name: k.say("office.device.field.kind"), Value: k.named("kind", d.Kind)}}
	if line := circuit(d.DeviceRow); line != "" {
		out = append(out, fact{Name: k.say("office.device.panel_circuit"), Value: line})
	}
	add := func(field, value string) {
		name := field
		if key := "office.device.field." + field; k.words.Has(key) {
			name = k.say(key)
		}
		if value != "" {
			out = append(out, fact{Name: name, Value: value})
		}
	}
	for _, field := range factOrder {
		add(field, s.fieldText(field, d.Fields[field]))
	}
	add("critical_load", d.Place.CriticalLoad)
	add("whom_to_tell", d.Place.WhomToTell)
	add("test_from", d.Place.TestFrom)
	add("test_until", d.Place.TestUntil)
	for _, field := range sortedKeys(d.Fields) {
		if !slices.Contains(factOrder, field) && !slices.Contains([]string{"kind", "place", "circuit", "formerly", "where", "at_site"}, field) {
			add(field, s.fieldText(field, d.Fields[field]))
		}
	}
	return out
}

// fieldText writes a register field's value.
func (s *Server) fieldText(field string, value any) string {
	k := s.ink()
	switch v := value.(type) {
	case nil:
		return ""
	case bool:
		return k.say(map[bool]string{true: "office.yes", false: "office.no"}[v])
	case float64:
		return k.amount(number(v), fieldUnits[field])
	case string:
		switch field {
		case "installed":
			if day, err := forms.ParseDay(v); err == nil {
				return k.day(day)
			}
		case "equipment_ground":
			return k.say(map[string]string{"yes": "office.device.ground_yes", "none-permitted": "office.device.ground_none"}[v])
		case "limit_set":
			return k.named("limit_set", v)
		case "earthing", "supply_edition":
			t, _ := forms.TraitNamed(field)
			return s.traitText(t, v)
		case "waveform":
			return k.answer("waveform", v)
		}
		return v
	case []any:
		var parts []string
		for _, one := range v {
			parts = append(parts, s.fieldText(field, one))
		}
		return strings.Join(parts, ", ")
	}
	return ""
}
