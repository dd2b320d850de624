package forms

import "testing"

// Conductors at the three contacts, as a circuit: the potential each contact carries, 0 for none. A lamp lights between
// two contacts of which one is hot and the other leads back (neutral or ground), as in the published lamp tables.
func TestLampTable_FollowsFromTheConductors(t *testing.T) {
	const hot, back, open = "hot", "back", "open"
	lights := func(a, b string) bool { return a == hot && b == back || a == back && b == hot }
	for _, c := range []struct{ name, h, n, g, wiring string }{
		{"correct wiring", hot, back, back, "correct"},
		{"open ground", hot, back, open, "open-ground"},
		{"open neutral", hot, open, back, "open-neutral"},
		{"open hot", open, back, back, "open-hot"},
		{"hot and ground reversed", back, back, hot, "hot-ground-reversed"},
		{"hot and neutral reversed", back, hot, back, "hot-neutral-reversed"},
		{"open ground, hot and neutral reversed: shows open ground", back, hot, open, "open-ground"},
		{"neutral and ground tied at the device: shows correct", hot, back, back, "correct"},
		{"tied and reversed, the metal live: shows correct", back, hot, hot, "correct"},
	} {
		found := ""
		for _, l := range LampTable() {
			if l.HotNeutral == lights(c.h, c.n) && l.HotGround == lights(c.h, c.g) && l.NeutralGround == lights(c.n, c.g) {
				found = l.Wiring
			}
		}
		// The pattern of hot and ground reversed is that of an open neutral with a load: lamps H-G and N-G.
		if found != c.wiring {
			t.Errorf("%s: the lamps say %q, want %q", c.name, found, c.wiring)
		}
	}
	code, _ := CodeOf("wiring")
	for _, l := range LampTable() {
		known := false
		for _, o := range code.Options {
			known = known || o == l.Wiring
		}
		if !known {
			t.Errorf("%q is no answer to wiring", l.Wiring)
		}
	}
}
