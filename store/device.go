package store

import (
	"bytes"
	"encoding/json"
	"iter"
	"slices"
	"strings"

	"tripwell/forms"
)

// DeviceRow is a device as lists show it.
type DeviceRow struct {
	ID, Site, SiteCode, Kind, Tag string
	Place                         Place
	Panel, Circuit                string // "LP-2", "14"
	Make, Model                   string
	RatingA, RatedResidualMA      float64
	Installed                     forms.Day // NoDay where it is not known
	Retired                       bool
	Where, AtSite                 string              // of a portable item: where it is kept or is now, in words; the id of the site it is at, "" at its depot
	Last                          map[string]LastTest // by task
	Due                           []Due               // by task
}

// LastTest is the newest entry of a task that says something, not-tested included.
type LastTest struct {
	Entry  string // "" where the scope shows how the device stands and not this test
	Day    forms.Day
	Result string
	id     id16
}

// Device is everything the device page shows.
type Device struct {
	DeviceRow
	SiteName  string
	Fields    map[string]any // merged register fields
	Conflicts []Conflict
	Earlier   []DeviceRow // earlier devices of the same place, newest first
	TagClash  []string    // other live bindings of the same tag (subject ids)
	Reason    string      // why it was retired
	RetiredOn forms.Day   // NoDay where it is in use, or the day was not said
	With      string      // id of the device that took its place
}

var errNoDevice = &Error{Code: "not_found", Field: "device", Text: "There is no such device here, or it is not yours to see."}

// deviceThing is a device's register row with its number.
type deviceThing struct {
	thing
	n uint32
}

// deviceThing gives a device's register row, nil where the register does not hold it.
func (v *View) deviceThing(sv *siteView, id id16) (*deviceThing, error) {
	if d, ok := sv.devices[id]; ok {
		return d, nil
	}
	n, ok := v.number(sv, ofDevice, id)
	var d *deviceThing
	if row := v.bucket(bktRegister).Get(registerKey(sv.ord, ofDevice, n)); ok && row != nil {
		t, err := unpackThing(row)
		if err != nil {
			return nil, err
		}
		d = &deviceThing{t, n}
	}
	sv.remember()
	sv.devices[id] = d
	return d, nil
}

// deviceNumbered gives the register row of a device by its number within the site.
func (v *View) deviceNumbered(sv *siteView, n uint32) (*deviceThing, error) {
	t, err := unpackThing(v.bucket(bktRegister).Get(registerKey(sv.ord, ofDevice, n)))
	if err != nil {
		return nil, err
	}
	if d := sv.devices[t.id]; d != nil {
		return d, nil
	}
	d := &deviceThing{t, n}
	sv.remember()
	sv.devices[t.id] = d
	return d, nil
}

// placeIDOf gives a device's place: its own, or that of the device whose place it took.
func (v *View) placeIDOf(sv *siteView, t *thing) (id16, error) {
	for range 32 { // a chain longer than a place lives, or a loop
		if place := parseID(t.text("place")); place != (id16{}) {
			return place, nil
		}
		before := parseID(t.text("#replaces"))
		if before == (id16{}) {
			return id16{}, nil
		}
		d, err := v.deviceThing(sv, before)
		if err != nil || d == nil {
			return id16{}, err
		}
		t = &d.thing
	}
	return id16{}, nil
}

// row makes a list's row of a device.
func (v *View) row(sv *siteView, t *thing, w *work, on forms.Day) (DeviceRow, error) {
	row := DeviceRow{ID: t.id.String(), Site: sv.ID, SiteCode: sv.Code, Installed: forms.NoDay}
	var circuitID id16
	for i := range t.fields {
		f := &t.fields[i]
		switch f.name {
		case "kind":
			row.Kind = kindName([]byte(jsonText(f.value)))
		case "make":
			row.Make = jsonText(f.value)
		case "model":
			row.Model = jsonText(f.value)
		case "rating_a":
			row.RatingA = jsonNumber(f.value)
		case "rated_residual_ma":
			row.RatedResidualMA = jsonNumber(f.value)
		case "installed":
			if d, err := forms.ParseDay(jsonText(f.value)); err == nil {
				row.Installed = d
			}
		case "circuit":
			circuitID = parseID(jsonText(f.value))
		case "where":
			row.Where = jsonText(f.value)
		case "at_site":
			if row.AtSite = jsonText(f.value); row.AtSite == sv.ID {
				row.AtSite = "" // home again
			}
		case "#retired":
			row.Retired = present(f.value) != nil
		}
	}
	placeID, err := v.placeIDOf(sv, t)
	if err != nil {
		return row, err
	}
	p, err := v.place(sv, placeID)
	if err != nil {
		return row, err
	}
	if p != nil {
		row.Place = *p
	}
	if row.Tag, err = v.deviceTag(sv, t.id, placeID); err != nil {
		return row, err
	}
	c, err := v.circuit(sv, circuitID)
	if err != nil {
		return row, err
	}
	row.Panel, row.Circuit = c.panel, c.numbers
	if w == nil {
		return row, nil
	}
	for _, s := range w.tasks {
		if s.last.result == 0 {
			continue
		}
		if row.Last == nil {
			row.Last = make(map[string]LastTest, len(w.tasks))
		}
		last := LastTest{Entry: s.last.id.String(), Day: s.last.day, Result: resultCodes[s.last.result], id: s.last.id}
		if !v.scope.Shows(last.Day) {
			last.Entry = ""
		}
		row.Last[s.task] = last
	}
	for _, d := range w.dates {
		row.Due = append(row.Due, stateOn(d, on))
	}
	return row, nil
}

