package store

import (
	"context"
	"encoding/json"
	"flag"
	"fmt"
	"sync"
	"testing"
	"time"

	"tripwell/store/record"
)

// What a rebuild comes to must not depend on where its slices end.
func init() {
	rebuildSlice = 7
	_ = flag.Set("rapid.checks", "40") // each makes stores of its own; the command line says otherwise where more is wanted
}

// rig is a real store in a temporary folder with a clock that tests move. On closing it must pass its own check and
// its read models must equal a rebuild.
type rig struct {
	*testing.T
	*Store
	mu      sync.Mutex
	at      time.Time
	manager Person
	serial  int
	spoilt  bool // the test broke the store on purpose
}

func newRig(t *testing.T) *rig {
	t.Helper()
	r := &rig{T: t, at: time.Date(2026, 12, 1, 8, 0, 0, 0, time.UTC)}
	r.open(t.TempDir())
	t.Cleanup(r.finish)
	r.manager = r.person("manager", true)
	return r
}

func (r *rig) open(dir string) {
	r.Helper()
	s, err := Open(dir, Options{Now: r.clock, Create: true})
	if err != nil {
		r.Fatal(err)
	}
	r.Store = s
}

func (r *rig) reopen() {
	r.Helper()
	if err := r.Store.Close(); err != nil {
		r.Fatal(err)
	}
	r.open(r.dir)
}

func (r *rig) clock() time.Time {
	r.mu.Lock()
	defer r.mu.Unlock()
	return r.at
}

func (r *rig) pass(d time.Duration) {
	r.mu.Lock()
	defer r.mu.Unlock()
	r.at = r.at.Add(d)
}

func (r *rig) finish() {
	if r.Failed() || r.spoilt {
		_ = r.Store.Close()
		return
	}
	report, err := r.Check(context.Background(), nil)
	if err != nil {
		r.Errorf("check: %v", err)
	}
	for _, p := range report.Problems {
		r.Errorf("check: %s", p)
	}
	if err := r.Store.Close(); err != nil {
		r.Error(err)
	}
}

func (r *rig) person(role string, all bool, sites ...string) Person {
	r.Helper()
	r.serial++
	p, err := r.PutPerson(context.Background(), r.ID(), Person{Name: fmt.Sprintf("%s %d", role, r.serial), Role: role, All: all, Sites: sites, Active: true})
	if err != nil {
		r.Fatal(err)
	}
	return p
}

// site registers a site and gives its id.
func (r *rig) site(code string) string {
	r.Helper()
	id := newID(r.clock())
	r.append(Draft{Kind: "site.registered", Log: id, Subject: id, By: r.manager.ID,
		Body: map[string]any{"set": map[string]any{"code": code, "name": "Site " + code, "zone": "UTC", "standard": "NEC"}}})
	return id
}

func (r *rig) append(drafts ...Draft) []Receipt {
	r.Helper()
	rc, err := r.Append(context.Background(), drafts...)
	if err != nil {
		r.Fatal(err)
	}
	return rc
}

// phone is an installation that makes records of its own.
type phone struct {
	r     *rig
	id    string
	by    Person
	n     map[string]int64
	clock uint64
}

func (r *rig) phone(by Person) *phone {
	r.Helper()
	p := &phone{r: r, id: newID(r.clock()), by: by, n: map[string]int64{}}
	if _, err := r.Enrol(context.Background(), by.ID, p.id); err != nil {
		r.Fatal(err)
	}
	return p
}

// make writes a record as a phone would.
func (p *phone) make(kind, log, subject string, body any) []byte {
	return p.makeWith(newID(p.r.clock()), kind, log, subject, body)
}

func (p *phone) makeWith(id, kind, log, subject string, body any) []byte {
	raw, err := json.Marshal(body)
	if err != nil {
		p.r.Fatal(err)
	}
	p.n[log]++
	p.clock = record.NextClock(p.clock, p.r.clock())
	return record.Write(record.Record{ID: id, Kind: kind, V: 1, Log: log, Subject: subject, At: p.r.clock(), Clock: p.clock,
		By: p.by.ID, From: p.id, N: p.n[log], Body: raw})
}

func (p *phone) push(lines ...[]byte) []Receipt {
	p.r.Helper()
	batch := make([]Incoming, len(lines))
	for i, l := range lines {
		batch[i] = Incoming{Record: l}
	}
	rc, err := p.r.Push(context.Background(), Sender{Installation: p.id}, batch)
	if err != nil {
		p.r.Fatal(err)
	}
	return rc
}

// entry is an ordinary instrument entry's body.
func entry(ms float64) map[string]any {
	return map[string]any{"form": "gfci-receptacle/instrument", "given": map[string]any{"kind": "gfci-receptacle"},
		"readings": map[string]any{"test_current_ma": map[string]any{"typed": "6.5", "unit": "mA", "value": 6.5}, "trip_time_ms": map[string]any{"value": ms, "unit": "ms"}},
		"source":   "phone"}
}

func states(rc []Receipt) []string {
	s := make([]string, len(rc))
	for i, r := range rc {
		s[i] = r.State
		if r.Code != "" {
			s[i] += " " + r.Code
		}
	}
	return s
}
