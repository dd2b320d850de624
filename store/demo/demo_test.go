package demo

import (
	"context"
	"testing"
	"time"

	"tripwell/store"
)

// endDay is a fixed "now" for the tests: a Tuesday.
var endDay = time.Date(2026, time.December, 1, 9, 30, 0, 0, time.UTC)

// built makes the demo organisation once for a test and opens it as the demo command does.
func built(t testing.TB, now time.Time) *store.Store {
	t.Helper()
	dir := t.TempDir()
	began := time.Now()
	if err := Build(context.Background(), dir, now, nil); err != nil {
		t.Fatal(err)
	}
	t.Logf("built in %v", time.Since(began).Round(time.Millisecond))
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

func TestBuild_StoreIsWhole(t *testing.T) {
	s := built(t, endDay)
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
