package results

import (
	"fmt"
	"maps"
	"slices"
	"strconv"
	"strings"
	"sync"
	"time"

	"tripwell/export/intake"
	"tripwell/export/paper"
	"tripwell/forms"
)

// What a column that is no reading says, beside those of a round's worksheet (paper.AboutTag and so on).
const (
	aboutSkip     = "skip"
	aboutSheet    = "sheet" // in a file of left-out rows: the worksheet a row came from
	aboutTitle    = "title_above"
	aboutSite     = "site"
	aboutBuilding = "building"
	aboutFloor    = "floor"
	aboutRoom     = "room"
	aboutPanel    = "panel"
	aboutTime     = "time" // of day
	aboutTypedBy  = "typed_by"
	aboutResult   = "result" // what the list says came out
	aboutAllWell  = "all_in_order"
	aboutLast     = "last" // the day a task was last done
	aboutMonth    = "month"
)

// column is what a column of a file holds.
type column struct {
	about   string
	reading string
	unit    string         // unit of its figures, as the reading's code or the heading states it
	at      map[string]any // condition of a series reading
	task    string         // of last
	year    int            // of month; 0: not stated
	month   time.Month
	options map[string]string // words for answers, lower case
}

// name is the column as mappings and reports write it; ParseColumn reads it.
func (c column) name() string {
	switch {
	case c.about == aboutMonth && c.year != 0:
		return fmt.Sprintf("month %04d-%02d", c.year, int(c.month))
	case c.about == aboutMonth:
		return fmt.Sprintf("month %02d", int(c.month))
	case c.about == aboutLast && c.task != "":
		return "last " + c.task
	case c.about != "":
		return c.about
	}
	name := c.reading
	if known, _ := forms.CodeOf(c.reading); c.unit != known.Unit {
		name += " in " + c.unit
	}
	for i, key := range slices.Sorted(maps.Keys(c.at)) {
		name += [2]string{" at ", " "}[min(i, 1)] + key + "=" + fmt.Sprint(c.at[key])
	}
	return name
}

// ColumnNames lists what a column may be said to be, for people who mend a mapping.
func ColumnNames() []string {
	names := slices.Clone(abouts)
	for _, task := range forms.Tasks() {
		names = append(names, "last "+task)
	}
	for _, code := range forms.Codes() {
		names = append(names, code.Code)
	}
	return names
}

var abouts = []string{aboutSkip, paper.AboutTag, aboutSite, aboutBuilding, aboutFloor, aboutRoom, paper.AboutPlace, paper.AboutKind, aboutPanel,
	paper.AboutCircuit, paper.AboutTask, paper.AboutDay, aboutTime, paper.AboutReadBy, aboutTypedBy, paper.AboutInstrument, aboutResult,
	paper.AboutNotTested, aboutAllWell, paper.AboutNote, paper.AboutRound, aboutSheet, aboutTitle, aboutLast}

// ParseColumn reads what a column is said to be: tag, day, "trip_time_ms", "trip_time_ms in s",
// "trip_time_ms in s at multiple=5 phase_deg=180", "last button", "month 2026-03", skip.
func ParseColumn(name string) (column, error) {
	if name == "" {
		return column{about: aboutSkip}, nil
	}
	bad := wrong("columns", fmt.Sprintf("%q is no column. Use one of: %s; a reading may state its unit, as in \"trip_time_ms in s\".", name, strings.Join(ColumnNames(), ", ")))
	words := strings.Fields(name)
	if len(words) == 0 {
		return column{}, bad
	}
	switch first := words[0]; {
	case first == aboutMonth && len(words) == 2:
		if t, err := time.Parse("2006-01", words[1]); err == nil {
			return column{about: aboutMonth, year: t.Year(), month: t.Month()}, nil
		}
		if n, err := strconv.Atoi(words[1]); err == nil && n >= 1 && n <= 12 {
			return column{about: aboutMonth, month: time.Month(n)}, nil
		}
		return column{}, bad
	case first == aboutLast && len(words) == 2 && isTask(words[1]):
		return column{about: aboutLast, task: words[1]}, nil
	case slices.Contains(abouts, first) && len(words) == 1:
		return aboutColumn(first), nil
	}
	c, ok := readingColumn(words[0])
	if !ok {
		return column{}, bad
	}
	rest := words[1:]
	if len(rest) >= 2 && rest[0] == "in" {
		unit, ok := fitting(rest[1], c.reading)
		if !ok {
			return column{}, bad
		}
		c.unit, rest = unit, rest[2:]
	}
	if len(rest) == 0 {
		return c, nil
	}
	c.at = map[string]any{}
	for i, word := range rest {
		key, value, ok := strings.Cut(word, "=")
		switch {
		case i == 0 && word == "at" && len(rest) > 1:
		case i > 0 && ok:
			c.at[key] = value
			if f, err := strconv.ParseFloat(value, 64); err == nil {
				c.at[key] = f
			}
		default:
			return column{}, bad
		}
	}
	return c, nil
}

