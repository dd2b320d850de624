package store

import (
	"bytes"
	"context"
	"errors"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"
	"time"
)

func TestPush_BadRecordsNeverFailTheirNeighbours(t *testing.T) {
	r := newRig(t)
	site := r.site("ELM-4")
	p := r.phone(r.person("crew", false, site))
	elsewhere := r.site("OAK-1")
	device := newID(r.clock())
	first := p.make("entry.made", site, device, entry(22))
	if got := states(p.push(first)); !slices.Equal(got, []string{"stored"}) {
		t.Fatalf("got %v, want stored", got)
	}
	reused := bytes.Replace(first, []byte(`"value":22`), []byte(`"value":23`), 1)
	huge := entry(20)
	huge["note"] = strings.Repeat("x", 70_000)
	batch := [][]byte{
		[]byte(`{"id":`),
		bytes.Replace(p.make("entry.made", site, device, entry(21)), []byte(`"v":1`), []byte(`"v":1,"v":1`), 1),
		p.make("entry.dreamt", site, device, entry(21)),
		p.make("entry.made", site, device, huge),
		p.make("entry.made", elsewhere, device, entry(21)),
		reused,
		p.make("site.set", site, site, map[string]any{"set": map[string]any{"name": "Mine"}}),
		p.make("grant.set", "office", p.by.ID, map[string]any{"role": "manager", "all": true, "sites": []string{}, "active": true}),
		p.make("entry.made", site, device, entry(24)),
		first,
	}
	want := []string{"refused malformed", "refused duplicate_name", "refused unknown_kind", "refused too_large", "refused not_permitted",
		"refused id_reused", "refused not_permitted", "refused not_permitted", "stored", "already"}
	rc := p.push(batch...)
	if got := states(rc); !slices.Equal(got, want) {
		t.Fatalf("got  %q\nwant %q", got, want)
	}
	for _, x := range rc {
		if x.State == "refused" && (len(x.Text) < 20 || !strings.HasSuffix(x.Text, ".")) {
			t.Errorf("refusal %s says %q, want a sentence", x.Code, x.Text)
		}
	}
	if got := states(p.push(batch...)); !slices.Equal(got[:8], want[:8]) || got[8] != "already" {
		t.Errorf("sent twice: got %q", got)
	}
	err := r.View(Scope{All: true, Role: "manager"}, func(v *View) error {
		all, err := v.Refused()
		if len(all) != 8 {
			t.Errorf("got %d refusals, want 8: the same bytes are refused once", len(all))
		}
		for _, x := range all {
			if !slices.ContainsFunc(batch, func(b []byte) bool { return bytes.Equal(b, x.Bytes) }) {
				t.Errorf("refusal %s does not keep the exact bytes", x.Code)
			}
		}
		return err
	})
	if err != nil {
		t.Fatal(err)
	}
}

func TestPush_FaultsOfTheDisk(t *testing.T) {
	r := newRig(t)
	site := r.site("ELM-4")
	p := r.phone(r.person("crew", false, site))
	line := p.make("entry.made", site, newID(r.clock()), entry(22))
	send := func() ([]Receipt, error) {
		return r.Push(context.Background(), Sender{Installation: p.id}, []Incoming{{Record: line}})
	}
	r.faults.commit = func() error { return errors.New("no space left on device") }
	var e *Error
	if _, err := send(); !errors.As(err, &e) || e.Code != "unavailable" {
		t.Fatalf("got %v, want unavailable", err)
	}
	r.faults.commit = nil
	r.faults.answer = func() error { return errors.New("answer lost") }
	if _, err := send(); err == nil {
		t.Fatal("got no error, want a lost answer")
	}
	r.faults.answer = nil
	rc, err := send()
	if err != nil || rc[0].State != "already" {
		t.Fatalf("got %v %v, want already: the record was kept, only the answer was lost", rc, err)
	}
}

