package forms

import (
	"slices"
	"testing"
)

// asked gives the codes a form asks for an entry, in its order.
func asked(t *testing.T, form string, given Given, readings map[string]Reading) []string {
	t.Helper()
	f, ok := Shipped().Form(form)
	if !ok {
		t.Fatalf("no form %s", form)
	}
	set, _ := Shipped().LimitSet(f.LimitSet)
	var codes []string
	for _, a := range f.Asked(set, Entry{Form: form, Given: given, Readings: readings}) {
		codes = append(codes, a.Reading)
	}
	return codes
}

func TestForm_Asked(t *testing.T) {
	const form = "gfci-receptacle/instrument"
	for _, c := range []struct {
		rule     string
		given    Given
		readings map[string]Reading
		code     string
		want     bool
	}{
		{"visible damage ends the form", Given{}, map[string]Reading{"condition": Answer("burnt")}, "found", false},
		{"a sound look goes on", Given{}, map[string]Reading{"condition": Answer("sound")}, "found", true},
		{"nothing is injected before the ground path is confirmed", Given{}, map[string]Reading{"condition": Answer("sound")}, "trip_time_ms", false},
		{"with the ground confirmed the injection opens", Given{}, map[string]Reading{"ground_continuous": Answer("yes")}, "trip_time_ms", true},
		{"where no equipment ground is permitted nothing is ever injected", Given{EquipmentGround: "none-permitted"}, map[string]Reading{"ground_continuous": Answer("yes")}, "trip_time_ms", false},
		{"there the marking is asked", Given{EquipmentGround: "none-permitted"}, nil, "marking_present", true},
		{"and nowhere else", Given{EquipmentGround: "yes"}, nil, "marking_present", false},
		{"lamps say nothing on isolated power", Given{Supply: "isolated"}, nil, "wiring", false},
	} {
		if got := slices.Contains(asked(t, form, c.given, c.readings), c.code); got != c.want {
			t.Errorf("%s: %s asked %v, want %v", c.rule, c.code, got, c.want)
		}
	}
}
