package register

import (
	"fmt"
	"maps"
	"slices"
	"strings"

	"tripwell/export/intake"
	"tripwell/forms"
	"tripwell/store"
)

// Plan is what an import will append, before it does.
type Plan struct {
	Rows      []RowDrafts
	Problems  []Problem
	NeedTag   []TagWant // fixed devices and portable items in the file that will have no tag
	Added     int
	Changed   int
	Unchanged int
	NewSites  []NewSite
	States    map[RowAt]string // of each row that is taken: new | changed | unchanged
}

// RowAt names a row of a file.
type RowAt struct {
	Sheet string
	Row   int
}

// NewSite is a site an import registers. Without a zone none of its rows is taken.
type NewSite struct {
	Code string `json:"code"`
	Name string `json:"name"`
	Zone string `json:"zone"`
	Rows int    `json:"rows"`
}

// RowDrafts are the records of one row; they are appended together.
type RowDrafts struct {
	Line   int
	Drafts []store.Draft
}

// TagWant is a place or portable item without a tag.
type TagWant struct{ Log, Subject string }

// Drafts turns rows into records: what is new is registered under ids made from its key, what differs becomes
// field changes, what is the same becomes nothing. It reads the view and writes nothing.
func Drafts(v *store.View, by string, rows []Row, ask Ask) (Plan, error) {
	k, err := readKnown(v, rows, ask)
	if err != nil {
		return Plan{}, err
	}
	return planRows(k, by, rows, ask), nil
}

type planner struct {
	*known
	by    string
	ask   Ask
	plan  Plan
	lines map[string]Row // row a key was first seen on
	order map[string]int // walking order given so far, by room
	first map[string]Row
	made  map[string]bool // codes of sites this import registers

	fed   []fedRow
	stand map[string][]standing // devices by site, of the store and of the file
	tagAt map[string]string     // device by site and tag

	circuitSaid map[string]map[string]saidAt // what rows so far said of a circuit, by field
	out         []store.Draft
}

func planRows(k *known, by string, rows []Row, ask Ask) Plan {
	p := &planner{known: k, by: by, ask: ask, plan: Plan{States: map[RowAt]string{}}, lines: map[string]Row{}, order: map[string]int{}, first: siteFacts(rows), made: map[string]bool{}, circuitSaid: map[string]map[string]saidAt{}, stand: map[string][]standing{}, tagAt: map[string]string{}}
	p.noteKnown()
	for _, row := range rows {
		p.row(row)
	}
	p.wire()
	return p.plan
}

// siteFacts gathers what any row of a site says of the site: sheets often fill it in once.
func siteFacts(rows []Row) map[string]Row {
	facts := map[string]Row{}
	for _, r := range rows {
		f := facts[r.Site]
		for _, part := range []struct{ into, from *string }{
			{&f.SiteName, &r.SiteName}, {&f.Zone, &r.Zone}, {&f.Standard, &r.Standard}, {&f.Address, &r.Address},
		} {
			if *part.into == "" {
				*part.into = *part.from
			}
		}
		facts[r.Site] = f
	}
	return facts
}

func (p *planner) row(row Row) {
	p.out = nil
	wrong := func(column, value, text string) {
		p.plan.Problems = append(p.plan.Problems, Problem{intake.Problem{Sheet: row.Sheet, Row: row.Line, Column: column, Value: cut(value), Text: text}, true})
	}
	site, isNew, text := p.site(row)
	if text != "" {
		column := "zone"
		if p.ask.NoNewSites {
			column = "site"
		}
		wrong(column, "", text)
		return
	}
	key := site.ID + "\x1f" + row.key()
	if first, twice := p.lines[key]; twice {
		where := fmt.Sprintf("Row %d", first.Line)
		if first.Sheet != row.Sheet {
			where += " of sheet " + first.Sheet
		}
		wrong("place", fieldText(row.Place, "name"), where+" already names a device at this place. Give each its own place, or its own circuit at a panel.")
		return
	}
	d := p.device(site, key, &row)
	if d.gone {
		wrong("place", fieldText(row.Place, "name"), "The device of this row was retired. Register its successor on the device's page.")
		return
	}
	if holder := p.tags[row.Tag]; row.Tag != "" && holder != "" && holder != d.tagged {
		wrong("tag", row.Tag, "This tag is bound to another place already. Correct it, or leave it empty.")
		return
	}
	p.lines[key] = row
	if isNew {
		p.sites[row.Site] = site
	}
	p.usual(site, &row)
	p.whereNow(site, d, &row)
	p.feeds(site, d, &row)
	if d.was == nil {
		p.note(site.ID, d.id, row.Tag, fieldText(row.Place, "building"), fieldText(row.Place, "floor"), fieldText(row.Place, "room"), fieldText(row.Place, "name"))
	}
	p.place(site, d, &row)
	p.circuit(site, d, &row)
	p.register(site, d, &row)
	p.tag(site, d, &row)
	p.count(d, row)
}

