package store

import (
	"bytes"
	"cmp"
	"encoding/json"
	"slices"

	"tripwell/forms"
)

// Instrument is a test instrument with its merged fields.
type Instrument struct {
	ID             string                    `json:"id"`
	Name           string                    `json:"name"`
	Serial         string                    `json:"serial,omitempty"`
	CalibrationDue forms.Day                 `json:"calibration_due,omitempty"` // NoDay where it is not known
	Accuracy       map[string]forms.Accuracy `json:"accuracy,omitempty"`        // by reading code
	Ramp           *forms.Ramp               `json:"ramp,omitempty"`
	Retired        bool                      `json:"retired,omitempty"`
}

// Instruments gives the organisation's test instruments, by name.
func (v *View) Instruments() ([]Instrument, error) {
	out := []Instrument{}
	org := v.orgLog()
	if org == 0 || !v.scope.mayRead("org") {
		return out, nil
	}
	prefix := append(put32(nil, org), ofInstrument)
	c := v.tx.Bucket(bktRegister).Cursor()
	for k, row := c.Seek(prefix); k != nil && bytes.HasPrefix(k, prefix); k, row = c.Next() {
		t, err := unpackThing(row)
		if err != nil {
			return nil, err
		}
		i := Instrument{ID: t.id.String(), Name: t.text("name"), Serial: t.text("serial"), CalibrationDue: forms.NoDay,
			Retired: string(t.value("retired")) == "true"}
		if d, err := forms.ParseDay(t.text("calibration_due")); err == nil {
			i.CalibrationDue = d
		}
		// What does not read as an accuracy or a ramp says nothing of either.
		if a := t.value("accuracy"); a != nil && json.Unmarshal(a, &i.Accuracy) != nil {
			i.Accuracy = nil
		}
		if r := t.value("ramp"); r != nil && json.Unmarshal(r, &i.Ramp) != nil {
			i.Ramp = nil
		}
		out = append(out, i)
	}
	slices.SortFunc(out, func(a, b Instrument) int { return cmp.Or(cmp.Compare(a.Name, b.Name), cmp.Compare(a.ID, b.ID)) })
	return out, nil
}
