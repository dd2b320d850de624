package demo

import (
	"fmt"
	"sort"
	"strings"
	"time"

	"tripwell/forms"
	"tripwell/store"
	"tripwell/store/record"
)

// site is a site of the organisation with its devices in walking order.
type site struct {
	sitePlan
	id      string
	zone    *time.Location
	devices []*device
}

// device is what a crew finds at a spot: how it really is, which its readings then show with a little scatter.
type device struct {
	spot
	site                 *site
	id, place, tag       string
	make, model          string
	source               string // id of the device whose LOAD terminals feed it
	installed            forms.Day
	tripMA, driftMAPerYr float64 // rising current at which it trips on the first day, and how that drifts
	slowness             float64 // its trip time as a share of the limit at that current
	groundOhm            float64
	retentionG           float64
	last                 map[string]forms.Day // newest test by task that counts
	failed               bool                 // failed and not yet repaired
	yearlyBehind         bool                 // its yearly measurement is left out of the rounds
	generation           int
}

// instrument is a test instrument of the crews.
type instrument struct {
	id, name, serial string
	accuracy         map[string]forms.Accuracy
	ramp             *forms.Ramp
	due              forms.Day
	currentMA        float64 // what it injects for trip time, about
}

// setUp makes people, phones, instruments, register and what is known from before.
func (b *builder) setUp() error {
	for _, step := range []func() error{b.readRules, b.setPeople, b.setInstruments, b.setSites, b.setMarks, b.importHistory} {
		if err := step(); err != nil {
			return err
		}
	}
	return nil
}

// setPeople makes the people and their phones; the links to sign in are made when the demo starts.
func (b *builder) setPeople() error {
	at := b.clock.Now()
	today := forms.DayOf(at)
	put := func(name, role string, all bool, codes ...string) (store.Person, error) {
		p := store.Person{ID: newID(at, "person", name), Name: name, Role: role, All: all, Active: true}
		switch name { // papers and limits of an access, so that the pages which tell of them are not empty
		case "Crew 1":
			valid := today.AddMonths(30)
			p.Licence, p.LicenceUntil, p.May = "Journeyman card DEMO-114", &valid, store.Qualifications()
		case "Crew 2":
			p.May = []string{store.MayButton, store.MayMeasure}
		case "Auditor 2":
			until := today.AddMonths(15)
			p.Period, p.Until = &store.Period{From: today, To: today.AddMonths(12) - 1}, &until
		}
		for _, code := range codes {
			p.Sites = append(p.Sites, siteID(at, code))
		}
		p, err := b.store.PutPerson(b.ctx, b.manager.ID, p)
		if err != nil {
			return p, fmt.Errorf("person %s: %w", name, err)
		}
		return p, nil
	}
	var err error
	if b.manager, err = put("Manager", "manager", true); err != nil {
		return err
	}
	if b.crews[0], err = put("Crew 1", "crew", false, bracken, kilnLane, ottermoor); err != nil {
		return err
	}
	if b.crews[1], err = put("Crew 2", "crew", false, kilnLane, ottermoor); err != nil {
		return err
	}
	if _, err = put("Auditor", "auditor", true); err != nil {
		return err
	}
	if _, err = put("Auditor 2", "auditor", false, kilnLane); err != nil {
		return err
	}
	b.phones = map[string]*phone{}
	for name, person := range map[string]string{phone1: b.crews[0].ID, phone2: b.crews[1].ID, phoneOld: b.crews[1].ID} {
		if b.phones[name], err = enrol(b.ctx, b.store, name, person, at); err != nil {
			return err
		}
	}
	// The old phone was never set to the right time.
	b.phones[phoneOld].ahead = 26*time.Hour + 10*time.Minute
	return nil
}

const (
	phone1   = "phone of Crew 1"
	phone2   = "phone of Crew 2"
	phoneOld = "old phone of Crew 2"
)

func siteID(at time.Time, code string) string { return newID(at, "site", code) }