func (p *planner) count(d *rowDevice, row Row) {
	state := "unchanged"
	switch {
	case d.was == nil:
		p.plan.Added++
		state = "new"
	case len(p.out) > 0:
		p.plan.Changed++
		state = "changed"
	default:
		p.plan.Unchanged++
	}
	p.plan.States[RowAt{row.Sheet, row.Line}] = state
	if len(p.out) > 0 {
		p.plan.Rows = append(p.plan.Rows, RowDrafts{Line: row.Line, Drafts: p.out})
	}
}

// newSite counts a row of a site that is not there yet.
func (p *planner) newSite(s store.Site) {
	for i := range p.plan.NewSites {
		if p.plan.NewSites[i].Code == s.Code {
			p.plan.NewSites[i].Rows++
			return
		}
	}
	p.plan.NewSites = append(p.plan.NewSites, NewSite{s.Code, s.Name, s.Zone, 1})
}

// site finds the site of a row or drafts its registration.
func (p *planner) site(row Row) (site store.Site, isNew bool, text string) {
	if s, ok := p.sites[row.Site]; ok {
		if p.made[row.Site] {
			p.newSite(s)
		}
		return s, false, ""
	}
	if p.ask.NoNewSites {
		return site, false, fmt.Sprintf("%s is not one of your sites. Ask a manager of all sites to register it, or correct the code.", row.Site)
	}
	f := p.first[row.Site]
	if f.Zone == "" {
		f.Zone = p.ask.Zone
	}
	if f.Standard == "" {
		f.Standard = p.ask.Standard
	}
	if f.Zone == "" {
		p.newSite(store.Site{Code: row.Site, Name: f.SiteName})
		return site, false, fmt.Sprintf("The site %s is new, and its time zone is not stated in any of its rows. Fill in zone, such as America/Chicago.", row.Site)
	}
	p.made[row.Site] = true
	site = store.Site{ID: p.importID("site", row.Site), Code: row.Site, Name: f.SiteName, Zone: f.Zone, Standard: f.Standard, Address: f.Address}
	if site.Name == "" {
		site.Name = row.Site
	}
	set := map[string]any{"code": site.Code, "name": site.Name, "zone": site.Zone}
	for name, v := range map[string]string{"standard": site.Standard, "address": site.Address} {
		if v != "" {
			set[name] = v
		}
	}
	p.newSite(site)
	p.add(site.ID, "site.registered", site.ID, site.ID, set)
	return site, true, ""
}

// rowDevice is the device of a row: as it is known, or as it will be.
type rowDevice struct {
	id, place string
	was       *store.Device // nil: new
	tagged    string        // subject that carries the tag
	gone      bool
}

func (p *planner) device(site store.Site, key string, row *Row) *rowDevice {
	kind := fieldText(row.Device, "kind")
	d := &rowDevice{id: p.importID("device", row.Site, row.key()), was: p.devices[key]}
	if d.was == nil {
		d.was = p.byID[d.id]
	}
	if d.was == nil && p.retired[d.id] {
		d.gone = true
	}
	if d.was != nil {
		d.id, d.place = d.was.ID, d.was.Place.ID
	}
	if !forms.IsPortable(kind) && d.place == "" {
		d.place = p.importID("place", row.Site, row.key())
	}
	d.tagged = d.place
	if forms.IsPortable(kind) {
		d.tagged = d.id
	}
	return d
}

// place drafts the place of a fixed device; a portable item only notes where it is.
func (p *planner) place(site store.Site, d *rowDevice, row *Row) {
	if d.place == "" {
		if kept := row.kept(); kept != "" {
			row.Device["where"] = kept
		}
		return
	}
	if d.was != nil && d.was.Place.ID != "" {
		w := d.was.Place
		have := map[string]any{"building": w.Building, "floor": w.Floor, "room": w.Room, "name": w.Name, "order": w.Order, "critical_load": w.CriticalLoad, "whom_to_tell": w.WhomToTell, "test_from": w.TestFrom, "test_until": w.TestUntil, "usual": w.Usual}
		p.change("place.set", site.ID, d.place, row.Place, have)
		return
	}
	if row.Place["name"] == nil && isAtPanel(fieldText(row.Device, "kind")) {
		row.Place["name"] = strings.Trim(row.Panel+" / "+row.CircuitNo, " /")
	}
	if row.Place["order"] == nil {
		room := strings.ToLower(strings.Join([]string{site.ID, fieldText(row.Place, "building"), fieldText(row.Place, "floor"), fieldText(row.Place, "room")}, "\x1f"))
		p.order[room]++
		row.Place["order"] = float64(p.order[room])
	}
	p.add(d.place, "place.registered", site.ID, d.place, row.Place)
}

