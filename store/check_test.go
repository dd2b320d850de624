package store

import (
	"context"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"go.etcd.io/bbolt"

	"tripwell/store/proof"
)

// Whatever is changed behind the store's back is found and named.
func TestCheck_FindsWhatWasChanged(t *testing.T) {
	cases := []struct {
		name, want string
		change     func(tx *bbolt.Tx, device string) error
	}{
		{"one letter of a record", "does not belong to its bytes", func(tx *bbolt.Tx, _ string) error {
			return edit(tx, bktRec, func(v []byte) []byte { return []byte(strings.Replace(string(v), `"value":22`, `"value":21`, 1)) })
		}},
		{"the time it was received", "does not belong to its bytes", func(tx *bbolt.Tx, _ string) error {
			return edit(tx, bktRec, func(v []byte) []byte { return []byte(strings.Replace(string(v), `T08:00`, `T07:00`, 1)) })
		}},
		{"a record dropped from the end", "ids for", func(tx *bbolt.Tx, _ string) error {
			k, _ := tx.Bucket(bktRec).Cursor().Last()
			return tx.Bucket(bktRec).Delete(append([]byte(nil), k...))
		}},
		{"a record dropped from the middle", "is missing", func(tx *bbolt.Tx, _ string) error {
			return tx.Bucket(bktRec).Delete(key64(3))
		}},
		{"a leaf", "does not belong", func(tx *bbolt.Tx, _ string) error {
			return edit(tx, bktLog, func(v []byte) []byte { v[len(v)-1] ^= 1; return v })
		}},
		{"the end of a log", "end and root", func(tx *bbolt.Tx, _ string) error {
			return edit(tx, bktLogs, func(v []byte) []byte { v[len(v)-1] ^= 1; return v })
		}},
		{"an id that leads elsewhere", "does not lead", func(tx *bbolt.Tx, _ string) error {
			return edit(tx, bktID, func(v []byte) []byte { v[7] ^= 1; return v })
		}},
		{"bytes in quarantine", "not those that were refused", func(tx *bbolt.Tx, _ string) error {
			return edit(tx, bktQuar, func(v []byte) []byte { v[len(v)-1] ^= 1; return v })
		}},
		{"a refusal whose bytes are gone", "not kept", func(tx *bbolt.Tx, _ string) error {
			k, _ := tx.Bucket(bktQuar).Cursor().Last()
			return tx.Bucket(bktQuar).Delete(append([]byte(nil), k...))
		}},
		{"what a read model says", "read model", func(tx *bbolt.Tx, _ string) error {
			return tx.Bucket(bktTaken).Put([]byte("K7QM21G"), []byte{})
		}},
	}
	for _, c := range cases {
		t.Run(c.name, func(t *testing.T) {
			r := newRig(t)
			site := r.site("ELM-4")
			p := r.phone(r.person("crew", false, site))
			device := newID(r.clock())
			p.push([]byte(`{"id"`), p.make("entry.made", site, device, entry(22)))
			if report, err := r.Check(context.Background(), nil); err != nil || len(report.Problems) > 0 {
				t.Fatalf("before: %+v %v", report, err)
			}
			if err := r.db.Update(func(tx *bbolt.Tx) error { return c.change(tx, device) }); err != nil {
				t.Fatal(err)
			}
			report, err := r.Check(context.Background(), nil)
			if err != nil {
				t.Fatal(err)
			}
			if !strings.Contains(strings.Join(report.Problems, "\n"), c.want) {
				t.Errorf("got %q, want a sentence with %q", report.Problems, c.want)
			}
			r.spoilt = true
		})
	}
}

// edit changes the last value of a bucket that fn really changes.
func edit(tx *bbolt.Tx, bucket []byte, fn func(v []byte) []byte) error {
	c := tx.Bucket(bucket).Cursor()
	for k, v := c.Last(); k != nil; k, v = c.Prev() {
		if after := fn(append([]byte(nil), v...)); string(after) != string(v) {
			return tx.Bucket(bucket).Put(append([]byte(nil), k...), after)
		}
	}
	panic("nothing was changed")
}

func TestRebuild_GivesTheSame(t *testing.T) {
	r := newRig(t)
	site := r.site("ELM-4")
	p := r.phone(r.person("crew", false, site))
	for range 5 {
		p.push(p.make("entry.made", site, newID(r.clock()), entry(22)))
	}
	before, err := r.ViewHash()
	if err != nil {
		t.Fatal(err)
	}
	if err := r.db.Update(func(tx *bbolt.Tx) error { return tx.Bucket(bktCount).Put([]byte("x"), nil) }); err != nil {
		t.Fatal(err)
	}
	if spoilt, _ := r.ViewHash(); spoilt == before {
		t.Fatal("the hash does not see what was changed")
	}
	last := int64(0)
	if err := r.Rebuild(context.Background(), func(done, total int64) { last = done }); err != nil {
		t.Fatal(err)
	}
	if after, _ := r.ViewHash(); after != before || last == 0 {
		t.Errorf("got %s after %d records, want %s", after, last, before)
	}
}

// A rebuild that was cut off is done again when the store is opened.
func TestRebuild_CutOffIsDoneAgain(t *testing.T) {
	r := newRig(t)
	r.site("ELM-4")
	before, err := r.ViewHash()
	if err != nil {
		t.Fatal(err)
	}
	if err := r.db.Update(clearDerived); err != nil {
		t.Fatal(err)
	}
	r.reopen()
	if after, _ := r.ViewHash(); after != before {
		t.Errorf("got %s, want %s", after, before)
	}
}

func TestSignedHead_RefusesAShorterBook(t *testing.T) {
	r := newRig(t)
	site := r.site("ELM-4")
	old := filepath.Join(t.TempDir(), "old.db")
	f, err := os.Create(old)
	if err != nil {
		t.Fatal(err)
	}
	if _, err := r.Backup(f); err != nil {
		t.Fatal(err)
	}
	if err := f.Close(); err != nil {
		t.Fatal(err)
	}
	p := r.phone(r.person("crew", false, site))
	p.push(p.make("entry.made", site, newID(r.clock()), entry(22)))
	note, err := r.SignedHead()
	if err != nil {
		t.Fatal(err)
	}
	public, err := r.HeadKey()
	if err != nil {
		t.Fatal(err)
	}
	var roots []proof.LogRoot
	err = r.View(Scope{All: true, Role: "manager"}, func(v *View) error {
		logs, err := v.Logs()
		for _, l := range logs {
			root, err := proof.ParseHash(l.Root)
			if err != nil {
				return err
			}
			roots = append(roots, proof.LogRoot{Log: l.Log, Size: l.Size, Root: root})
		}
		return err
	})
	if err != nil {
		t.Fatal(err)
	}
	if _, err := proof.Verify(note, public, roots); err != nil {
		t.Errorf("the head does not verify: %v", err)
	}
	if err := r.Store.Close(); err != nil {
		t.Fatal(err)
	}
	image, err := os.ReadFile(old)
	if err != nil {
		t.Fatal(err)
	}
	if err := os.WriteFile(filepath.Join(r.dir, BookFile), image, 0o600); err != nil {
		t.Fatal(err)
	}
	r.open(r.dir)
	if _, err := r.SignedHead(); code(err) != "conflict" {
		t.Errorf("got %v, want conflict", err)
	}
	report, err := r.Check(context.Background(), nil)
	if err != nil || len(report.Problems) != 1 || report.Head != "" {
		t.Errorf("got %+v %v, want one problem and no head", report, err)
	}
	r.spoilt = true
}