// A full disk: what does not fit is not kept, what was kept stays, and the store goes on when there is room again.
func TestPush_FullDisk(t *testing.T) {
	r := newRig(t)
	site := r.site("ELM-4")
	p := r.phone(r.person("crew", false, site))
	body := entry(22)
	body["note"] = strings.Repeat("x", 60_000)
	st, err := os.Stat(filepath.Join(r.dir, BookFile))
	if err != nil {
		t.Fatal(err)
	}
	r.db.MaxSize = int(st.Size())
	var lines [][]byte
	full := false
	for range 10 {
		line := p.make("entry.made", site, newID(r.clock()), body)
		lines = append(lines, line)
		_, err := r.Push(context.Background(), Sender{Installation: p.id}, []Incoming{{Record: line}})
		if err != nil {
			if full = code(err) == "unavailable"; !full {
				t.Fatalf("got %v, want unavailable", err)
			}
			break
		}
	}
	if !full {
		t.Fatal("the disk never got full")
	}
	if page, err := r.Pull(p.by.Scope(), site, "", 0); err != nil || len(page.Records) != len(lines) {
		t.Errorf("got %d records %v, want the %d that fitted", len(page.Records), err, len(lines))
	}
	r.db.MaxSize = 0
	want := slices.Repeat([]string{"already"}, len(lines))
	want[len(lines)-1] = "stored"
	if got := states(p.push(lines...)); !slices.Equal(got, want) {
		t.Errorf("got %v, want %v", got, want)
	}
}

func TestPull_GivesTheExactBytes(t *testing.T) {
	r := newRig(t)
	site := r.site("ELM-4")
	p := r.phone(r.person("crew", false, site))
	var lines [][]byte
	for i := range 25 {
		lines = append(lines, p.make("entry.made", site, newID(r.clock()), entry(float64(i)+0.5)))
	}
	p.push(lines...)
	var got [][]byte
	cursor := ""
	for {
		page, err := r.Pull(p.by.Scope(), site, cursor, 10)
		if err != nil {
			t.Fatal(err)
		}
		for _, x := range page.Records {
			got = append(got, []byte(x.Record))
		}
		cursor = page.Next
		if !page.More {
			break
		}
	}
	if len(got) != 26 || !bytes.Equal(got[25], lines[24]) { // site.registered stands first
		t.Fatalf("got %d records, want 26 with the bytes that were pushed", len(got))
	}
	if page, _ := r.Pull(p.by.Scope(), "office", "", 10); !page.NotYours {
		t.Error("crew may not pull office")
	}
	other := newRig(t)
	if page, _ := other.Pull(Scope{All: true}, site, cursor, 10); !page.Snapshot {
		t.Error("a cursor of another store must answer snapshot")
	}
}

func TestAccess_EndedInBetweenIsNoRefusal(t *testing.T) {
	r := newRig(t)
	site := r.site("ELM-4")
	crew := r.person("crew", false, site)
	p := r.phone(crew)
	r.pass(time.Hour)
	before := p.make("entry.made", site, newID(r.clock()), entry(22))
	r.pass(time.Hour)
	crew.Sites = nil
	if _, err := r.PutPerson(context.Background(), r.manager.ID, crew); err != nil {
		t.Fatal(err)
	}
	r.pass(time.Hour)
	after := p.make("entry.made", site, newID(r.clock()), entry(22))
	want := []string{"stored", "refused not_permitted"}
	if got := states(p.push(before, after)); !slices.Equal(got, want) {
		t.Errorf("got %q, want %q", got, want)
	}
}

func TestPush_ALogWithoutASiteIsRefused(t *testing.T) {
	r := newRig(t)
	site := r.site("ELM-5")
	p := r.phone(r.person("manager", true))
	astray := p.make("entry.made", newID(r.clock()), newID(r.clock()), entry(22))
	home := p.make("entry.made", site, newID(r.clock()), entry(22))
	want := []string{"refused wrong_log", "stored"}
	if got := states(p.push(astray, home)); !slices.Equal(got, want) {
		t.Errorf("got %q, want %q", got, want)
	}
}