// setInstruments registers two instruments; the certificate of the second runs out three weeks before the end.
func (b *builder) setInstruments() error {
	at := b.clock.Now()
	b.instruments = map[string]*instrument{
		"A": {name: "Instrument A", serial: "A-0417", currentMA: 6.8, due: b.first + 160, ramp: &forms.Ramp{RateMAPerS: 0.5},
			accuracy: map[string]forms.Accuracy{"trip_time_ms": {Percent: 1, Plus: 2}, "trip_current_ma": {Percent: 2, Plus: 0.1}, "test_current_ma": {Percent: 2}, "ground_ohm": {Percent: 3, Plus: 0.02}, "voltage_v": {Percent: 1}}},
		"B": {name: "Instrument B", serial: "B-1186", currentMA: 7.5, due: b.first + 60, ramp: &forms.Ramp{StepMA: 0.1, DwellMS: 300},
			accuracy: map[string]forms.Accuracy{"trip_time_ms": {Percent: 2, Plus: 1}, "trip_current_ma": {Percent: 3, Plus: 0.1}, "test_current_ma": {Percent: 3}, "ground_ohm": {Percent: 5, Plus: 0.03}, "voltage_v": {Percent: 1.5}}},
	}
	calibrations := map[string][2]forms.Day{ // day of the certificate, and until when it holds
		"A": {b.first + 155, b.first + 155 + 365},
		"B": {b.first + 56, b.today - 23},
	}
	for _, letter := range []string{"A", "B"} {
		in := b.instruments[letter]
		in.id = newID(at, "instrument", letter)
		set := map[string]any{"name": in.name, "serial": in.serial, "accuracy": in.accuracy, "ramp": in.ramp, "calibration_due": in.due}
		if err := b.office("org", store.Draft{Kind: "instrument.set", Subject: in.id, Body: map[string]any{"set": set}}); err != nil {
			return err
		}
		cal := calibrations[letter]
		b.on(cal[0].Time().Add(15*time.Hour), func() error {
			in.due = cal[1]
			return b.office("org", store.Draft{Kind: "instrument.calibrated", Subject: in.id,
				Body: map[string]any{"on": cal[0], "due": cal[1], "certificate": "Certificate " + in.serial + " of " + cal[0].String()}})
		})
	}
	return nil
}

// office appends records of the manager at a desk; drafts without an id get one.
func (b *builder) office(log string, drafts ...store.Draft) error {
	now := b.clock.Now()
	for i := range drafts {
		d := &drafts[i]
		d.Log, d.By = log, b.manager.ID
		if d.At.IsZero() {
			d.At = now
		}
		if d.ID == "" {
			d.ID = newID(now, "office", d.Kind, d.Subject, fmt.Sprint(i))
		}
	}
	receipts, err := b.store.Append(b.ctx, drafts...)
	if err != nil {
		return fmt.Errorf("%s: %w", drafts[0].Kind, err)
	}
	for i, r := range receipts {
		if r.State != "stored" {
			return fmt.Errorf("%s is %s, not stored (%s: %s)", drafts[i].Kind, r.State, r.Code, r.Text)
		}
	}
	return nil
}

// setSites registers the three sites with places, panels, circuits, devices and tags.
func (b *builder) setSites() error {
	plans := sites()
	total := 0
	for _, p := range plans {
		total += len(p.spots)
	}
	tags := drawTags(total)
	at := b.clock.Now()
	minted := append([]string(nil), tags...)
	sort.Strings(minted)
	if err := b.office("org", store.Draft{Kind: "tags.minted", Subject: b.store.ID(), Body: map[string]any{"tags": minted}}); err != nil {
		return err
	}
	for _, plan := range plans {
		zone, err := time.LoadLocation(plan.zone)
		if err != nil {
			return fmt.Errorf("site %s: %w", plan.code, err)
		}
		s := &site{sitePlan: plan, id: siteID(at, plan.code), zone: zone}
		b.sites = append(b.sites, s)
		drafts := []store.Draft{{Kind: "site.registered", Subject: s.id, Body: set(
			"code", plan.code, "name", plan.name, "zone", plan.zone, "standard", "NEC", "address", plan.address)}}
		drafts = append(drafts, b.wiringDrafts(s)...)
		for _, sp := range plan.spots {
			d := newDevice(at, s, sp)
			d.tag, tags = tags[0], tags[1:]
			s.devices = append(s.devices, d)
			drafts = append(drafts, d.registerDrafts()...)
		}
		for len(drafts) > 0 {
			n := min(len(drafts), pushRecords)
			if err := b.office(s.id, drafts[:n]...); err != nil {
				return err
			}
			drafts = drafts[n:]
		}
	}
	return nil
}

