package forms

import "testing"

func TestFoundBy_AndWhatTheMapSays(t *testing.T) {
	yes, no := Reading{Value: "yes"}, Reading{Value: "no"}
	dark := map[string]Reading{"found": {Value: "no-power"}, "wiring": {Missing: "circuit-dead"}}
	for _, c := range []struct {
		name, kind string
		readings   map[string]Reading
		want       string
	}{
		{"dead with its protector", ProtectedReceptacle, map[string]Reading{"load_dead_when_tripped": yes}, FoundDead},
		{"live though its protector is tripped", ProtectedReceptacle, map[string]Reading{"load_dead_when_tripped": no}, FoundLive},
		{"its own button says nothing of a source", GFCIReceptacle, map[string]Reading{"load_dead_when_tripped": yes}, ""},
		{"without power on a dead circuit", PlainReceptacle, dark, FoundOff},
		{"no power, and that is a fault of its own", PlainReceptacle, map[string]Reading{"found": {Value: "no-power"}}, ""},
		{"not asked", PlainReceptacle, map[string]Reading{"found": {Value: "on"}}, ""},
	} {
		if got := FoundBy(c.kind, c.readings); got != c.want {
			t.Errorf("%s: got %q, want %q", c.name, got, c.want)
		}
	}
	m := NewProtectionMap([]Wired{{ID: "g", Kind: GFCIReceptacle}, {ID: "fed", Kind: ProtectedReceptacle, Source: "g", Clock: 1, Record: "r"},
		{ID: "straight", Kind: PlainReceptacle}, {ID: "behind", Kind: PlainReceptacle, Source: "straight", Clock: 2, Record: "s"}})
	for _, c := range []struct {
		id, found string
		want      bool
	}{{"fed", FoundDead, false}, {"fed", FoundLive, true}, {"straight", FoundDead, true}, {"straight", FoundLive, false}, {"behind", FoundDead, true}, {"straight", FoundOff, false}, {"fed", "", false}} {
		if got := m.Contradicts(c.id, c.found); got != c.want {
			t.Errorf("%s found %q: contradicts %v, want %v", c.id, c.found, got, c.want)
		}
	}
}
