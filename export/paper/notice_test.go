package paper

import (
	"bytes"
	"context"
	"errors"
	"strings"
	"testing"

	"github.com/google/uuid"

	"tripwell/forms"
	"tripwell/store"
)

// One sheet a room of a round: what could not be tested there and why, and what failed; rooms where all is well get none.
func TestNotices_ASheetForEachRoomThatIsNotDone(t *testing.T) {
	s := open(t)
	set := func(kv ...any) map[string]any {
		m := map[string]any{}
		for i := 0; i < len(kv); i += 2 {
			m[kv[i].(string)] = kv[i+1]
		}
		return m
	}
	var site string
	devices := map[string]store.DeviceRow{}
	err := s.View(everything, func(v *store.View) error {
		at, err := v.Site("ELM-4")
		site = at.ID
		for d, err := range v.Devices(site) {
			if err != nil {
				return err
			}
			devices[d.Kind] = d
		}
		return err
	})
	if err != nil {
		t.Fatal(err)
	}
	round := uuid.Must(uuid.NewV7()).String()
	yes, no := map[string]any{"value": "yes"}, map[string]any{"value": "no"}
	say := func(drafts ...store.Draft) {
		t.Helper()
		for i := range drafts {
			drafts[i].Log, drafts[i].By = site, s.ID()
		}
		if _, err := s.Append(context.Background(), drafts...); err != nil {
			t.Fatal(err)
		}
	}
	gfci, rcd := devices["gfci-receptacle"].ID, devices["rcd"].ID
	say(store.Draft{Kind: "round.made", Subject: round, Body: set("set", set("stops", []any{gfci + "/button", rcd + "/button"}))})
	notices := func() (n Notices, err error) {
		err = s.View(everything, func(v *store.View) (err error) { n, err = NoticesOf(v, round, true); return err })
		return n, err
	}
	var refused *store.Error
	if _, err := notices(); !errors.As(err, &refused) || refused.Code != "not_found" {
		t.Errorf("nothing walked yet: got %v, want a refusal", err)
	}
	given := func(kind string) map[string]any { return set("kind", kind, "form_rev", 1) }
	away := set("missing", "no-access")
	say(store.Draft{Kind: "entry.made", Subject: gfci, Body: set("form", "gfci-receptacle/button", "source", "phone", "round", round, "given", given("gfci-receptacle"),
		"readings", set("condition", away, "found", away, "button_trips", away, "load_dead_when_tripped", away, "button_resets", away, "restored", away))},
		store.Draft{Kind: "entry.made", Subject: rcd, Body: set("form", "rcd/button", "source", "phone", "round", round, "given", given("rcd"),
			"readings", set("condition", set("value", "sound"), "found", set("value", "on"), "button_trips", no, "restored", yes))})
	n, err := notices()
	if err != nil {
		t.Fatal(err)
	}
	if len(n.Rooms) != 2 {
		t.Fatalf("got %+v, want a sheet for each of two rooms", n.Rooms)
	}
	if one := n.Rooms[0]; one.Room != "Ground · Pantry" || len(one.Back) != 1 || one.Back[0].Reason != "no-access" || len(one.Failing) != 0 || one.On != forms.Date(2026, 11, 30) {
		t.Errorf("the locked room: got %+v", one)
	}
	if one := n.Rooms[1]; len(one.Back) != 0 || len(one.Failing) != 1 || one.Failing[0].Spot != "In the board" {
		t.Errorf("the room with the failure: got %+v", one)
	}
	for _, name := range SizeNames() {
		size, _ := SizeNamed(name)
		var pdf bytes.Buffer
		if err := PrintNotices(&pdf, n, size); err != nil {
			t.Fatal(err)
		}
		text, pages := look(t, pdf.Bytes())
		for _, want := range []string{"Please let us in", "Do not use this", "Ground · Pantry", "We were here on 2026-11-30", "Could not get to it", "Do not use until repaired", "In the board", "Call"} {
			if !strings.Contains(text, want) {
				t.Errorf("%s: the sheets do not say %q", name, want)
			}
		}
		if len(pages) != 2 {
			t.Errorf("%s: got %d pages, want one a room", name, len(pages))
		}
	}
}
