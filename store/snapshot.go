package store

import (
	"encoding/json"
	"strings"
	"time"

	"tripwell/forms"
	"tripwell/store/record"
)

// Snapshot is what a phone takes along of one site, read in one transaction with the cursor that continues it.
type Snapshot struct {
	Site        SnapshotSite      `json:"site"`
	Cursor      string            `json:"cursor"`
	OrgCursor   string            `json:"org_cursor"` // the same of the organisation's log: its rules are in here as well
	Clock       string            `json:"clock"`      // the largest stamp seen here, 16 hexadecimal digits; what a phone writes next is later
	AsOf        time.Time         `json:"as_of"`
	Today       forms.Day         `json:"today"`
	Places      []SnapshotPlace   `json:"places"`  // walking order
	Devices     []SnapshotDevice  `json:"devices"` // walking order; without those retired
	Forms       []*forms.Form     `json:"forms"`
	LimitSets   []*forms.LimitSet `json:"limit_sets"` // revision in force today of each; the site's own before the organisation's
	Instruments []Instrument      `json:"instruments"`
	Rounds      []SnapshotRound   `json:"rounds,omitempty"` // made in the office, neither accepted nor called off
	Marks       []SnapshotMark    `json:"marks,omitempty"`  // put on what was tested
}

// SnapshotSite is the site itself.
type SnapshotSite struct {
	ID       string `json:"id"`
	Code     string `json:"code"`
	Name     string `json:"name"`
	Zone     string `json:"zone"`
	Standard string `json:"standard"`
}

// SnapshotPlace is where fixed devices sit.
type SnapshotPlace struct {
	ID           string `json:"id"`
	Building     string `json:"building,omitempty"`
	Floor        string `json:"floor,omitempty"`
	Room         string `json:"room,omitempty"`
	Name         string `json:"name"`
	CriticalLoad string `json:"critical_load,omitempty"`
	WhomToTell   string `json:"whom_to_tell,omitempty"`
	TestFrom     string `json:"test_from,omitempty"`
	TestUntil    string `json:"test_until,omitempty"`
	Seen         string `json:"seen,omitempty"` // largest stamp of what is said of it
}

// SnapshotDevice is a device with what a phone needs to ask, judge and show. Fields holds the merged register fields as
// they were written (json.RawMessage).
type SnapshotDevice struct {
	ID      string         `json:"id"`
	Kind    string         `json:"kind"`
	Place   string         `json:"place,omitempty"`
	Tag     string         `json:"tag,omitempty"`
	Panel   string         `json:"panel,omitempty"`
	Circuit string         `json:"circuit,omitempty"`
	Supply  string         `json:"supply,omitempty"`
	Fields  map[string]any `json:"fields"`
	// LimitSet stands for the device's kind here, where that is not what the program ships for it.
	LimitSet string `json:"limit_set,omitempty"`
	Seen     string `json:"seen,omitempty"` // largest stamp of what is said of it, for the seen of a change
	// Last by task: newest test, with its numbers for the dashed mark on the scale.
	Last map[string]SnapshotLast `json:"last,omitempty"`
	Due  []SnapshotDue           `json:"due,omitempty"`
	// Defects are those that are open.
	Defects []SnapshotDefect `json:"defects,omitempty"`
}

// SnapshotDefect is an open defect as a phone shows it. Safe says how it was made safe.
type SnapshotDefect struct {
	ID       string    `json:"id"`
	Cause    string    `json:"cause"`
	Severity string    `json:"severity"`
	State    string    `json:"state"`
	Opened   int64     `json:"opened"` // ms since 1970
	Text     string    `json:"text,omitempty"`
	Safe     string    `json:"safe,omitempty"`
	Repaired bool      `json:"repaired,omitempty"`
	Due      forms.Day `json:"due"` // "" where no day is set
	Parts    []string  `json:"parts,omitempty"`
}

// SnapshotLast is the newest test of a task. Readings holds its measured values in their codes' own units.
type SnapshotLast struct {
	Entry    string             `json:"entry"`
	Day      forms.Day          `json:"day"`
	Result   string             `json:"result"`
	Readings map[string]float64 `json:"readings,omitempty"`
}

