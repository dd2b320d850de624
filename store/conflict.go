package store

import (
	"cmp"
	"encoding/json"
	"strings"
	"time"

	"tripwell/forms"
	"tripwell/store/record"
)

// Conflict is a value that lost to a concurrent one: neither author knew of the other's.
type Conflict struct {
	Subject              string // the thing the value is said of
	Field, Value, Winner string
	By                   string
	At                   time.Time
	Record               string
}

// conflicts lists the values of a thing that lost to a concurrent one, by field.
func (v *View) conflicts(sv *siteView, typ byte, id id16) ([]Conflict, error) {
	n, ok := v.number(sv, typ, id)
	if !ok {
		return nil, nil
	}
	row := v.tx.Bucket(bktRegister).Get(registerKey(sv.ord, typ, n))
	if row == nil {
		return nil, nil
	}
	reg, err := unpackRegister(row)
	if err != nil {
		return nil, err
	}
	var out []Conflict
	for _, f := range reg.fields {
		if strings.HasPrefix(f.name, "#") {
			continue
		}
		for _, lost := range record.Losers(f.said) {
			r, _, _, _, err := v.recordAt(parseID(lost.ID))
			if err != nil {
				return nil, err
			}
			out = append(out, Conflict{Subject: id.String(), Field: f.name, Value: v.readable(sv, f.name, lost.Value), Winner: v.readable(sv, f.name, f.said[0].Value), By: r.By, At: r.At, Record: lost.ID})
		}
	}
	return out, nil
}

// readable gives a field's value as people read it; where it names a thing, what that is called.
func (v *View) readable(sv *siteView, field string, value json.RawMessage) string {
	text := plainText(value)
	id := parseID(text)
	if id == (id16{}) {
		return text
	}
	switch field {
	case "place":
		if p, err := v.place(sv, id); err == nil && p != nil {
			return cmp.Or(p.Name, p.Context(), text)
		}
	case "circuit":
		if c, err := v.circuit(sv, id); err == nil && c.numbers != "" {
			return strings.Trim(c.panel+" / "+c.numbers, " /")
		}
	case "panel":
		if t, ok, err := v.thing(sv, ofPanel, id); err == nil && ok {
			return cmp.Or(t.text("name"), text)
		}
	case "fed_by":
		if d, err := v.Device(text, forms.NoDay); err == nil {
			return cmp.Or(d.Place.Name, text)
		}
	}
	return text
}