// aboutColumn gives a column that is no reading, with the words people answer in.
func aboutColumn(about string) column {
	c := column{about: about}
	for _, known := range printed() {
		if known.about == about {
			c.options = known.options
		}
	}
	return c
}

func readingColumn(code string) (column, bool) {
	known, ok := forms.CodeOf(code)
	if !ok {
		return column{}, false
	}
	c := column{reading: code, unit: known.Unit, options: map[string]string{}}
	for _, p := range printed() {
		if p.reading == code {
			maps.Copy(c.options, p.options)
		}
	}
	return c, true
}

// fitting finds a unit in any spelling and whether a reading can be stated in it.
func fitting(unit, code string) (string, bool) {
	known, _ := forms.CodeOf(code)
	name, ok := intake.UnitNamed(unit)
	if !ok || known.Unit == "" {
		return "", false
	}
	_, ok = intake.Quantity{Value: 1, Unit: name}.In(known.Unit)
	return name, ok
}

// printed are the columns of round sheets by their headings, as the words of the program print them.
var printed = sync.OnceValue(func() map[string]column {
	all := map[string]column{}
	headings, err := paper.Headings()
	if err != nil {
		panic(err) // the catalogue is embedded; its tests read it
	}
	for heading, c := range headings {
		col := column{about: c.About, reading: c.Reading, unit: c.Unit, at: c.At, options: c.Options}
		if c.Quick != nil {
			col.about = aboutAllWell
		}
		all[heading] = col
	}
	return all
})

// heading finds what a heading says: as the person mapped it, as a round sheet prints it, as a month, or by the words
// people use.
func (p *planner) heading(cell intake.Cell) (column, bool) {
	text := strings.TrimSpace(cell.Text)
	if c, ok := p.columns[intake.Label(text)]; ok {
		return c, true
	}
	plain := strings.ToLower(strings.Join(strings.Fields(text), " "))
	if c, ok := printed()[plain]; ok {
		return c, true
	}
	if c, ok := p.own[plain]; ok {
		return c, true
	}
	if cell.Date != nil {
		y, m, _ := cell.Date.Time().Date()
		return column{about: aboutMonth, year: y, month: m}, true
	}
	if y, m, ok := intake.ParseMonth(text); ok {
		return column{about: aboutMonth, year: y, month: m}, true
	}
	if c, ok := lastColumn(text); ok {
		return c, true
	}
	return spokenColumn(text)
}

// lastColumn reads headings such as "Last button test" and "Date last measured".
func lastColumn(text string) (column, bool) {
	words := strings.Split(intake.Label(text), "_")
	if !slices.Contains(words, "last") && !slices.Contains(words, "previous") {
		return column{}, false
	}
	c := column{about: aboutLast}
	for task, hints := range map[string][]string{
		forms.TaskButton:     {"button", "monthly", "push", "pushed", "press", "pressed"},
		forms.TaskInstrument: {"instrument", "annual", "yearly", "measured", "meter", "measurement", "trip"},
		forms.TaskReceptacle: {"receptacle", "outlet", "contact", "contacts", "retention"},
	} {
		if slices.ContainsFunc(words, func(w string) bool { return slices.Contains(hints, w) }) {
			c.task = task
		}
	}
	return c, true
}

// spokenColumn reads a heading by the words people use, with its unit behind it in any of the usual ways.
func spokenColumn(text string) (column, bool) {
	if about, ok := spokenAbouts[intake.Label(text)]; ok {
		return aboutColumn(about), true
	}
	base, unit := splitUnit(text)
	code, ok := spokenReadings[intake.Label(base)]
	if !ok {
		code, ok = intake.Label(text), true
		unit = ""
	}
	c, known := readingColumn(code)
	if !known {
		return column{}, false
	}
	if unit != "" {
		u, fits := fitting(unit, code)
		if !fits {
			return column{}, false
		}
		c.unit = u
	}
	return c, ok
}

