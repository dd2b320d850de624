package store

import (
	"bytes"
	"cmp"
	"slices"
	"strings"
	"unicode"
)

// Place is where a fixed device sits. Name is the spot ("Pantry, by the sink").
type Place struct {
	ID, Site, Building, Floor, Room, Name string
	Order                                 float64 // walking order within the room
	CriticalLoad                          string
	WhomToTell                            string // before TEST is pressed here
	TestFrom, TestUntil                   string // 15:04 at the site: when TEST may be pressed here; both or none
	Usual                                 string // kind of place that usually needs protection, as somebody said; forms.NoUsualPlace, "" = by its names
	seen                                  uint64 // largest stamp of what is said of it
}

// Context gives "Ground floor · Kitchen" style context without the spot's name.
func (p Place) Context() string {
	parts := slices.DeleteFunc([]string{p.Building, p.Floor, p.Room}, func(s string) bool { return s == "" })
	return strings.Join(parts, " · ")
}

func placeOf(site string, t *thing) *Place {
	return &Place{ID: t.id.String(), Site: site, Building: t.text("building"), Floor: t.text("floor"), Room: t.text("room"),
		Name: t.text("name"), Order: t.number("order"), CriticalLoad: plainText(t.value("critical_load")), WhomToTell: t.text("whom_to_tell"),
		TestFrom: t.text("test_from"), TestUntil: t.text("test_until"), Usual: t.text("usual"), seen: t.seen()}
}

// Places gives a site's places in walking order.
func (v *View) Places(site string) ([]Place, error) {
	sv, err := v.siteNamed(site)
	if err != nil {
		return nil, err
	}
	if err := v.loadSite(sv); err != nil {
		return nil, err
	}
	out := make([]Place, 0, len(sv.places))
	for _, p := range sv.places {
		if p != nil {
			out = append(out, *p)
		}
	}
	sortWalking(out, func(p Place) (Place, string) { return p, p.ID })
	return out, nil
}

// place gives a place, nil where the register does not hold it.
func (v *View) place(sv *siteView, id id16) (*Place, error) {
	if p, ok := sv.places[id]; ok || sv.whole || id == (id16{}) {
		return p, nil
	}
	t, ok, err := v.thing(sv, ofPlace, id)
	if err != nil {
		return nil, err
	}
	var p *Place
	if ok {
		p = placeOf(sv.ID, &t)
	}
	sv.remember()
	sv.places[id] = p
	return p, nil
}

// circuit gives a circuit with its panel's name; what the register does not hold is empty.
func (v *View) circuit(sv *siteView, id id16) (circuit, error) {
	if c, ok := sv.circuits[id]; ok || sv.whole || id == (id16{}) {
		return c, nil
	}
	t, ok, err := v.thing(sv, ofCircuit, id)
	if err != nil || !ok {
		return circuit{}, err
	}
	c, err := v.circuitOf(sv, &t)
	sv.remember()
	sv.circuits[id] = c
	return c, err
}

func (v *View) circuitOf(sv *siteView, t *thing) (circuit, error) {
	c := circuit{panel: t.text("panel"), numbers: plainText(t.value("numbers")), supply: t.text("supply")}
	c.along = alongOf(t.value("order"))
	panel := parseID(c.panel)
	if panel == (id16{}) { // written out, not named by its id
		return c, nil
	}
	c.panel = ""
	if name, ok := sv.panels[panel]; ok || sv.whole {
		c.panel = name
		return c, nil
	}
	p, _, err := v.thing(sv, ofPanel, panel)
	if err != nil {
		return c, err
	}
	c.panel = p.text("name")
	sv.remember()
	sv.panels[panel] = c.panel
	return c, nil
}