// set makes a body {set:{…}} of name, value pairs, leaving empty values out.
func set(pairs ...any) map[string]any {
	fields := map[string]any{}
	for i := 0; i < len(pairs); i += 2 {
		switch v := pairs[i+1].(type) {
		case string:
			if v == "" {
				continue
			}
		case float64:
			if v == 0 {
				continue
			}
		}
		fields[pairs[i].(string)] = pairs[i+1]
	}
	return map[string]any{"set": fields}
}

// wiringDrafts registers the panels and circuits that feed the site's devices.
func (b *builder) wiringDrafts(s *site) []store.Draft {
	var out []store.Draft
	seen := map[string]bool{}
	for _, sp := range s.spots {
		if sp.panel == "" {
			continue
		}
		if panel := panelID(s, sp.panel); !seen[panel] {
			seen[panel] = true
			out = append(out, store.Draft{Kind: "panel.set", Subject: panel, Body: set("name", sp.panel, "location", sp.building+", "+sp.floor)})
		}
		if circuit := circuitID(s, sp); !seen[circuit] {
			seen[circuit] = true
			standard, volts, conductor, supply := "NEC", 120.0, "12 AWG", "grounded"
			switch {
			case sp.residualMA > 0:
				standard, volts, conductor = "IEC", 230, "2.5 mm²"
			case sp.breakerA == 15:
				conductor = "14 AWG"
			}
			if sp.conductor != "" {
				conductor = sp.conductor
			}
			order := b.circuitOrder(s, sp)
			if sp.isolated {
				supply = "isolated"
			}
			out = append(out, store.Draft{Kind: "circuit.set", Subject: circuit, Body: set("panel", panelID(s, sp.panel), "numbers", sp.circuit,
				"breaker_a", sp.breakerA, "poles", 1.0, "voltage_v", volts, "conductor", conductor, "standard", standard, "supply", supply, "order", order)})
		}
	}
	return out
}

// circuitOrder gives the devices of a circuit from the breaker on: those that something else hangs on stand before it.
func (b *builder) circuitOrder(s *site, of spot) (ids []string) {
	for _, sp := range s.spots {
		if sp.panel == of.panel && sp.circuit == of.circuit {
			ids = append(ids, deviceID(b.clock.Now(), s, sp))
		}
	}
	return ids
}

// deviceID is the id of the first device of a spot.
func deviceID(at time.Time, s *site, sp spot) string { return newID(at, deviceKey(s, sp)...) }

func deviceKey(s *site, sp spot) []string {
	return []string{"device", s.code, sp.building, sp.floor, sp.room, sp.name}
}

// sourceOf gives the device whose LOAD terminals feed a spot, "" where the circuit itself does.
func sourceOf(at time.Time, s *site, sp spot) string {
	for _, other := range s.spots {
		if sp.fedBy != "" && other.name == sp.fedBy && other.panel == sp.panel && other.circuit == sp.circuit {
			return deviceID(at, s, other)
		}
	}
	return ""
}

func panelID(s *site, name string) string { return newID(time.UnixMilli(0), "panel", s.code, name) }
func circuitID(s *site, sp spot) string {
	return newID(time.UnixMilli(0), "circuit", s.code, sp.panel, sp.circuit)
}

