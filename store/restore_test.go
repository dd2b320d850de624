package store

import (
	"context"
	"encoding/json"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"tripwell/store/record"
)

// imageOf writes a backup of a store to a file.
func imageOf(t *testing.T, s *Store) string {
	t.Helper()
	path := filepath.Join(t.TempDir(), "backup.db")
	f, err := os.Create(path)
	if err != nil {
		t.Fatal(err)
	}
	if _, err := s.Backup(f); err != nil {
		t.Fatal(err)
	}
	if err := f.Close(); err != nil {
		t.Fatal(err)
	}
	return path
}

func TestRestore_PutsABackupInPlaceAsTheNextEpoch(t *testing.T) {
	r := newRig(t)
	site := r.site("ELM-4")
	p := r.phone(r.person("crew", false, site))
	device := newID(r.clock())
	before, after := p.make("entry.made", site, device, entry(22)), p.make("entry.made", site, device, entry(23))
	p.push(before)
	backup := imageOf(t, r.Store)
	p.push(after)
	if _, err := r.SignedHead(); err != nil {
		t.Fatal(err)
	}
	dir, options := r.dir, Options{Now: r.clock}
	if _, err := Restore(context.Background(), dir, backup, options, nil); err == nil || !strings.Contains(err.Error(), "Stop it first") {
		t.Errorf("beside an open store: got %v, want a refusal", err)
	}
	signed, err := os.ReadFile(filepath.Join(dir, keysDir, headFile))
	if err != nil {
		t.Fatal(err)
	}
	if err := r.Store.Close(); err != nil {
		t.Fatal(err)
	}
	done, err := Restore(context.Background(), dir, backup, options, nil)
	if err != nil {
		t.Fatal(err)
	}
	if done.Epoch != 2 || len(done.Shorter) != 1 || done.Shorter[0] != (ShortLog{"ELM-4", 3, 2}) || done.NoKeys {
		t.Errorf("got %+v, want epoch 2 and the site's log one record shorter than signed", done)
	}
	if kept, err := os.ReadFile(done.Head); err != nil || string(kept) != string(signed) {
		t.Errorf("the head signed last is not kept as %s: %v", done.Head, err)
	}
	// A second restore, also of the first epoch's backup, begins a third.
	if done, err = Restore(context.Background(), dir, backup, options, nil); err != nil || done.Epoch != 3 {
		t.Fatalf("again: got %+v %v, want epoch 3", done, err)
	}
	if left, _ := filepath.Glob(filepath.Join(dir, restoring+"*")); len(left) > 0 {
		t.Errorf("left behind: %v", left)
	}
	s, err := Open(dir, options)
	if err != nil {
		t.Fatal(err)
	}
	r.Store = s // closed and checked by the rig
	if s.Epoch() != 3 {
		t.Errorf("got epoch %d, want 3", s.Epoch())
	}
	if note, err := s.SignedHead(); err != nil || !strings.Contains(note, "/3\n") {
		t.Errorf("the new epoch does not sign: %v %s", err, note)
	}
	rc := p.push(before, after)
	if rc[0].State != "already" || rc[1].State != "stored" || rc[1].Epoch != 3 {
		t.Errorf("sent again: got %+v", rc)
	}
	pulled, err := s.Pull(Scope{All: true, Role: "manager"}, record.Office, "", 100)
	if err != nil {
		t.Fatal(err)
	}
	var told struct {
		Kind string
		Body struct {
			Epoch int
			Logs  []LogHead
		}
	}
	for _, x := range pulled.Records {
		if err := json.Unmarshal([]byte(x.Record), &told); err != nil {
			t.Fatal(err)
		}
		if told.Kind == "book.restored" {
			break
		}
	}
	if told.Kind != "book.restored" || told.Body.Epoch != 3 || len(told.Body.Logs) < 3 {
		t.Errorf("got %+v, want book.restored with every log's size and root", told)
	}
}

func TestRestore_LeavesEverythingWhereTheBackupIsNoGood(t *testing.T) {
	r := newRig(t)
	r.site("ELM-4")
	dir, options := r.dir, Options{Now: r.clock}
	good := imageOf(t, r.Store)
	other := imageOf(t, newRig(t).Store)
	if err := r.Store.Close(); err != nil {
		t.Fatal(err)
	}
	was, err := os.ReadFile(filepath.Join(dir, BookFile))
	if err != nil {
		t.Fatal(err)
	}
	raw, err := os.ReadFile(good)
	if err != nil {
		t.Fatal(err)
	}
	torn, changed, empty := filepath.Join(t.TempDir(), "torn.db"), filepath.Join(t.TempDir(), "changed.db"), filepath.Join(t.TempDir(), "empty.db")
	i := strings.Index(string(raw), `"site.registered"`)
	bad := append([]byte(nil), raw...)
	copy(bad[i:], `"site.registreed"`)
	for name, content := range map[string][]byte{torn: raw[:len(raw)/3], changed: bad, empty: nil} {
		if err := os.WriteFile(name, content, 0o600); err != nil {
			t.Fatal(err)
		}
	}
	for name, says := range map[string]string{torn: "Nothing was changed", changed: "damaged", empty: "Nothing was changed", other: "another store", filepath.Join(dir, "no.db"): "cannot be copied"} {
		if _, err := Restore(context.Background(), dir, name, options, nil); err == nil || !strings.Contains(err.Error(), says) {
			t.Errorf("%s: got %v, want a refusal that says %q", filepath.Base(name), err, says)
		}
	}
	now, err := os.ReadFile(filepath.Join(dir, BookFile))
	if err != nil || string(now) != string(was) {
		t.Errorf("the book changed (%v)", err)
	}
	// Over a book that is damaged itself.
	if err := os.WriteFile(filepath.Join(dir, BookFile), was[:len(was)/3], 0o600); err != nil {
		t.Fatal(err)
	}
	if done, err := Restore(context.Background(), dir, good, options, nil); err != nil || done.Epoch != 2 || done.Before == "" {
		t.Errorf("over a damaged book: got %+v %v", done, err)
	}
	if r.Store, err = Open(dir, options); err != nil {
		t.Fatal(err)
	}
}
