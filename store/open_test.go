package store

import (
	"context"
	"errors"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"
)

func at2026() time.Time { return time.Date(2026, 12, 1, 8, 0, 0, 0, time.UTC) }

func code(err error) string {
	var e *Error
	if errors.As(err, &e) {
		return e.Code
	}
	if err != nil {
		return "internal: " + err.Error()
	}
	return ""
}

func TestOpen_RefusesWithASentence(t *testing.T) {
	dir := t.TempDir()
	if _, err := Open(dir, Options{Now: at2026}); code(err) != "not_found" {
		t.Errorf("no store: got %v, want not_found", err)
	}
	s, err := Open(filepath.Join(dir, "new"), Options{Now: at2026, Create: true, URL: "https://Tripwell.Example/"})
	if err != nil {
		t.Fatal(err)
	}
	defer s.Close()
	if s.URL() != "https://tripwell.example" {
		t.Errorf("got address %q", s.URL())
	}
	if _, err := Open(filepath.Join(dir, "new"), Options{Now: at2026}); code(err) != "unavailable" || !strings.Contains(err.Error(), "in use") {
		t.Errorf("in use: got %v, want unavailable", err)
	}
	if err := s.Close(); err != nil {
		t.Fatal(err)
	}
	if err := s.Close(); err != nil {
		t.Errorf("closed twice: %v", err)
	}
	if _, err := s.Append(context.Background()); code(err) != "unavailable" {
		t.Errorf("after closing: got %v, want unavailable", err)
	}
	if _, err := Open(filepath.Join(dir, "new"), Options{Now: at2026, Create: true, Demo: true}); code(err) != "conflict" {
		t.Errorf("demo in a real store: got %v, want conflict", err)
	}
	again, err := Open(filepath.Join(dir, "new"), Options{Now: at2026})
	if err != nil {
		t.Fatal(err)
	}
	if again.ID() != s.ID() || again.Org() != s.Org() || again.Demo() || again.URL() != "https://tripwell.example" {
		t.Error("the store came back as another")
	}
	if err := again.Close(); err != nil {
		t.Fatal(err)
	}
	other := filepath.Join(dir, "letters")
	if err := os.MkdirAll(other, 0o755); err != nil {
		t.Fatal(err)
	}
	if err := os.WriteFile(filepath.Join(other, "letter.txt"), nil, 0o644); err != nil {
		t.Fatal(err)
	}
	if _, err := Open(other, Options{Now: at2026, Create: true, Demo: true}); code(err) != "conflict" {
		t.Errorf("demo in a folder of other things: got %v, want conflict", err)
	}
	if err := os.WriteFile(filepath.Join(other, BookFile), []byte("no book at all"), 0o600); err != nil {
		t.Fatal(err)
	}
	if _, err := Open(other, Options{Now: at2026, Create: true}); code(err) != "unavailable" {
		t.Errorf("a file that is no store: got %v, want unavailable", err)
	}
}

func TestOpen_NobodyElseReadsTheFiles(t *testing.T) {
	dir := filepath.Join(t.TempDir(), "data")
	s, err := Open(dir, Options{Now: at2026, Create: true, Demo: true})
	if err != nil {
		t.Fatal(err)
	}
	defer s.Close()
	if _, err := s.SignedHead(); err != nil {
		t.Fatal(err)
	}
	if !s.Demo() {
		t.Error("the demo mark is missing")
	}
	want := map[string]os.FileMode{".": 0o700, BookFile: 0o600, "keys": 0o700, "keys/head.key": 0o600, "keys/head.json": 0o600}
	for name, mode := range want {
		st, err := os.Stat(filepath.Join(dir, name))
		if err != nil {
			t.Fatal(err)
		}
		if got := st.Mode().Perm(); got != mode {
			t.Errorf("%s: got mode %o, want %o", name, got, mode)
		}
	}
	left, err := filepath.Glob(filepath.Join(dir, BookFile+".new-*"))
	if err != nil || len(left) > 0 {
		t.Errorf("left behind: %v %v", left, err)
	}
}

// What is shipped gives the same bytes, and the same root, in every store.
func TestOpen_ShippedRecordsAreEqualEverywhere(t *testing.T) {
	root := func(now time.Time) (head LogHead) {
		s, err := Open(t.TempDir(), Options{Now: func() time.Time { return now }, Create: true})
		if err != nil {
			t.Fatal(err)
		}
		defer s.Close()
		err = s.View(Scope{All: true, Role: "manager"}, func(v *View) error {
			logs, err := v.Logs()
			for _, l := range logs {
				if l.Log == "org" {
					head = l
				}
			}
			return err
		})
		if err != nil {
			t.Fatal(err)
		}
		return head
	}
	one, two := root(at2026()), root(at2026().AddDate(3, 0, 0))
	if one != two || one.Size < 15 {
		t.Errorf("got %+v and %+v, want the same and at least 15 records", one, two)
	}
}