// newDevice gives the device at a spot its hidden nature.
func newDevice(at time.Time, s *site, sp spot) *device {
	key := deviceKey(s, sp)
	r := chance(key...)
	d := &device{spot: sp, site: s, id: newID(at, key...), place: newID(at, append([]string{"place"}, key...)...), last: map[string]forms.Day{}}
	if sp.floor == "" { // a portable item has no place
		d.place = ""
	}
	d.installed = forms.DayOf(at) - forms.Day(200+r.IntN(3800))
	d.source = sourceOf(at, s, sp)
	d.nature(key...)
	if sp.story == "drift" {
		d.tripMA, d.driftMAPerYr = 5.25, 0.21
	}
	if sp.story == "pantry" {
		d.installed = forms.Date(2021, time.March, 9)
	}
	return d
}

// nature draws how a device really is.
func (d *device) nature(key ...string) {
	r := chance(append([]string{"nature"}, key...)...)
	d.make, d.model = "Make "+string(rune('A'+r.IntN(4))), map[string]string{"gfci-receptacle": "GR", "gfci-breaker": "GB", "portable-gfci": "PG", "rcd": "RD", "rcbo": "RB", "hospital-receptacle": "HR"}[d.kind]
	if d.model == "" {
		d.model = "SR"
	}
	d.model += "-" + fmt.Sprint(int(d.breakerA))
	d.tripMA = 4.55 + 0.8*r.Float64()
	d.driftMAPerYr = 0.06 * r.Float64()
	d.slowness = 0.012 + 0.12*r.Float64()*r.Float64()
	d.groundOhm = 0.12 + 0.5*r.Float64()
	d.retentionG = 150 + 160*r.Float64()
}

// registerDrafts are the records that register a device with its place and tag.
func (d *device) registerDrafts() []store.Draft {
	var out []store.Draft
	if d.place != "" {
		out = append(out, store.Draft{Kind: "place.registered", Subject: d.place, Body: set("building", d.building, "floor", d.floor, "room", d.room,
			"name", d.name, "order", d.order, "critical_load", d.critical, "whom_to_tell", d.tell, "test_from", d.from, "test_until", d.until)})
	}
	out = append(out, store.Draft{Kind: "device.registered", Subject: d.id, Body: d.fields()})
	subject := d.place
	if subject == "" {
		subject = d.id
	}
	return append(out, store.Draft{Kind: "tag.bound", Subject: subject, Body: map[string]any{"tag": d.tag}})
}

// fields is the body that registers the device.
func (d *device) fields() map[string]any {
	body := set("kind", d.kind, "place", d.place, "make", d.make, "model", d.model, "rating_a", d.breakerA,
		"serial", fmt.Sprintf("%s-%05d", d.model, chance("serial", d.id).IntN(100000)),
		"rated_residual_ma", d.residualMA, "installed", d.installed.String())
	fields := body["set"].(map[string]any)
	fields["nominal_v"] = 120.0
	if d.residualMA > 0 {
		fields["nominal_v"] = 230.0
	}
	if d.panel != "" {
		fields["circuit"] = circuitID(d.site, d.spot)
	}
	if d.place == "" {
		fields["where"], fields["note"] = "Plant room, shelf", d.name
	}
	if d.source != "" {
		fields["fed_by"] = d.source
	}
	fields["equipment_ground"] = "yes"
	if d.noGround {
		fields["equipment_ground"] = "none-permitted"
	}
	if strings.HasSuffix(d.kind, "receptacle") {
		fields["faces"] = 2.0
	}
	return body
}

// drawTags draws tags as a server does, but from a fixed seed.
func drawTags(n int) []string {
	r := chance("tags")
	used := map[string]bool{}
	var out []string
	for len(out) < n {
		tag, ok := record.DrawTag(r.Uint32() & (1<<30 - 1))
		if ok && !used[tag] {
			used[tag] = true
			out = append(out, tag)
		}
	}
	return out
}
