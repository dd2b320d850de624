package store

import (
	"bytes"
	"cmp"
	"encoding/json"
	"math"
	"slices"

	"tripwell/forms"
)

// Panel is a panel (distribution board) of a site.
type Panel struct {
	ID, Name, Location string
	Conflicts          []Conflict // of Panel alone, not of Panels
}

// Circuit is one circuit of a site with its merged fields (breaker_a, conductor, supply …).
type Circuit struct {
	ID, PanelID, Panel, Numbers string
	Fields                      map[string]any
}

// Number gives a field's figure, 0 where none is said.
func (c *Circuit) Number(field string) float64 { n, _ := c.Fields[field].(float64); return n }

// Text gives a field's text, "" where none is said.
func (c *Circuit) Text(field string) string { s, _ := c.Fields[field].(string); return s }

var (
	errNoCircuit = &Error{Code: "not_found", Field: "circuit", Text: "There is no such circuit here, or it is not yours to see. Choose one from its site's list of circuits."}
	errNoPanel   = &Error{Code: "not_found", Field: "panel", Text: "There is no such panel here, or it is not yours to see. Choose one from its site's list of panels."}
)

// alongOf reads the order of a circuit's devices: a list of their ids.
func alongOf(value []byte) map[id16]int {
	var ids []string
	if value == nil || json.Unmarshal(value, &ids) != nil {
		return nil
	}
	along := make(map[id16]int, len(ids))
	for i, id := range ids {
		if _, twice := along[parseID(id)]; !twice {
			along[parseID(id)] = i
		}
	}
	return along
}

// place gives a device's place along its circuit; those nobody placed stand last.
func (c circuit) place(device id16) int {
	if i, ok := c.along[device]; ok {
		return i
	}
	return math.MaxInt
}

// Panels gives a site's panels by name.
func (v *View) Panels(site string) (panels []Panel, err error) {
	sv, err := v.siteNamed(site)
	if err != nil {
		return nil, err
	}
	err = v.each(sv, ofPanel, func(_ uint32, t *thing) error {
		panels = append(panels, Panel{ID: t.id.String(), Name: t.text("name"), Location: t.text("location")})
		return nil
	})
	slices.SortFunc(panels, func(a, b Panel) int {
		return cmp.Or(cmp.Compare(naturalKey(a.Name), naturalKey(b.Name)), cmp.Compare(a.ID, b.ID))
	})
	return panels, err
}

// Circuits gives a site's circuits in the order of a directory: by panel, then by their first number.
func (v *View) Circuits(site string) (circuits []Circuit, err error) {
	sv, err := v.siteNamed(site)
	if err != nil {
		return nil, err
	}
	if err := v.loadSite(sv); err != nil {
		return nil, err
	}
	err = v.each(sv, ofCircuit, func(_ uint32, t *thing) error {
		c, err := v.circuitRead(sv, t)
		circuits = append(circuits, c)
		return err
	})
	slices.SortFunc(circuits, func(a, b Circuit) int {
		return cmp.Or(cmp.Compare(naturalKey(a.Panel), naturalKey(b.Panel)), cmp.Compare(a.PanelID, b.PanelID),
			cmp.Compare(naturalKey(a.Numbers), naturalKey(b.Numbers)), cmp.Compare(a.ID, b.ID))
	})
	return circuits, err
}

func (v *View) circuitRead(sv *siteView, t *thing) (Circuit, error) {
	named, err := v.circuitOf(sv, t)
	if err != nil {
		return Circuit{}, err
	}
	c := Circuit{ID: t.id.String(), PanelID: t.text("panel"), Panel: named.panel, Numbers: named.numbers, Fields: map[string]any{}}
	for _, f := range t.fields {
		var value any
		if raw := present(f.value); raw != nil && json.Unmarshal(raw, &value) == nil {
			c.Fields[f.name] = value
		}
	}
	return c, nil
}

// Panel gives a panel of the scope with its site.
func (v *View) Panel(id string) (p Panel, site Site, err error) {
	sv, t, err := v.findThing(id, ofPanel, errNoPanel)
	if err != nil {
		return p, site, err
	}
	p = Panel{ID: t.id.String(), Name: t.text("name"), Location: t.text("location")}
	p.Conflicts, err = v.conflicts(sv, ofPanel, t.id)
	return p, sv.Site, err
}

// Circuit gives a circuit of the scope with its site and what is said of it by two people at once.
func (v *View) Circuit(id string) (c Circuit, site Site, lost []Conflict, err error) {
	sv, t, err := v.findThing(id, ofCircuit, errNoCircuit)
	if err != nil {
		return c, site, nil, err
	}
	if c, err = v.circuitRead(sv, t); err != nil {
		return c, site, nil, err
	}
	lost, err = v.conflicts(sv, ofCircuit, t.id)
	return c, sv.Site, lost, err
}

// findThing finds a thing of a type within the scope. Of an id that two sites speak of, the one of the smaller site id is
// meant.
func (v *View) findThing(name string, typ byte, none error) (found *siteView, out *thing, err error) {
	id := parseID(name)
	if id == (id16{}) {
		return nil, nil, none
	}
	c := v.tx.Bucket(bktThing).Cursor()
	for k, _ := c.Seek(id[:]); bytes.HasPrefix(k, id[:]); k, _ = c.Next() {
		if k[20] != typ {
			continue
		}
		sv, ok, err := v.openOrd(read32(k[16:]))
		if err != nil {
			return nil, nil, err
		}
		if !ok || found != nil && found.ID < sv.ID {
			continue
		}
		t, there, err := v.thing(sv, typ, id)
		if err != nil {
			return nil, nil, err
		}
		if there {
			found, out = sv, &t
		}
	}
	if found == nil {
		return nil, nil, none
	}
	return found, out, nil
}

// ProtectionOn reads the map of a circuit: everything on it, what is behind that, and what else protects it.
func (v *View) ProtectionOn(circuit string, on forms.Day) (*Protection, error) {
	sv, t, err := v.findThing(circuit, ofCircuit, errNoCircuit)
	if err != nil {
		return nil, err
	}
	w := newWiring(v, sv)
	w.whole[t.id] = true
	ids, err := w.onCircuit(t.id, false)
	if err != nil {
		return nil, err
	}
	if err := w.behind(ids...); err != nil {
		return nil, err
	}
	return w.protection(on)
}

// SiteProtection reads the map of a whole site.
func (v *View) SiteProtection(site string, on forms.Day) (*Protection, error) {
	sv, err := v.siteNamed(site)
	if err != nil {
		return nil, err
	}
	if err := v.loadSite(sv); err != nil {
		return nil, err
	}
	w := newWiring(v, sv)
	err = v.each(sv, ofDevice, func(n uint32, t *thing) error {
		sv.devices[t.id] = &deviceThing{*t, n}
		return nil
	})
	if err != nil {
		return nil, err
	}
	err = v.each(sv, ofDevice, func(_ uint32, t *thing) error {
		if t.born == 0 || t.value("#retired") != nil {
			return nil
		}
		_, _, err := w.take(t.id)
		return err
	})
	if err != nil {
		return nil, err
	}
	return w.protection(on)
}
