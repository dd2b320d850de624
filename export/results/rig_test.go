package results

import (
	"bytes"
	"context"
	"encoding/csv"
	"strconv"
	"strings"
	"testing"
	"time"

	"tripwell/export/intake"
	"tripwell/forms"
	"tripwell/store"
	"tripwell/store/record"
)

// house is a real store with a clock of its own.
type house struct {
	*store.Store
	t   testing.TB
	now time.Time
}

var everything = store.Scope{Role: "owner", All: true}

func newHouse(t testing.TB) *house {
	t.Helper()
	h := &house{t: t, now: time.Date(2026, time.November, 30, 15, 0, 0, 0, time.UTC)}
	s, err := store.Open(t.TempDir(), store.Options{Now: func() time.Time { return h.now }, Create: true})
	h.must(err)
	h.Store = s
	t.Cleanup(func() {
		report, err := s.Check(context.Background(), nil)
		if err != nil || len(report.Problems) > 0 {
			t.Errorf("check after the test: %v, %v", report.Problems, err)
		}
		s.Close()
	})
	_, err = s.PutPerson(context.Background(), "", store.Person{Name: "Crew 1", Role: "crew", All: true, Active: true})
	h.must(err)
	h.must(h.append(store.Draft{Kind: "instrument.set", Log: "org", Subject: record.NamedID("instrument"), Body: map[string]any{
		"set": map[string]any{"name": "Analyser 2", "serial": "TW-2207", "calibration_due": "2027-03-31"}}}))
	return h
}

func (h *house) must(err error) {
	h.t.Helper()
	if err != nil {
		h.t.Fatal(err)
	}
}

func (h *house) append(drafts ...store.Draft) error {
	for i := range drafts {
		drafts[i].By = h.ID()
	}
	_, err := h.Append(context.Background(), drafts...)
	return err
}

// register registers the devices of a CSV with the columns site, building, floor, room, place, kind, panel, circuit, tag
// and rated_residual_ma, under ids made from its rows.
func (h *house) register(text string) {
	h.t.Helper()
	rows, err := csv.NewReader(strings.NewReader(text)).ReadAll()
	h.must(err)
	at := map[string]int{}
	for i, head := range rows[0] {
		at[head] = i
	}
	sites := map[string]bool{}
	var drafts []store.Draft
	for n, cells := range rows[1:] {
		get := func(name string) string {
			if i, ok := at[name]; ok {
				return cells[i]
			}
			return ""
		}
		log := record.NamedID("site", get("site"))
		if !sites[log] {
			sites[log] = true
			standard := "NEC"
			if get("standard") != "" {
				standard = get("standard")
			}
			drafts = append(drafts, store.Draft{Kind: "site.registered", Log: log, Subject: log, Body: map[string]any{"set": map[string]any{
				"code": get("site"), "name": get("site_name"), "zone": "America/Chicago", "standard": standard}}})
		}
		place, device := record.NamedID("place", log, strconv.Itoa(n)), deviceID(get("site"), n)
		set := map[string]any{"kind": get("kind"), "place": place}
		if get("kind") == "rcd" {
			set["rated_residual_ma"] = 30.0
		}
		if c := get("circuit"); c != "" {
			panel, circuit := record.NamedID("panel", log, get("panel")), record.NamedID("circuit", log, get("panel"), c)
			drafts = append(drafts, store.Draft{Kind: "panel.set", Log: log, Subject: panel, Body: map[string]any{"set": map[string]any{"name": get("panel")}}},
				store.Draft{Kind: "circuit.set", Log: log, Subject: circuit, Body: map[string]any{"set": map[string]any{"panel": panel, "numbers": c}}})
			set["circuit"] = circuit
		}
		drafts = append(drafts,
			store.Draft{Kind: "place.registered", Log: log, Subject: place, Body: map[string]any{"set": map[string]any{
				"building": get("building"), "floor": get("floor"), "room": get("room"), "name": get("place"), "order": float64(n)}}},
			store.Draft{Kind: "device.registered", Log: log, Subject: device, Body: map[string]any{"set": set}})
		if tag, ok := record.ParseTag(get("tag")); ok {
			drafts = append(drafts, store.Draft{Kind: "tag.bound", Log: log, Subject: place, Body: map[string]any{"tag": tag}})
		}
	}
	h.must(h.append(drafts...))
}

func deviceID(site string, n int) string { return record.NamedID("device", site, strconv.Itoa(n)) }

// bring takes a text file in.
func (h *house) bring(text string, ask Ask) Report {
	h.t.Helper()
	return h.bringRaw([]byte(text), ask)
}

func (h *house) bringRaw(raw []byte, ask Ask) Report {
	h.t.Helper()
	h.now = h.now.Add(time.Minute)
	book, err := intake.Open("sheet.csv", bytes.NewReader(raw), intake.Caps{})
	h.must(err)
	report, err := Import(context.Background(), h.Store, h.ID(), book, ask, nil)
	h.must(err)
	return report
}

// entries gives all entries of a site, by test day.
func (h *house) entries(site string) (all []store.Entry) {
	h.t.Helper()
	h.must(h.View(everything, func(v *store.View) error {
		for e, err := range v.SiteEntries(site, forms.NoDay, forms.NoDay) {
			if err != nil {
				return err
			}
			all = append(all, e)
		}
		return nil
	}))
	return all
}

// only gives the one outcome of a report.
func only(t testing.TB, r Report) Outcome {
	t.Helper()
	if len(r.Outcomes) != 1 {
		t.Fatalf("got %d outcomes, want one: %+v", len(r.Outcomes), r.Outcomes)
	}
	return r.Outcomes[0]
}
