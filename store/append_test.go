package store

import (
	"context"
	"errors"
	"slices"
	"strings"
	"sync"
	"testing"

	"go.etcd.io/bbolt"

	"tripwell/store/record"
)

func TestAppend_PostingTwiceIsHarmless(t *testing.T) {
	r := newRig(t)
	site := newID(r.clock())
	d := Draft{ID: newID(r.clock()), Kind: "site.registered", Log: site, Subject: site, By: r.manager.ID,
		Body: map[string]any{"set": map[string]any{"code": "ELM-4", "name": "Elm <Court> & Co"}}}
	first, second := r.append(d), r.append(d)
	if first[0].State != "stored" || second[0].State != "already" || second[0].Pos != first[0].Pos || second[0].Log != site {
		t.Errorf("got %+v then %+v", first, second)
	}
}

func TestAppend_AllOrNothing(t *testing.T) {
	r := newRig(t)
	site := r.site("ELM-4")
	device := newID(r.clock())
	good := Draft{Kind: "device.registered", Log: site, Subject: device, By: r.manager.ID, Body: map[string]any{"set": map[string]any{"kind": "rcd"}}}
	crew := r.person("crew", false)
	cases := []struct {
		rule, code string
		second     Draft
	}{
		{"a body that breaks a rule", "invalid", Draft{Kind: "device.retired", Log: site, Subject: device, By: r.manager.ID, Body: map[string]any{}}},
		{"a person without the site", "forbidden", Draft{Kind: "device.set", Log: site, Subject: device, By: crew.ID, Body: map[string]any{"set": map[string]any{"make": "x"}}}},
		{"a kind nobody knows", "invalid", Draft{Kind: "device.painted", Log: site, Subject: device, By: r.manager.ID}},
		{"an id that is none", "invalid", Draft{ID: "7", Kind: "device.set", Log: site, Subject: device, By: r.manager.ID}},
		{"more than a record holds", "too_large", Draft{Kind: "device.set", Log: site, Subject: device, By: r.manager.ID, Body: map[string]any{"set": map[string]any{"note": strings.Repeat("x", 70_000)}}}},
		{"nobody", "invalid", Draft{Kind: "device.set", Log: site, Subject: device, Body: map[string]any{"set": map[string]any{"make": "x"}}}},
	}
	for _, c := range cases {
		t.Run(c.rule, func(t *testing.T) {
			if _, err := r.Append(context.Background(), good, c.second); code(err) != c.code {
				t.Errorf("got %v, want %s", err, c.code)
			}
		})
	}
	page, err := r.Pull(r.manager.Scope(), site, "", 0)
	if err != nil || len(page.Records) != 1 {
		t.Errorf("got %d records in the site's log, want only its registration (%v)", len(page.Records), err)
	}
}

// Records made here carry the store's count without gaps, rising stamps, and what their author could have known.
func TestAppend_GivesEnvelopes(t *testing.T) {
	r := newRig(t)
	site := r.site("ELM-4")
	device := newID(r.clock())
	p := r.phone(r.person("crew", false, site))
	p.clock = 0x7000000000000000 // a phone whose clock is years ahead
	p.push(p.make("device.registered", site, device, map[string]any{"set": map[string]any{"kind": "rcd"}}))
	set := func(v string) Draft {
		return Draft{Kind: "device.set", Log: site, Subject: device, By: r.manager.ID, Body: map[string]any{"set": map[string]any{"make": v}}}
	}
	r.append(set("a"), set("b"))
	r.append(set("c"))
	page, err := r.Pull(r.manager.Scope(), site, "", 0)
	if err != nil {
		t.Fatal(err)
	}
	var last uint64
	n := int64(0)
	for _, x := range page.Records {
		rec, f := record.Parse([]byte(x.Record))
		if f != nil {
			t.Fatal(f)
		}
		if rec.Clock <= last {
			t.Errorf("%s: stamp %x does not follow %x", rec.Kind, rec.Clock, last)
		}
		if rec.From == r.ID() {
			if n++; rec.N != n {
				t.Errorf("%s: got n %d, want %d", rec.Kind, rec.N, n)
			}
		}
		if rec.Kind == "device.set" {
			if _, seen := record.Set(rec.Body); seen != last {
				t.Errorf("got seen %x, want %x: its author read this store's pages", seen, last)
			}
		}
		last = rec.Clock
	}
	if n != 4 {
		t.Errorf("got %d records made here, want 4", n)
	}
}

