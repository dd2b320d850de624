package store

import (
	"bytes"
	"context"
	"crypto/sha256"
	"encoding/hex"
	"encoding/json"
	"errors"
	"fmt"
	"log/slog"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"go.etcd.io/bbolt"

	"tripwell/forms"
	"tripwell/store/record"
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

// A file whose read models another build wrote is read by none of its rows: they are computed anew, and that is said.
func TestOpen_ReadModelsOfAnotherBuild(t *testing.T) {
	r := newRig(t)
	site := r.site("ELM")
	device := r.device(site, map[string]any{"kind": "gfci-receptacle"})
	r.put("entry.made", site, device, button("no", "no"))
	want, err := r.ViewHash()
	if err != nil {
		t.Fatal(err)
	}
	err = r.db.Update(func(tx *bbolt.Tx) error { // rows of another shape, buckets missing and too many
		k, _ := tx.Bucket(bktWork).Cursor().First()
		return errors.Join(tx.Bucket(bktWork).Put(bytes.Clone(k), []byte("another shape")), tx.DeleteBucket(bktGranted), tx.DeleteBucket(bktDiffer),
			tx.Bucket(bktSum).Put([]byte("stray"), nil), tx.Bucket(bktMeta).Put(metaModel, key64(1)))
	})
	if err != nil {
		t.Fatal(err)
	}
	if err := r.Store.Close(); err != nil {
		t.Fatal(err)
	}
	var log bytes.Buffer
	if r.Store, err = Open(r.dir, Options{Now: r.clock, Log: slog.New(slog.NewTextHandler(&log, nil))}); err != nil {
		t.Fatal(err)
	}
	if got, err := r.ViewHash(); err != nil || got != want {
		t.Errorf("got hash %s %v, want %s", got, err, want)
	}
	if s := r.sums(site, forms.DayOf(r.clock())); s.Failed != 1 {
		t.Errorf("got %+v, want one failed", s)
	}
	if !strings.Contains(log.String(), "written=0.1") || !strings.Contains(log.String(), "computed the pages anew") {
		t.Errorf("logged %q, want what is done and that it is done", log.String())
	}
	log.Reset()
	if err := r.Store.Close(); err != nil {
		t.Fatal(err)
	}
	if r.Store, err = Open(r.dir, Options{Now: r.clock, Log: slog.New(slog.NewTextHandler(&log, nil))}); err != nil || log.Len() > 0 {
		t.Errorf("opened again: %v, logged %q, want nothing", err, log.String())
	}
}

// Where the book itself cannot be folded, opening says so and changes nothing of the book.
func TestOpen_RefusesWhatItCannotCompute(t *testing.T) {
	r := newRig(t)
	r.spoilt = true
	site := r.site("ELM")
	err := r.db.Update(func(tx *bbolt.Tx) error {
		g := newGroup(r.Store, tx)
		line := record.Write(record.Record{ID: newID(r.clock()), Kind: "entry.made", V: 1, Log: site, Subject: site, At: r.clock(), Clock: 1 << 40, By: site, From: site, N: 1,
			Body: json.RawMessage(`{"form":7}`)})
		g.seq++
		return errors.Join(g.recs.Put(key64(g.seq), stampFor(line, record.Stamp{Received: r.clock()}).at(1, 99)), tx.Bucket(bktMeta).Put(metaModel, key64(1)))
	})
	if err != nil {
		t.Fatal(err)
	}
	if err := r.Store.Close(); err != nil {
		t.Fatal(err)
	}
	_, err = Open(r.dir, Options{Now: r.clock})
	if code(err) != "unavailable" || !strings.Contains(err.Error(), "another build") {
		t.Errorf("got %v, want unavailable and why", err)
	}
	if _, again := Open(r.dir, Options{Now: r.clock}); code(again) != "unavailable" {
		t.Errorf("opened again: %v", again)
	}
}

// TestModelVersion_GrowsWithTheModels holds the models of a fixed book against what they hashed to when modelVersion was
// last raised. When it fails, raise modelVersion and write both down here: files written before are then computed anew.
// The book asks for nothing shipped, so new forms, limits and plans leave it alone.
func TestModelVersion_GrowsWithTheModels(t *testing.T) {
	const version, want = 5, "b5d3bcf744547351e9ab348fa72f42e470921e67b8aa09f87267ac9d32f026db"
	at := time.Date(2026, 3, 2, 9, 0, 0, 0, time.UTC)
	serial := 0
	id := func() string {
		serial++
		return record.NewID(at, [10]byte{9: byte(serial)})
	}
	site, place, circuit, device, other, person := id(), id(), id(), id(), id(), id()
	from := id()
	n := map[string]int64{}
	var lines []Incoming
	put := func(kind, log, subject, body string) string {
		at = at.Add(time.Hour)
		n[log]++
		r := record.Record{ID: id(), Kind: kind, V: 1, Log: log, Subject: subject, At: at, Clock: record.NextClock(0, at), By: person, From: from, N: n[log], Body: json.RawMessage(body)}
		lines = append(lines, Incoming{Record: record.Write(r)})
		return r.ID
	}
	put("grant.set", record.Office, person, `{"role":"crew","all":false,"sites":["`+site+`"],"active":true}`)
	put("site.registered", site, site, `{"set":{"code":"ELM","name":"Elm","zone":"UTC","standard":"NEC"}}`)
	put("plan.set", site, PlanSubject("own"), `{"plan":{"plan":"own","revision":1,"task":"own-check","kinds":["own-kind"],"every":"P1M","duty":"once-each-period","grace":"P3D","in_force":"2020-01-01"}}`)
	put("circuit.set", site, circuit, `{"set":{"numbers":["14","16"],"supply":"grounded"}}`)
	put("place.registered", site, place, `{"set":{"building":"Main","name":"By the sink"}}`)
	put("device.registered", site, device, `{"set":{"kind":"own-kind","place":"`+place+`","circuit":"`+circuit+`"}}`)
	put("device.registered", site, other, `{"set":{"kind":"own-kind"}}`)
	put("tag.bound", site, place, `{"tag":"K7QM2P3"}`)
	failed := put("entry.imported", site, device, `{"form":"own-kind/own-check","day":"2026-02-01","result":"fail"}`)
	put("entry.imported", site, device, `{"form":"own-kind/own-check","day":"2026-02-02","result":"pass"}`)
	measured := put("entry.made", site, other, `{"form":"own-kind/own-check","readings":{"trip_time_ms":{"value":22,"unit":"ms"}},"source":"phone"}`)
	put("entry.corrected", site, measured, `{"entry":"`+measured+`","readings":{"trip_time_ms":{"value":24,"unit":"ms"}},"reason":"misread"}`)
	put("entry.withdrawn", site, failed, `{"entry":"`+failed+`","reason":"another outlet"}`)
	put("entry.imported", site, other, `{"form":"own-kind/own-check","day":"2026-02-03","result":"fail"}`)
	put("device.retired", site, device, `{"reason":"worn","on":"2026-03-02"}`)
	round := id()
	put("round.made", site, round, `{"set":{"stops":["`+other+`/own-check"],"day":"2026-03-03"}}`)
	put("round.closed", site, round, `{"day":"2026-03-03","done":1}`)
	put("round.accepted", site, round, `{"note":"Seen"}`)
	s := heldStore(t, lines, 100, at.Add(time.Hour))
	all := sha256.New()
	err := s.view(func(tx *bbolt.Tx) error {
		_, each, err := viewHash(tx)
		for _, name := range derivedBuckets() {
			if string(name) != string(bktRule) && string(name) != string(bktCount) {
				fmt.Fprintln(all, string(name), each[string(name)])
			}
		}
		return err
	})
	if err != nil {
		t.Fatal(err)
	}
	if got := hex.EncodeToString(all.Sum(nil)); got != want || modelVersion != version {
		t.Errorf("version %d of the models gives %s; version %d gave %s", modelVersion, got, version, want)
	}
}
