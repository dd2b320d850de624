package bundle

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

// restore puts a backup in the place of the house's book and opens it again.
func (h *house) restore(backup string) {
	h.t.Helper()
	must(h.t, h.Store.Close())
	options := store.Options{Now: func() time.Time { return h.now }}
	_, err := store.Restore(context.Background(), h.dir, backup, options, nil)
	must(h.t, err)
	h.Store, err = store.Open(h.dir, options)
	must(h.t, err)
	h.t.Cleanup(func() { _ = h.Store.Close() })
}

func (h *house) backup() string {
	h.t.Helper()
	path := filepath.Join(h.t.TempDir(), "backup.db")
	f, err := os.Create(path)
	must(h.t, err)
	_, err = h.Backup(f)
	must(h.t, err)
	must(h.t, f.Close())
	return path
}

// TestVerify_AcrossARestore holds bundles of the book that a backup took the place of against heads and bundles taken before.
func TestVerify_AcrossARestore(t *testing.T) {
	h := newHouse(t)
	h.work(12)
	before := h.bundle() // the backup holds all of it
	backup := h.backup()
	gone := h.press(3, "no")
	kept := h.press(4, "yes")
	beyond := h.bundle() // two records more than the backup
	var again []byte
	for _, line := range bytes.Split(unpack(t, beyond)[recordsName(h.site.ID)], []byte("\n")) {
		if bytes.Contains(line, []byte(`{"id":"`+kept)) {
			again = line
		}
	}
	h.restore(backup)
	_, err := h.Push(context.Background(), store.Sender{Installation: h.phone, Sent: h.now}, []store.Incoming{{Record: again}})
	must(t, err)
	after := h.bundle()
	said := func(earlier []byte) (found, notes, checked string) {
		t.Helper()
		r := verify(t, after, Check{Key: h.key(), Earlier: earlier})
		return r.text(), strings.Join(r.Notes, "\n"), strings.Join(r.Checked, "\n")
	}
	has := func(where, text, want string) {
		t.Helper()
		if !strings.Contains(text, want) {
			t.Errorf("%s: nothing says %q:\n%s", where, want, text)
		}
	}
	for name, earlier := range map[string][]byte{"a head the backup holds": unpack(t, before)[headFile], "a bundle the backup holds": before} {
		found, notes, checked := said(earlier)
		if found != "" {
			t.Errorf("%s: %s", name, found)
		}
		has(name, notes, "was put back from a backup on 2026-")
		has(name, checked, "are those that the head of")
		has(name, checked, "1 restores against the log of the office")
	}
	found, _, checked := said(unpack(t, beyond)[headFile])
	has("a head beyond", checked, "which the backup brought back, are among those that the head of")
	has("a head beyond", found, "lay beyond the backup and are not shown to be in the book again")
	found, notes, checked := said(beyond)
	has("a bundle beyond", checked, "which the backup brought back, are those that the head of")
	has("a bundle beyond", notes, "1 records that lay beyond the backup came again")
	has("a bundle beyond", found, "The record "+gone+" (entry.made, place ")
	if strings.Count(found, "\n") != 1 || strings.Contains(found, kept) {
		t.Errorf("a bundle beyond: got %s, want the one record that did not come again", found)
	}

	t.Run("a history that was rewritten is no restore", func(t *testing.T) {
		doctored := h.doctored(after)
		for name, earlier := range map[string][]byte{"head": unpack(t, before)[headFile], "head beyond": unpack(t, beyond)[headFile], "bundle": before, "bundle beyond": beyond} {
			if got := verify(t, doctored, Check{Key: h.key(), Earlier: earlier}).text(); !strings.Contains(got, "history was rewritten") {
				t.Errorf("%s: got %s", name, got)
			}
		}
	})
	t.Run("a restore that is kept quiet", func(t *testing.T) {
		quiet := altered(t, after, restoresFile, func([]byte) []byte { return []byte("[]") })
		if got := verify(t, quiet, Check{Key: h.key(), Earlier: beyond}).text(); !strings.Contains(got, restoresFile) {
			t.Errorf("got %s", got)
		}
	})
	t.Run("a restore that is made up", func(t *testing.T) {
		bent := altered(t, after, restoresFile, func(old []byte) []byte { return bytes.Replace(old, []byte(`\"size\":`), []byte(`\"size\":1`), 1) })
		if got := verify(t, bent, Check{Key: h.key(), Earlier: beyond}).text(); !strings.Contains(got, "is not the one that stands there") {
			t.Errorf("got %s", got)
		}
	})
	t.Run("a second restore", func(t *testing.T) {
		h.restore(backup)
		again := h.bundle()
		r := verify(t, again, Check{Key: h.key(), Earlier: after})
		has("epoch 2", r.text(), kept)
		if strings.Contains(r.text(), "rewritten") {
			t.Errorf("got %s", r.text())
		}
		if r := verify(t, again, Check{Key: h.key(), Earlier: before}); len(r.Findings) > 0 {
			t.Errorf("what the backup holds: %s", r.text())
		}
	})
	t.Run("without the book that stood there", func(t *testing.T) {
		lost := newHouse(t)
		lost.work(8)
		backup := lost.backup()
		lost.press(1, "yes")
		earlier := lost.bundle()
		must(t, os.Remove(filepath.Join(lost.dir, store.BookFile))) // the disk lost it
		lost.restore(backup)
		r := verify(t, lost.bundle(), Check{Key: lost.key(), Earlier: unpack(t, earlier)[headFile]})
		has("no former book", r.text(), "was put back from a backup")
		r = verify(t, lost.bundle(), Check{Key: lost.key(), Earlier: earlier})
		has("no former book", strings.Join(r.Checked, "\n"), "which the backup brought back")
	})
}
