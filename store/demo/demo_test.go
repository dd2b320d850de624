package demo

import (
	"context"
	"encoding/json"
	"os"
	"strings"
	"sync"
	"testing"
	"time"

	"tripwell/forms"
	"tripwell/store"
)

// endDay is a fixed "now" for the tests: a Tuesday.
var endDay = time.Date(2026, time.December, 1, 9, 30, 0, 0, time.UTC)

var owner = store.Scope{Role: "owner", All: true}

// built makes the demo organisation and opens it as the demo command does.
func built(t testing.TB, now time.Time) *store.Store {
	t.Helper()
	dir := t.TempDir()
	began := time.Now()
	if err := Build(context.Background(), dir, now, nil); err != nil {
		t.Fatal(err)
	}
	t.Logf("built in %v", time.Since(began).Round(time.Millisecond))
	return open(t, dir, now)
}

// shared is one organisation for the tests that only read.
var shared = sync.OnceValues(func() (string, error) {
	dir, err := os.MkdirTemp("", "tripwell-demo-test-")
	if err != nil {
		return "", err
	}
	return dir, Build(context.Background(), dir, endDay, nil)
})

func TestMain(m *testing.M) {
	code := m.Run()
	if dir, err := shared(); err == nil {
		_ = os.RemoveAll(dir)
	}
	os.Exit(code)
}

// once opens the shared organisation.
func once(t testing.TB) *store.Store {
	t.Helper()
	dir, err := shared()
	if err != nil {
		t.Fatal(err)
	}
	return open(t, dir, endDay)
}

func open(t testing.TB, dir string, now time.Time) *store.Store {
	t.Helper()
	s, err := store.Open(dir, store.Options{Now: func() time.Time { return now }, Demo: true})
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() {
		if err := s.Close(); err != nil {
			t.Error(err)
		}
	})
	return s
}

// line is what the tests read of a record and its stamp.
type line struct {
	ID, Kind, Log, Subject string
	At                     time.Time
	Received               time.Time
	Body                   struct {
		Form     string
		Given    forms.Given
		Readings map[string]forms.Reading
		Series   []forms.SeriesReading
		Shown    store.Shown
		Set      map[string]any
		Tag      string
	}
}

// lines reads every record of the site logs, as a phone would pull them.
func lines(t testing.TB, s *store.Store) []line {
	t.Helper()
	var out []line
	for _, code := range []string{bracken, kilnLane, ottermoor} {
		log := siteOf(t, s, code)
		for after, more := "", true; more; {
			page, err := s.Pull(owner, log, after, 500)
			if err != nil {
				t.Fatal(err)
			}
			for _, r := range page.Records {
				var l line
				if err := json.Unmarshal([]byte(r.Record), &l); err != nil {
					t.Fatalf("%s: %v", r.Record, err)
				}
				var stamp struct{ Received time.Time }
				if err := json.Unmarshal([]byte(r.Stamp), &stamp); err != nil {
					t.Fatal(err)
				}
				l.Received = stamp.Received
				out = append(out, l)
			}
			after, more = page.Next, page.More
		}
	}
	return out
}

// siteOf finds a site's id among those people are given: a site's first record names its code.
func siteOf(t testing.TB, s *store.Store, code string) string {
	t.Helper()
	people, err := s.People()
	if err != nil {
		t.Fatal(err)
	}
	for _, p := range people {
		for _, site := range p.Sites {
			page, err := s.Pull(owner, site, "", 1)
			if err != nil {
				t.Fatal(err)
			}
			if strings.Contains(page.Records[0].Record, `"`+code+`"`) {
				return site
			}
		}
	}
	t.Fatalf("no site %s", code)
	return ""
}

func TestBuild_ShownIsWhatTheJudgeSays(t *testing.T) {
	results := map[string]int{}
	tags, devices := 0, 0
	for _, l := range lines(t, once(t)) {
		switch l.Kind {
		case "device.registered":
			devices++
		case "tag.bound":
			tags++
		}
		if l.Kind != "entry.made" {
			continue
		}
		form, _ := forms.Shipped().Form(l.Body.Form)
		set, _ := forms.Shipped().LimitSet(l.Body.Given.LimitSet)
		if form == nil || set == nil {
			t.Fatalf("entry %s: form %q or limit set %q is not shipped", l.ID, l.Body.Form, l.Body.Given.LimitSet)
		}
		v, err := forms.Judge(form, set, forms.Entry{Form: l.Body.Form, Given: l.Body.Given, Readings: l.Body.Readings, Series: l.Body.Series})
		if err != nil {
			t.Fatal(err)
		}
		if v.Result != l.Body.Shown.Result {
			t.Errorf("entry %s shows %s, judged %s", l.ID, l.Body.Shown.Result, v.Result)
		}
		results[v.Result]++
		if l.At.After(l.Received.Add(27*time.Hour)) || l.Received.Sub(l.At) > 13*24*time.Hour {
			t.Errorf("entry %s was made at %s and received at %s", l.ID, l.At, l.Received)
		}
		if !l.Received.Before(endDay) {
			t.Errorf("entry %s was received at %s, after the last day", l.ID, l.Received)
		}
	}
	t.Log(results, devices, "devices", tags, "tags")
	if devices < 320 {
		t.Errorf("%d devices, want 320 or more", devices)
	}
	for result, least := range map[string]int{forms.Pass: 2500, forms.Fail: 15, forms.NotTested: 15} {
		if results[result] < least {
			t.Errorf("%d entries %s, want %d or more", results[result], result, least)
		}
	}
	if results[forms.Incomplete] > 0 {
		t.Errorf("%d entries are incomplete: the demo answers what its forms ask", results[forms.Incomplete])
	}
}

// Whatever day it is: month ends, a leap day, a new year, a Sunday.
func TestBuild_AnyDay(t *testing.T) {
	if testing.Short() {
		t.Skip("builds several organisations; left out with -short")
	}
	for _, day := range []string{"2026-01-01T00:10:00Z", "2027-03-31T23:50:00Z", "2028-02-29T12:00:00Z", "2026-12-13T08:00:00Z"} {
		t.Run(day, func(t *testing.T) {
			now, err := time.Parse(time.RFC3339, day)
			if err != nil {
				t.Fatal(err)
			}
			for _, l := range lines(t, built(t, now)) {
				if !l.Received.Before(now) {
					t.Fatalf("record %s was received at %s, after now", l.ID, l.Received)
				}
			}
		})
	}
}

// Built twice for the same end, the same ids, tags and readings come out: only what a store draws for itself differs.
func TestBuild_SameAgain(t *testing.T) {
	first, again := lines(t, once(t)), lines(t, built(t, endDay))
	if len(first) != len(again) {
		t.Fatalf("%d records, then %d", len(first), len(again))
	}
	for i := range first {
		a, b := first[i], again[i]
		if a.ID != b.ID || a.Kind != b.Kind || !a.At.Equal(b.At) || a.Body.Tag != b.Body.Tag || a.Body.Shown != b.Body.Shown {
			t.Fatalf("record %d: %+v, then %+v", i, a, b)
		}
	}
}

func TestBuild_StoreIsWhole(t *testing.T) {
	s := once(t)
	if !s.Demo() {
		t.Error("the store is not marked as a demo")
	}
	report, err := s.Check(context.Background(), nil)
	if err != nil {
		t.Fatal(err)
	}
	for _, p := range report.Problems {
		t.Error(p)
	}
	if report.Refused != 0 {
		t.Errorf("%d records refused, want 0", report.Refused)
	}
	t.Logf("%d records in %d logs", report.Records, report.Logs)
}
