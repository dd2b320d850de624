package register

import (
	"encoding/json"
	"errors"
	"strings"

	"tripwell/forms"
	"tripwell/store"
	"tripwell/store/record"
)

// placeKey is what a row is known by within its site: where it is; at a panel also the circuit, because several devices
// share one place there; a portable item by its serial, else its tag, else where it is kept. Letter case does not count.
func placeKey(kind, building, floor, room, spot, panel, circuit, serial, tag, kept string) string {
	parts := []string{"at", building, floor, room, spot}
	switch {
	case forms.IsPortable(kind) && serial != "":
		parts = []string{"serial", serial}
	case forms.IsPortable(kind) && tag != "":
		parts = []string{"tag", tag}
	case forms.IsPortable(kind):
		parts = []string{"kept", kept}
	case isAtPanel(kind):
		parts = append(parts, panel, circuit)
	}
	return strings.ToLower(strings.Join(parts, "\x1f"))
}

func (row *Row) key() string {
	spot := fieldText(row.Place, "name")
	return placeKey(fieldText(row.Device, "kind"), fieldText(row.Place, "building"), fieldText(row.Place, "floor"),
		fieldText(row.Place, "room"), spot, row.Panel, row.CircuitNo, fieldText(row.Device, "serial"), row.Tag, row.kept())
}

// kept says where a portable item is kept: in words of its own, else by the place its row names.
func (row *Row) kept() string {
	var parts []string
	for _, n := range []string{"building", "floor", "room", "name"} {
		if s := fieldText(row.Place, n); s != "" {
			parts = append(parts, s)
		}
	}
	if len(parts) > 0 {
		return strings.Join(parts, " · ")
	}
	return fieldText(row.Device, "where")
}

func fieldText(m map[string]any, name string) string {
	s, _ := m[name].(string)
	return s
}

// known is what the store holds of the sites a register names.
type known struct {
	sites    map[string]store.Site // by code in capitals
	devices  map[string]*store.Device
	byID     map[string]*store.Device
	retired  map[string]bool               // devices that are no longer in service
	circuits map[string]knownCircuit       // by site, panel and number
	panels   map[string]string             // by site and panel
	tags     map[string]string             // subject a tag is bound to
	codes    map[string]string             // site by code in capitals, of all that the reader sees
	usuals   map[string]*forms.UsualPlaces // by site; "" is the organisation's
	org      string                        // begins the key of every imported id: the same file makes the same ids on every server of an organisation
}

type knownCircuit struct {
	id     string
	fields map[string]any
}

func noneKnown(org string) *known {
	return &known{org: org, sites: map[string]store.Site{}, devices: map[string]*store.Device{}, byID: map[string]*store.Device{},
		retired: map[string]bool{}, circuits: map[string]knownCircuit{}, panels: map[string]string{}, tags: map[string]string{}, codes: map[string]string{}, usuals: map[string]*forms.UsualPlaces{}}
}

func circuitKey(site, panel, no string) string {
	return strings.ToLower(site + "\x1f" + panel + "\x1f" + no)
}

// readKnown looks up what is there already, by code and by key, before anything is made.
func readKnown(v *store.View, rows []Row, ask Ask) (*known, error) {
	k := noneKnown(ask.Org)
	sites, err := v.Sites()
	if err != nil {
		return nil, err
	}
	named := map[string]bool{}
	for _, r := range rows {
		named[r.Site] = true
	}
	for _, s := range sites {
		code := strings.ToUpper(s.Code)
		k.codes[code] = s.ID
		if !named[code] {
			continue
		}
		k.sites[code] = s
		if err := k.readSite(v, s, forms.DayOf(ask.Now.In(s.Location()))); err != nil {
			return nil, err
		}
	}
	if k.usuals[""], _, err = v.UsualPlaces("", forms.DayOf(ask.Now)); err != nil {
		return nil, err
	}
	for _, r := range rows {
		if err := k.readTag(v, r.Tag); err != nil {
			return nil, err
		}
	}
	return k, nil
}

func (k *known) readSite(v *store.View, s store.Site, today forms.Day) (err error) {
	if k.usuals[s.ID], _, err = v.UsualPlaces(s.ID, today); err != nil {
		return err
	}
	for row, err := range v.Devices(s.ID) {
		if err != nil {
			return err
		}
		if row.Retired {
			k.retired[row.ID] = true
			continue
		}
		d, err := v.Device(row.ID, today)
		if err != nil {
			return err
		}
		k.byID[d.ID] = &d
		serial := fieldText(d.Fields, "serial")
		k.devices[s.ID+"\x1f"+placeKey(d.Kind, d.Place.Building, d.Place.Floor, d.Place.Room, d.Place.Name, d.Panel, d.Circuit, serial, d.Tag, fieldText(d.Fields, "where"))] = &d
	}
	panels, err := v.Panels(s.ID)
	if err != nil {
		return err
	}
	for _, p := range panels {
		k.panels[circuitKey(s.ID, p.Name, "")] = p.ID
	}
	circuits, err := v.Circuits(s.ID)
	if err != nil {
		return err
	}
	for _, c := range circuits {
		k.circuits[circuitKey(s.ID, c.Panel, c.Numbers)] = knownCircuit{c.ID, c.Fields}
	}
	return nil
}

func (k *known) readTag(v *store.View, tag string) error {
	if tag == "" {
		return nil
	}
	holders, err := v.Tag(tag)
	var refused *store.Error
	if err != nil && !(errors.As(err, &refused) && refused.Code == "not_found") {
		return err
	}
	for _, h := range holders {
		k.tags[tag] = h.Subject
	}
	return nil
}

// sameValue compares a wanted field with what the register holds, whatever number type it was read as.
func sameValue(a, b any) bool {
	if a == b {
		return true
	}
	x, errX := json.Marshal(a)
	y, errY := json.Marshal(b)
	return errX == nil && errY == nil && string(x) == string(y)
}

func (k *known) importID(parts ...string) string {
	return record.NamedID(append([]string{k.org}, parts...)...)
}