// splitUnit parts "Trip time [s]", "Trip time (ms)", "Trip time, ms", "trip_time_s" and "Trip time in ms".
func splitUnit(text string) (base, unit string) {
	text = strings.TrimRight(strings.TrimSpace(text), ":")
	for _, brackets := range []string{"()", "[]"} {
		if open := strings.LastIndexByte(text, brackets[0]); open > 0 && strings.HasSuffix(text, brackets[1:]) {
			return text[:open], strings.TrimSpace(text[open+1 : len(text)-1])
		}
	}
	for _, between := range []string{" in ", ", ", "/", "_", " "} {
		if at := strings.LastIndex(text, between); at > 0 {
			if name, ok := intake.UnitNamed(text[at+len(between):]); ok {
				return text[:at], name
			}
		}
	}
	return text, ""
}

func spoken(lines map[string]string) map[string]string {
	m := map[string]string{}
	for meaning, words := range lines {
		for _, w := range strings.Split(words, ", ") {
			m[intake.Label(w)] = meaning
		}
	}
	return m
}

// Headings as people write them; common practice, no source.
var (
	spokenAbouts = spoken(map[string]string{
		paper.AboutTag: "tag, tag no, tag number, tag id, label, label code, qr, qr code", aboutSite: "site, site code, property, project",
		aboutBuilding: "building, bldg, block, wing", aboutFloor: "floor, level, storey, story", aboutRoom: "room, area, space, unit, apartment, suite",
		paper.AboutPlace: "place, location, spot, position, where, outlet, outlet location, device location, test point",
		paper.AboutKind:  "kind, device, device kind, device type, type", aboutPanel: "panel, panelboard, board, distribution board",
		paper.AboutCircuit: "circuit, ckt, circuit no, circuit number, breaker, breaker no, way",
		paper.AboutTask:    "task, test, test type, test kind", paper.AboutDay: "day, date, test date, test day, tested, tested on, date tested, date of test, done on",
		aboutTime: "time, time of day, clock, test time of day", paper.AboutReadBy: "read by, by, tester, tested by, initials, done by, crew, technician, person",
		aboutTypedBy: "typed by, entered by, keyed by", paper.AboutInstrument: "instrument, meter, instrument serial, meter serial, serial of instrument",
		aboutResult: "result, outcome, pass fail, ok, verdict, passed", paper.AboutNotTested: "reason, not tested, reason not tested, why not tested",
		paper.AboutRound: "round, round code, round no",
		paper.AboutNote:  "note, notes, remark, remarks, comment, comments", aboutSheet: "sheet, worksheet", aboutTitle: "title above", aboutSkip: "row, no, nr, #, left out because",
	})
	spokenReadings = spoken(map[string]string{
		"trip_time_ms":      "trip time, time, tripping time, time to trip, trip, disconnection time, t, t trip",
		"trip_current_ma":   "trip current, tripping current, trips at, ramp, ramp current, i trip, current to trip",
		"test_current_ma":   "test current, injected current, i test, current",
		"voltage_v":         "voltage, line voltage, supply voltage, volts, u, v, l-n voltage",
		"neutral_ground_v":  "n-g voltage, neutral to ground voltage, neutral ground voltage, n-pe voltage",
		"ground_ohm":        "ground resistance, ground path resistance, ground path, ground ohms, ground impedance, ground, r ground, r earth, r pe, earth continuity resistance, protective conductor resistance",
		"ground_continuous": "ground continuity, continuity, ground continuous",
		"load_a":            "load, load current", "voltage_drop_pct": "voltage drop, drop",
		"retention_g": "retention, ground-blade retention, blade retention, ground retention", "electrode_ohm": "electrode resistance, earth electrode resistance",
		"loop_ohm": "loop impedance, loop resistance, fault loop impedance, zs", "touch_voltage_v": "touch voltage, contact voltage",
		"insulation_test_v": "insulation test voltage", "insulation_mohm": "insulation resistance, insulation",
		"button_trips":           "button, test button, trips on test, button trips, test trips it, push button, button test",
		"load_dead_when_tripped": "power off, dead when tripped, load dead, power off while tripped", "button_resets": "reset, resets, reset ok, button resets, reset restores it",
		"wiring": "wiring, polarity, wiring check", "condition": "condition, looks", "found": "found, found as", "indicator": "indicator, light, indicator light",
		"restored": "restored, power restored, back on", "multiple": "multiple, multiple of rated, test multiple, times rated", "phase_deg": "phase, phase angle, start angle",
		"waveform": "waveform, wave", "holds_at_half": "holds at half, half rated, holds at half of rated", "loads_disconnected": "loads unplugged, loads disconnected",
		"marking_present": "marking, no-ground marking",
	})
)