// deviceTag gives the tag of a device's place, or its own where it has no place or its place has no tag.
func (v *View) deviceTag(sv *siteView, device, place id16) (string, error) {
	if place != (id16{}) {
		if tag, err := v.tagOf(sv, place); err != nil || tag != "" {
			return tag, err
		}
	}
	return v.tagOf(sv, device)
}

// rowAt makes the row of a device by its number; ok is false where the register does not hold it.
func (v *View) rowAt(sv *siteView, n uint32, on forms.Day) (row DeviceRow, ok bool, err error) {
	reg := v.bucket(bktRegister).Get(registerKey(sv.ord, ofDevice, n))
	if reg == nil {
		return DeviceRow{}, false, nil
	}
	t, err := unpackThing(reg)
	if err != nil {
		return DeviceRow{}, false, err
	}
	w, err := v.work(sv, n, false)
	if err != nil {
		return DeviceRow{}, false, err
	}
	row, err = v.row(sv, &t, w, on)
	return row, err == nil && t.born != 0, err
}

// work reads a device's work row, nil where there is none.
func (v *View) work(sv *siteView, n uint32, entries bool) (*work, error) {
	row := v.bucket(bktWork).Get(workKey(sv.ord, n))
	if row == nil {
		return nil, nil
	}
	return unpackWork(row, entries)
}

// Devices gives a site's devices in walking order: building, floor, room, order, name; portable items last. Retired ones
// are among them. States are those of today.
func (v *View) Devices(site string) iter.Seq2[DeviceRow, error] {
	return func(yield func(DeviceRow, error) bool) {
		rows, err := v.devices(site)
		if err != nil {
			yield(DeviceRow{}, err)
			return
		}
		for _, r := range rows {
			if !yield(r, nil) {
				return
			}
		}
	}
}

func (v *View) devices(site string) ([]DeviceRow, error) {
	sv, err := v.siteNamed(site)
	if err != nil {
		return nil, err
	}
	if err := v.loadSite(sv); err != nil {
		return nil, err
	}
	var rows []DeviceRow
	err = v.eachDevice(sv, func(_ uint32, t *thing, w *work) error {
		row, err := v.row(sv, t, w, sv.today)
		rows = append(rows, row)
		return err
	})
	sortWalking(rows, func(r DeviceRow) (Place, string) { return r.Place, r.ID })
	return rows, err
}

// eachDevice reads the registered devices of a site with their work rows, both in one pass.
func (v *View) eachDevice(sv *siteView, fn func(n uint32, t *thing, w *work) error) error {
	c := v.bucket(bktWork).Cursor()
	k, row := c.Seek(workKey(sv.ord, 0))
	return v.each(sv, ofDevice, func(n uint32, t *thing) error {
		if t.born == 0 {
			return nil
		}
		for len(k) == 8 && read32(k) == sv.ord && read32(k[4:]) < n {
			k, row = c.Next()
		}
		var w *work
		if len(k) == 8 && read32(k) == sv.ord && read32(k[4:]) == n {
			var err error
			if w, err = unpackWork(row, false); err != nil {
				return err
			}
		}
		return fn(n, t, w)
	})
}

// findDevice finds a registered device within the scope. Of an id that two sites registered, the one of the smaller site
// id is meant.
func (v *View) findDevice(device string) (*siteView, *deviceThing, error) {
	id := parseID(device)
	if id == (id16{}) {
		return nil, nil, errNoDevice
	}
	var found *siteView
	var thing *deviceThing
	c := v.bucket(bktThing).Cursor()
	for k, _ := c.Seek(id[:]); bytes.HasPrefix(k, id[:]); k, _ = c.Next() {
		if k[20] != ofDevice {
			continue
		}
		sv, ok, err := v.openOrd(read32(k[16:]))
		if err != nil {
			return nil, nil, err
		}
		if !ok || found != nil && found.ID < sv.ID {
			continue
		}
		t, err := v.deviceThing(sv, id)
		if err != nil {
			return nil, nil, err
		}
		if t != nil && t.born != 0 {
			found, thing = sv, t
		}
	}
	if found == nil {
		return nil, nil, errNoDevice
	}
	return found, thing, nil
}