func TestAppend_CrewChangeTheirOwnEntries(t *testing.T) {
	r := newRig(t)
	site := r.site("ELM-4")
	one, other := r.person("crew", false, site), r.person("crew", false, site)
	p := r.phone(one)
	id := newID(r.clock())
	p.push(p.makeWith(id, "entry.made", site, newID(r.clock()), entry(22)))
	correct := func(by Person) error {
		_, err := r.Append(context.Background(), Draft{Kind: "entry.corrected", Log: site, Subject: id, By: by.ID,
			Body: map[string]any{"entry": id, "readings": map[string]any{"trip_time_ms": 32}, "reason": "typing error"}})
		return err
	}
	for who, want := range map[*Person]string{&one: "", &other: "forbidden", &r.manager: ""} {
		if got := code(correct(*who)); got != want {
			t.Errorf("%s: got %q, want %q", who.Name, got, want)
		}
	}
}

// Calls that are committed together stand and fall alone.
func TestWriter_OneCallNeverFailsAnother(t *testing.T) {
	r := newRig(t)
	site := r.site("ELM-4")
	var wg sync.WaitGroup
	results := make([]error, 60)
	spoil := errors.New("spoilt after it had written")
	for i := range results {
		wg.Go(func() {
			switch i % 3 {
			case 0:
				_, results[i] = r.Append(context.Background(), Draft{Kind: "place.registered", Log: site, By: r.manager.ID, Body: map[string]any{"set": map[string]any{"name": "x"}}})
			case 1:
				_, results[i] = r.Append(context.Background(), Draft{Kind: "place.registered", Log: site, By: r.manager.ID})
			case 2:
				results[i] = r.do(context.Background(), 1, func(g *group) error {
					if err := g.put(bktSetting, []byte("spoilt"), []byte("x")); err != nil {
						return err
					}
					return spoil
				})
			}
		})
	}
	wg.Wait()
	for i, err := range results {
		want := []string{"", "invalid", "internal: " + spoil.Error()}[i%3]
		if got := code(err); got != want {
			t.Errorf("call %d: got %q, want %q", i, got, want)
		}
	}
	page, err := r.Pull(r.manager.Scope(), site, "", 0)
	if err != nil || len(page.Records) != 21 {
		t.Errorf("got %d records, want 21 (%v)", len(page.Records), err)
	}
	_ = r.view(func(tx *bbolt.Tx) error {
		if tx.Bucket(bktSetting).Get([]byte("spoilt")) != nil {
			t.Error("what a failed call wrote is still there")
		}
		return nil
	})
}

func TestWriter_AFullQueueSaysBusy(t *testing.T) {
	r := newRig(t)
	hold, held := make(chan struct{}), make(chan struct{})
	go func() {
		_ = r.alone(context.Background(), func() error { close(held); <-hold; return nil })
	}()
	<-held
	var wg sync.WaitGroup
	var mu sync.Mutex
	codes := map[string]int{}
	for range queueLength + 20 {
		wg.Go(func() {
			err := r.SetURL("https://tripwell.example")
			mu.Lock()
			codes[code(err)]++
			full := code(err) == "busy" && codes["busy"] == 20
			mu.Unlock()
			if full {
				close(hold)
			}
		})
	}
	wg.Wait()
	if codes["busy"] != 20 || codes[""] != queueLength {
		t.Errorf("got %v, want 20 busy and the others done", codes)
	}
}

func TestPush_NumbersAreCounted(t *testing.T) {
	r := newRig(t)
	site := r.site("ELM-4")
	p := r.phone(r.person("crew", false, site))
	device := newID(r.clock())
	one, two, three, five := p.make("entry.made", site, device, entry(21)), p.make("entry.made", site, device, entry(22)), p.make("entry.made", site, device, entry(23)), []byte(nil)
	p.n[site]++
	five = p.make("entry.made", site, device, entry(25))
	p.n[site] = 2 // a copy of the phone, made after two entries
	again := p.make("entry.made", site, device, entry(33))
	if got := states(p.push(three, one, five, two, again)); slices.Contains(got, "refused") || got[4] != "stored" {
		t.Fatalf("got %v, want all stored: a number used twice refuses nothing", got)
	}
	report, err := r.Check(context.Background(), nil)
	if err != nil || report.Gaps != 1 || report.Reused != 1 {
		t.Errorf("got %+v %v, want one gap and one number used twice", report, err)
	}
}

func TestRuns(t *testing.T) {
	r := &runs{}
	again := 0
	for _, n := range []int64{5, 6, 1, 3, 2, 9, 4, 8, 7, 4, 12} {
		if r.add(n) {
			again++
		}
	}
	if !slices.Equal(r.pairs, []int64{1, 9, 12, 12}) || r.gaps() != 2 || r.last() != 12 || again != 1 {
		t.Errorf("got %v, %d gaps, %d again", r.pairs, r.gaps(), again)
	}
	for n := int64(20); n < 20+4*maxRuns; n += 2 {
		r.add(n)
	}
	if len(r.pairs) > 2*maxRuns {
		t.Errorf("got %d runs, want at most %d", len(r.pairs)/2, maxRuns)
	}
}
