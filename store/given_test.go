package store

import (
	"encoding/json"
	"os"
	"reflect"
	"testing"

	"tripwell/forms"
)

// What an entry says of its device and its instrument is made on the phone and where sheets are taken in. Both run this
// file (static/tests/entry.test.mjs), and it holds every field that a condition may ask for.
func TestGiven_IsWhatThePhoneSays(t *testing.T) {
	raw, err := os.ReadFile("../testdata/given.json")
	if err != nil {
		t.Fatal(err)
	}
	var file struct {
		Cases []struct {
			Name   string
			Device struct {
				Kind, Supply string
				Fields       map[string]any
			}
			Instrument json.RawMessage
			Given      json.RawMessage
		}
	}
	if err := json.Unmarshal(raw, &file); err != nil {
		t.Fatal(err)
	}
	met := map[string]bool{}
	for _, c := range file.Cases {
		g := forms.GivenOf(c.Device.Kind, c.Device.Fields, c.Device.Supply)
		if c.Instrument != nil {
			i := Instrument{CalibrationDue: forms.NoDay}
			if err := json.Unmarshal(c.Instrument, &i); err != nil {
				t.Fatal(err)
			}
			i.Tell(&g)
		}
		out, err := json.Marshal(g)
		if err != nil {
			t.Fatal(err)
		}
		var got, want map[string]any
		if err := json.Unmarshal(out, &got); err != nil {
			t.Fatal(err)
		}
		if err := json.Unmarshal(c.Given, &want); err != nil {
			t.Fatal(err)
		}
		if !reflect.DeepEqual(got, want) {
			t.Errorf("%s:\n got %v\nwant %v", c.Name, got, want)
		}
		fields, _ := got["fields"].(map[string]any)
		for name := range fields {
			met[name] = true
		}
		for name := range got {
			met[name] = true
		}
	}
	for _, trait := range forms.Traits() {
		if !met[trait.Field] {
			t.Errorf("no case of testdata/given.json holds %s", trait.Field)
		}
	}
}