// Device gives one device as it stands on a day.
func (v *View) Device(id string, on forms.Day) (Device, error) {
	sv, t, err := v.findDevice(id)
	if err != nil {
		return Device{}, err
	}
	w, err := v.work(sv, t.n, false)
	if err != nil {
		return Device{}, err
	}
	d := Device{SiteName: sv.Name, Fields: map[string]any{}, RetiredOn: forms.NoDay}
	if d.DeviceRow, err = v.row(sv, &t.thing, w, on); err != nil {
		return d, err
	}
	for _, f := range t.fields {
		if !strings.HasPrefix(f.name, "#") && present(f.value) != nil {
			var value any
			if err := json.Unmarshal(f.value, &value); err != nil {
				return d, err
			}
			d.Fields[f.name] = value
		}
	}
	if d.Retired {
		var why struct{ Reason, On string }
		if err := json.Unmarshal(t.value("#retired"), &why); err != nil {
			return d, err
		}
		d.Reason, d.With = why.Reason, t.text("#with")
		if day, err := forms.ParseDay(why.On); err == nil {
			d.RetiredOn = day
		}
	}
	if d.Conflicts, err = v.conflicts(sv, ofDevice, t.id); err != nil {
		return d, err
	}
	ofIts, err := v.conflicts(sv, ofPlace, parseID(d.Place.ID))
	if err != nil {
		return d, err
	}
	d.Conflicts = append(d.Conflicts, ofIts...)
	if d.Earlier, err = v.earlier(sv, &t.thing, on); err != nil {
		return d, err
	}
	d.TagClash, err = v.tagClash(sv, d.Tag, t.id)
	return d, err
}

// placeDevices gives the devices that are or were at a place, by id: those that name it, and those that took the place
// of one of them.
func (v *View) placeDevices(sv *siteView, place id16) ([]*deviceThing, error) {
	var todo []id16
	prefix := placeKey(sv.ord, place, 0)[:20]
	c := v.bucket(bktPlace).Cursor()
	for k, _ := c.Seek(prefix); k != nil && bytes.HasPrefix(k, prefix); k, _ = c.Next() {
		t, err := unpackThing(v.bucket(bktRegister).Get(registerKey(sv.ord, ofDevice, read32(k[20:]))))
		if err != nil {
			return nil, err
		}
		todo = append(todo, t.id)
	}
	met := map[id16]bool{}
	var out []*deviceThing
	for len(todo) > 0 {
		id := todo[0]
		todo = todo[1:]
		if met[id] || id == (id16{}) {
			continue
		}
		met[id] = true
		d, err := v.deviceThing(sv, id)
		if err != nil {
			return nil, err
		}
		if d == nil {
			continue
		}
		at, err := v.placeIDOf(sv, &d.thing)
		if err != nil {
			return nil, err
		}
		if at != place {
			continue
		}
		if d.born != 0 {
			out = append(out, d)
		}
		todo = append(todo, parseID(d.text("#with")))
	}
	slices.SortFunc(out, func(a, b *deviceThing) int { return bytes.Compare(a.id[:], b.id[:]) })
	return out, nil
}

// earlier gives the other devices of a device's place that came before it, newest first.
func (v *View) earlier(sv *siteView, t *thing, on forms.Day) ([]DeviceRow, error) {
	place, err := v.placeIDOf(sv, t)
	if err != nil || place == (id16{}) {
		return nil, err
	}
	all, err := v.placeDevices(sv, place)
	if err != nil {
		return nil, err
	}
	all = slices.DeleteFunc(all, func(d *deviceThing) bool { return d.id == t.id || !d.older(t) })
	slices.SortFunc(all, func(a, b *deviceThing) int {
		if a.older(&b.thing) {
			return 1
		}
		return -1
	})
	var out []DeviceRow
	for _, d := range all {
		row, ok, err := v.rowAt(sv, d.n, on)
		if err != nil {
			return nil, err
		}
		if ok {
			out = append(out, row)
		}
	}
	return out, nil
}

// older reports whether a device was registered before another, by id where both were at once.
func (t *thing) older(o *thing) bool {
	if t.born != o.born {
		return t.born < o.born
	}
	return bytes.Compare(t.id[:], o.id[:]) < 0
}