// SnapshotDue is one date.
type SnapshotDue struct {
	Task  string    `json:"task"`
	Due   forms.Day `json:"due"`
	Last  forms.Day `json:"last,omitempty"`
	State string    `json:"state"`
}

// Snapshot reads what a phone takes along of a site; states are those of the day on.
func (v *View) Snapshot(site string, on forms.Day) (Snapshot, error) {
	sv, err := v.siteNamed(site)
	if err != nil {
		return Snapshot{}, err
	}
	s := Snapshot{
		Site: SnapshotSite{sv.ID, sv.Code, sv.Name, sv.Zone, sv.Standard},
		AsOf: v.s.Now(), Today: on, Places: []SnapshotPlace{}, Devices: []SnapshotDevice{},
	}
	if s.Cursor, err = v.Cursor(sv.ID); err != nil {
		return s, err
	}
	if s.OrgCursor, err = v.Cursor(record.Org); err != nil {
		return s, err
	}
	s.Clock = record.ClockText(readKey64(v.tx.Bucket(bktMeta).Get(metaClock)))
	places, err := v.Places(sv.ID)
	if err != nil {
		return s, err
	}
	for _, p := range places {
		s.Places = append(s.Places, SnapshotPlace{p.ID, p.Building, p.Floor, p.Room, p.Name, p.CriticalLoad, p.WhomToTell, p.TestFrom, p.TestUntil, seenText(p.seen)})
	}
	if s.Devices, err = v.snapshotDevices(sv, on); err != nil {
		return s, err
	}
	if s.Forms, err = v.formsOn(on); err != nil {
		return s, err
	}
	s.LimitSets = v.limitSetsOn(sv, on)
	if s.Rounds, err = v.snapshotRounds(sv); err != nil {
		return s, err
	}
	if s.Marks, err = v.snapshotMarks(sv.ID, on); err != nil {
		return s, err
	}
	all, err := v.Instruments()
	if err != nil {
		return s, err
	}
	s.Instruments = make([]Instrument, 0, len(all))
	for _, i := range all {
		if !i.Retired {
			s.Instruments = append(s.Instruments, i)
		}
	}
	return s, nil
}

func (v *View) snapshotDevices(sv *siteView, on forms.Day) ([]SnapshotDevice, error) {
	if err := v.loadSite(sv); err != nil {
		return nil, err
	}
	type placed struct {
		SnapshotDevice
		at Place
	}
	var list []placed
	open, err := v.openDefects(sv)
	if err != nil {
		return nil, err
	}
	err = v.eachDevice(sv, func(n uint32, t *thing, w *work) error {
		if t.value("#retired") != nil {
			return nil
		}
		d, at, err := v.snapshotDevice(sv, t, w, on)
		d.Defects = open[n]
		list = append(list, placed{d, at})
		return err
	})
	if err != nil {
		return nil, err
	}
	sortWalking(list, func(p placed) (Place, string) { return p.at, p.ID })
	out := make([]SnapshotDevice, len(list))
	for i := range list {
		out[i] = list[i].SnapshotDevice
	}
	return out, nil
}

