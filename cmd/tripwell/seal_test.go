package main

import (
	"bytes"
	"context"
	"math/rand/v2"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"tripwell/store"
	"tripwell/store/record"
)

const tooMuch = "Quillfeather lives behind the blue door"

// talkative makes a store with so many tests that tell too much, each corrected since; it gives their ids.
func talkative(t *testing.T, n int) (dir string, ids []string) {
	t.Helper()
	dir = emptyStore(t)
	s, err := store.Open(dir, store.Options{Now: time.Now})
	if err != nil {
		t.Fatal(err)
	}
	id := func(parts ...string) string { return record.NamedID(append([]string{"seal"}, parts...)...) }
	site, device := id("site"), id("device")
	readings := map[string]any{"condition": "sound", "found": "on", "button_trips": "yes", "button_resets": "yes"}
	drafts := []store.Draft{
		{Kind: "site.registered", Log: site, Subject: site, By: s.ID(), Body: map[string]any{"set": map[string]any{"code": "ELM", "name": "Elm Yard", "zone": "UTC", "standard": "NEC"}}},
		{Kind: "device.registered", Log: site, Subject: device, By: s.ID(), Body: map[string]any{"set": map[string]any{"kind": "gfci-receptacle"}}},
	}
	for i := range n {
		entry := id("entry", string(rune('a'+i)))
		ids = append(ids, entry)
		drafts = append(drafts,
			store.Draft{ID: entry, Kind: "entry.made", Log: site, Subject: device, By: s.ID(), Body: map[string]any{"form": "gfci-receptacle/button", "readings": readings, "note": tooMuch + ", " + entry}},
			store.Draft{Kind: "entry.corrected", Log: site, Subject: entry, By: s.ID(), Body: map[string]any{"entry": entry, "reason": "Said too much", "readings": readings}})
	}
	if _, err := s.Append(context.Background(), drafts...); err != nil {
		t.Fatal(err)
	}
	if err := s.Close(); err != nil {
		t.Fatal(err)
	}
	return dir, ids
}

func holds(t *testing.T, dir, text string) bool {
	t.Helper()
	b, err := os.ReadFile(filepath.Join(dir, store.BookFile))
	if err != nil {
		t.Fatal(err)
	}
	return bytes.Contains(b, []byte(text))
}

func TestSeal_BesideAServer(t *testing.T) {
	dir, ids := talkative(t, 2)
	p := start(t, "serve", "--data", dir, "--listen", "127.0.0.1:0")
	out, _, code := tripwell(t, "", "seal", ids[0], "--reason", "It named a tenant", "--dry-run", "--data", dir)
	if code != 0 || !strings.Contains(out, "can be sealed") || !holds(t, dir, tooMuch+", "+ids[0]) {
		t.Fatalf("dry run: exit %d %s", code, out)
	}
	if out, wrong, code := tripwell(t, "", "seal", ids[0], "--reason", "It named a tenant", "--data", dir); code != 0 || !strings.Contains(out, "Sealed.") {
		t.Fatalf("exit %d %s %s", code, out, wrong)
	}
	if holds(t, dir, tooMuch+", "+ids[0]) || !holds(t, dir, tooMuch+", "+ids[1]) {
		t.Error("the file still holds what was sealed, or lost what was not")
	}
	if err := p.stop(os.Interrupt); err != nil {
		t.Fatal(err)
	}
	if out, wrong, code := tripwell(t, "", "check", "--data", dir); code != 0 {
		t.Errorf("check: exit %d %s %s", code, out, wrong)
	}
}

// A server killed at any moment of a sealing leaves a test that is whole or one that is gone, and a store that passes its check.
func TestSeal_KilledAtAnyMoment(t *testing.T) {
	if testing.Short() {
		t.Skip("starts and kills servers")
	}
	dir, ids := talkative(t, 5)
	sealed := 0
	for i, id := range ids {
		p := start(t, "serve", "--data", dir, "--listen", "127.0.0.1:0")
		done := make(chan bool)
		go func() {
			defer close(done)
			_, _, _ = tripwell(t, "", "seal", id, "--reason", "It named a tenant", "--data", dir)
		}()
		time.Sleep(time.Duration(rand.IntN(4+i*50)) * time.Millisecond)
		_ = p.stop(os.Kill)
		<-done
		if out, wrong, code := tripwell(t, "", "check", "--data", dir); code != 0 {
			t.Fatalf("killed at the %dth: check: exit %d %s %s", i, code, out, wrong)
		}
		out, _, _ := tripwell(t, "", "seal", id, "--reason", "x", "--dry-run", "--data", dir)
		if was := strings.Contains(out, "sealed before"); was == holds(t, dir, tooMuch+", "+id) {
			t.Errorf("%s: sealed %v and found in the file %v", id, was, !was)
		} else if was {
			sealed++
		}
	}
	t.Logf("%d of %d were sealed when the server was killed", sealed, len(ids))
}