// loadSite reads all places, panels, circuits and tags of a site in one pass over each: a list would else look up every
// device's by itself.
func (v *View) loadSite(sv *siteView) error {
	if sv.whole {
		return nil
	}
	sv.remember()
	for _, typ := range []byte{ofPlace, ofPanel, ofCircuit} {
		err := v.each(sv, typ, func(_ uint32, t *thing) error {
			switch typ {
			case ofPlace:
				sv.places[t.id] = placeOf(sv.ID, t)
			case ofPanel:
				sv.panels[t.id] = t.text("name")
			case ofCircuit:
				c, err := v.circuitOf(sv, t)
				if err != nil {
					return err
				}
				sv.circuits[t.id] = c
			}
			return nil
		})
		if err != nil {
			return err
		}
	}
	prefix := put32(nil, sv.ord)
	var subject id16
	var best binding
	c := v.bucket(bktBind).Cursor()
	for k, row := c.Seek(prefix); k != nil && bytes.HasPrefix(k, prefix); k, row = c.Next() {
		b, err := unpackBinding(row)
		if err != nil {
			return err
		}
		if id := id16(k[4:20]); id != subject {
			subject, best = id, binding{}
		}
		if b.live && best.before(b) {
			sv.tags[subject], best = string(k[20:]), b
		}
	}
	sv.whole = true
	return nil
}

// tagOf gives the tag bound last to a subject, "" for none.
func (v *View) tagOf(sv *siteView, subject id16) (string, error) {
	if tag, ok := sv.tags[subject]; ok || sv.whole {
		return tag, nil
	}
	var tag string
	var best binding
	prefix := bindKey(sv.ord, subject, "")
	c := v.bucket(bktBind).Cursor()
	for k, row := c.Seek(prefix); k != nil && bytes.HasPrefix(k, prefix); k, row = c.Next() {
		b, err := unpackBinding(row)
		if err != nil {
			return "", err
		}
		if b.live && best.before(b) {
			tag, best = string(k[20:]), b
		}
	}
	sv.remember()
	sv.tags[subject] = tag
	return tag, nil
}

// each reads the things of one type of a site, in the order they were first met.
func (v *View) each(sv *siteView, typ byte, fn func(n uint32, t *thing) error) error {
	prefix := append(put32(nil, sv.ord), typ)
	c := v.bucket(bktRegister).Cursor()
	for k, row := c.Seek(prefix); k != nil && bytes.HasPrefix(k, prefix); k, row = c.Next() {
		t, err := unpackThing(row)
		if err != nil {
			return err
		}
		if err := fn(read32(k[5:]), &t); err != nil {
			return err
		}
	}
	return nil
}

// sortWalking puts a list into walking order: building, floor, room, order, name, with numbers within names counted as
// numbers; what has no place comes last.
func sortWalking[T any](list []T, at func(T) (Place, string)) {
	type keyed struct {
		key   string
		order float64
		name  string
		id    string
		item  T
	}
	keys := make([]keyed, len(list))
	rooms := map[[3]string]string{}
	for i, item := range list {
		p, id := at(item)
		room := [3]string{p.Building, p.Floor, p.Room}
		key, ok := rooms[room]
		if !ok {
			key = naturalKey(p.Building) + "\x00" + naturalKey(p.Floor) + "\x00" + naturalKey(p.Room)
			rooms[room] = key
		}
		if p.ID == "" {
			key = "\xff"
		}
		keys[i] = keyed{key, p.Order, naturalKey(p.Name), id, item}
	}
	slices.SortFunc(keys, func(a, b keyed) int {
		if c := cmp.Compare(a.key, b.key); c != 0 {
			return c
		}
		return cmp.Or(cmp.Compare(a.order, b.order), cmp.Compare(a.name, b.name), cmp.Compare(a.id, b.id))
	})
	for i := range keys {
		list[i] = keys[i].item
	}
}

// naturalKey turns a name into a key that sorts without regard to letter case and with its numbers by size: a run of
// digits is led by its length, so that Room 2 comes before Room 10.
func naturalKey(s string) string {
	b := make([]byte, 0, len(s)+8)
	for i := 0; i < len(s); {
		if s[i] < '0' || s[i] > '9' {
			if s[i] < 0x80 {
				b = append(b, byte(unicode.ToLower(rune(s[i]))))
				i++
				continue
			}
			j := i
			for j < len(s) && s[j] >= 0x80 {
				j++
			}
			b = append(b, strings.ToLower(s[i:j])...)
			i = j
			continue
		}
		for i+1 < len(s) && s[i] == '0' && s[i+1] >= '0' && s[i+1] <= '9' {
			i++
		}
		j := i
		for j < len(s) && s[j] >= '0' && s[j] <= '9' {
			j++
		}
		b = append(append(b, '0', byte(min(j-i, 255))), s[i:j]...)
		i = j
	}
	return string(b)
}