func (v *View) snapshotDevice(sv *siteView, t *thing, w *work, on forms.Day) (SnapshotDevice, Place, error) {
	d := SnapshotDevice{ID: t.id.String(), Kind: t.text("kind"), Fields: make(map[string]any, len(t.fields)), Seen: seenText(t.seen())}
	for i := range t.fields {
		if f := &t.fields[i]; !strings.HasPrefix(f.name, "#") && present(f.value) != nil {
			d.Fields[f.name] = json.RawMessage(append([]byte(nil), f.value...))
		}
	}
	if named := parseID(t.text("fed_by")); named != (id16{}) {
		source, err := v.standsFor(sv, named)
		if err != nil {
			return d, Place{}, err
		}
		d.Fields["fed_by"] = quoted(source.String()) // the device named may have been replaced since
	}
	if name, why := v.rules().setOfKind(sv.ord, v.orgLog(), d.Kind, string(t.value("delayed")) == "true", on); why != ByShipped {
		d.LimitSet = name
	}
	placeID, err := v.placeIDOf(sv, t)
	if err != nil {
		return d, Place{}, err
	}
	var at Place
	p, err := v.place(sv, placeID)
	if err != nil {
		return d, at, err
	}
	if p != nil {
		at, d.Place = *p, p.ID
	}
	if d.Tag, err = v.deviceTag(sv, t.id, placeID); err != nil {
		return d, at, err
	}
	c, err := v.circuit(sv, parseID(t.text("circuit")))
	if err != nil {
		return d, at, err
	}
	d.Panel, d.Circuit, d.Supply = c.panel, c.numbers, c.supply
	if w == nil {
		return d, at, nil
	}
	for _, s := range w.tasks {
		if s.last.result == 0 || !v.scope.Shows(s.last.day) {
			continue
		}
		last := SnapshotLast{Entry: s.last.id.String(), Day: s.last.day, Result: resultCodes[s.last.result]}
		if len(s.numbers) > 0 {
			last.Readings = make(map[string]float64, len(s.numbers))
		}
		for _, f := range s.numbers {
			last.Readings[f.code] = f.value
		}
		if d.Last == nil {
			d.Last = make(map[string]SnapshotLast, len(w.tasks))
		}
		d.Last[s.task] = last
	}
	d.Due = make([]SnapshotDue, 0, len(w.dates))
	for _, date := range w.dates {
		d.Due = append(d.Due, SnapshotDue{date.Task, date.Due, date.Last, date.State(on)})
	}
	return d, at, nil
}

// formsOn gives the revision of each form in force on a day.
func (v *View) formsOn(on forms.Day) ([]*forms.Form, error) {
	all, err := v.Forms()
	if err != nil {
		return nil, err
	}
	out := make([]*forms.Form, 0, len(all))
	for _, f := range all {
		out = append(out, v.rules().form(v.orgLog(), f.ID, 0, on))
	}
	return out, nil
}

// limitSetsOn gives the revision of each limit set in force at a site on a day, by id.
func (v *View) limitSetsOn(sv *siteView, on forms.Day) []*forms.LimitSet {
	out := []*forms.LimitSet{}
	ids := map[string]bool{}
	for _, log := range []uint32{v.orgLog(), sv.ord} {
		if log == 0 {
			continue
		}
		for _, set := range rulesUnder[forms.LimitSet](v.rules(), rulePrefix(ruleLimit, log, "")) {
			if ids[set.ID] {
				continue
			}
			ids[set.ID] = true
			if in := v.rules().limitSet(sv.ord, v.orgLog(), set.ID, on); in != nil {
				out = append(out, in)
			}
		}
	}
	return out
}

// seenText writes a stamp, "" where nothing was said.
func seenText(clock uint64) string {
	if clock == 0 {
		return ""
	}
	return record.ClockText(clock)
}

// openDefects gives the open defects of a site by the number of their device.
func (v *View) openDefects(sv *siteView) (map[uint32][]SnapshotDefect, error) {
	out := map[uint32][]SnapshotDefect{}
	err := v.scan(bktOpen, put32(nil, sv.ord), func(_, row []byte) error {
		n := read32(row)
		if _, met := out[n]; met {
			return nil
		}
		fl, err := unpackDefects(v.tx.Bucket(bktDefect).Get(workKey(sv.ord, n)))
		if err != nil {
			return err
		}
		for _, d := range fl.Defects {
			if d.Closed != nil {
				continue
			}
			one := SnapshotDefect{ID: d.ID, Cause: d.Cause, Severity: d.Severity, State: d.State, Opened: d.Opened, Text: d.Text, Repaired: d.Repaired != nil, Due: d.Due, Parts: d.Parts}
			if d.Safe != nil {
				one.Safe = d.Safe.Text
			}
			out[n] = append(out[n], one)
		}
		return nil
	})
	return out, err
}