// circuit drafts panel and circuit where they are new or their fields differ.
func (p *planner) circuit(site store.Site, d *rowDevice, row *Row) {
	if row.Panel == "" {
		return
	}
	panelKey := circuitKey(site.ID, row.Panel, "")
	panel, ok := p.panels[panelKey]
	if !ok {
		panel = p.importID("panel", row.Site, strings.ToLower(row.Panel))
		p.panels[panelKey] = panel
		p.add(p.importID("panel.set", row.Site, strings.ToLower(row.Panel)), "panel.set", site.ID, panel, map[string]any{"name": row.Panel})
	}
	if row.CircuitNo == "" {
		return
	}
	key := circuitKey(site.ID, row.Panel, row.CircuitNo)
	c, ok := p.circuits[key]
	p.agree(key, row)
	if ok {
		p.change("circuit.set", site.ID, c.id, row.Circuit, c.fields)
	} else {
		c = knownCircuit{p.importID("circuit", row.Site, strings.ToLower(row.Panel), strings.ToLower(row.CircuitNo)), map[string]any{"panel": panel, "numbers": row.CircuitNo}}
		maps.Copy(c.fields, row.Circuit)
		p.circuits[key] = c
		p.add(p.importID("circuit.set", row.Site, strings.ToLower(row.Panel), strings.ToLower(row.CircuitNo)), "circuit.set", site.ID, c.id, maps.Clone(c.fields))
	}
	row.Device["circuit"] = c.id
}

// agree takes out of a row what an earlier row of the file says otherwise of the same circuit, and names it: taking both
// in turn would change the circuit with every import.
func (p *planner) agree(circuit string, row *Row) {
	said := p.circuitSaid[circuit]
	if said == nil {
		said = map[string]saidAt{}
		p.circuitSaid[circuit] = said
	}
	for _, name := range slices.Sorted(maps.Keys(row.Circuit)) {
		v := row.Circuit[name]
		first, ok := said[name]
		switch {
		case !ok:
			said[name] = saidAt{v, row.Line}
		case !sameValue(first.value, v):
			p.plan.Problems = append(p.plan.Problems, Problem{intake.Problem{Sheet: row.Sheet, Row: row.Line, Column: name, Value: fmt.Sprint(v),
				Text: fmt.Sprintf("Row %d says %v for the same circuit, which was kept. Look which is right.", first.line, first.value)}, false})
			delete(row.Circuit, name)
		}
	}
}

// saidAt is what a row said of a circuit.
type saidAt struct {
	value any
	line  int
}

// register drafts the device itself.
func (p *planner) register(site store.Site, d *rowDevice, row *Row) {
	if d.was != nil {
		p.change("device.set", site.ID, d.id, row.Device, d.was.Fields)
		return
	}
	if d.place != "" {
		row.Device["place"] = d.place
	}
	p.add(d.id, "device.registered", site.ID, d.id, row.Device)
}

// tag binds the tag of a row, or notes that there is none.
func (p *planner) tag(site store.Site, d *rowDevice, row *Row) {
	has := ""
	if d.was != nil {
		has = d.was.Tag
	}
	switch {
	case row.Tag == "" && has == "":
		p.plan.NeedTag = append(p.plan.NeedTag, TagWant{site.ID, d.tagged})
	case row.Tag != "" && row.Tag != has:
		if has != "" {
			p.draft("", "tag.freed", site.ID, d.tagged, map[string]any{"tag": has})
		}
		id := p.importID("tag.bound", row.Site, row.key(), row.Tag)
		if d.was != nil {
			id = "" // bound a second time, perhaps back to an earlier tag: a record of its own
		}
		p.draft(id, "tag.bound", site.ID, d.tagged, map[string]any{"tag": row.Tag})
		p.tags[row.Tag] = d.tagged
	}
}

// change drafts the wanted fields that differ.
func (p *planner) change(kind, log, subject string, want, have map[string]any) {
	set := map[string]any{}
	for name, v := range want {
		if !sameValue(v, have[name]) {
			set[name] = v
			have[name] = v
		}
	}
	if len(set) > 0 {
		p.add("", kind, log, subject, set)
	}
}

func (p *planner) add(id, kind, log, subject string, set map[string]any) {
	p.draft(id, kind, log, subject, map[string]any{"set": set})
}

func (p *planner) draft(id, kind, log, subject string, body map[string]any) {
	p.out = append(p.out, store.Draft{ID: id, Kind: kind, Log: log, Subject: subject, By: p.by, Body: body})
}
