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
	// A tester without a current source: its resistor, or the line voltage at which it injects what it is marked with.
	TestResistorOhm float64 `json:"test_resistor_ohm,omitzero"`
	TestNominalV    float64 `json:"test_nominal_v,omitzero"`
	RetentionGauge  string  `json:"retention_gauge,omitempty"` // mass of the go/no-go gauge kept with it: "4 oz"
	Retired         bool    `json:"retired,omitempty"`
}

// Tell says in what is given which instrument was used, and what the judgement needs to know of it; the same as
// static/entry.mjs (testdata/given.json).
func (i *Instrument) Tell(g *forms.Given) {
	g.Instrument, g.Accuracy, g.Ramp = i.ID, i.Accuracy, i.Ramp
	g.TestResistorOhm, g.TestNominalV, g.RetentionGauge = i.TestResistorOhm, i.TestNominalV, i.RetentionGauge
	if due := i.CalibrationDue; due != forms.NoDay {
		g.CalibrationDue = &due
	}
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
		for name, into := range map[string]*float64{"test_resistor_ohm": &i.TestResistorOhm, "test_nominal_v": &i.TestNominalV} {
			if v := t.value(name); v != nil && json.Unmarshal(v, into) != nil {
				*into = 0
			}
		}
		i.RetentionGauge = t.text("retention_gauge")
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
