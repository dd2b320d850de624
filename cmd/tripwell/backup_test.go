package main

import (
	"bytes"
	"context"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"tripwell/store"
)

func TestBackup_TheFileIsAWholeStoreAndIsNoted(t *testing.T) {
	dir, file := t.TempDir(), filepath.Join(t.TempDir(), "copy.db")
	s, err := store.Open(dir, store.Options{Now: time.Now, Create: true})
	if err != nil {
		t.Fatal(err)
	}
	want := s.ID()
	if err := s.Close(); err != nil {
		t.Fatal(err)
	}
	var out, wrong bytes.Buffer
	if err := run(context.Background(), []string{"backup", "-o", file, "--data", dir}, nil, &out, &wrong); err != nil {
		t.Fatalf("%v %s", err, wrong.String())
	}
	if !strings.Contains(out.String(), "Nothing is wrong with it.") {
		t.Errorf("got %q", out.String())
	}
	left, err := filepath.Glob(filepath.Join(dir, store.BookFile+"?*"))
	if err != nil || len(left) > 0 {
		t.Errorf("left behind: %v %v", left, err)
	}
	if s, err = store.Open(dir, store.Options{Now: time.Now}); err != nil {
		t.Fatal(err)
	}
	pulled, err := s.Pull(store.Scope{All: true}, "org", "", 1)
	if err != nil || pulled.BackedUp == 0 {
		t.Errorf("got %d records of org covered by the backup (%v), want all", pulled.BackedUp, err)
	}
	if err := s.Close(); err != nil {
		t.Fatal(err)
	}
	back := t.TempDir()
	raw, err := os.ReadFile(file)
	if err != nil {
		t.Fatal(err)
	}
	if err := os.WriteFile(filepath.Join(back, store.BookFile), raw, 0o600); err != nil {
		t.Fatal(err)
	}
	if s, err = store.Open(back, store.Options{Now: time.Now}); err != nil {
		t.Fatal(err)
	}
	defer s.Close()
	report, err := s.Check(context.Background(), nil)
	if err != nil || len(report.Problems) > 0 || s.ID() != want {
		t.Errorf("the copy: %v %v, store %s, want %s", err, report.Problems, s.ID(), want)
	}
}
