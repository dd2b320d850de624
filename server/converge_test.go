package server

import (
	"context"
	"encoding/json"
	"flag"
	"fmt"
	"math/rand/v2"
	"net/http"
	"net/http/httptest"
	"os"
	"slices"
	"strings"
	"testing"
	"time"

	"tripwell/store"
)

// replica is a phone reduced to its duties: a tray whose records leave on their own receipt, and a copy of the log that is
// pulled by cursor. Records, cursor and counter outlive a restart; what is under way does not.
type replica struct {
	h      *handset
	tray   []envelopeLine
	kept   []envelopeLine
	cursor string
	log    []string // records as pulled, in order
	lost   int      // answers that never came
}

type envelopeLine struct{ id, line string }

// ask calls a handler without a network. lost: the server decided and its answer never came.
func (p *replica) ask(face http.Handler, method, path string, body []byte, lost bool) (answer, bool) {
	req := p.h.request(method, path, body)
	rec := httptest.NewRecorder()
	face.ServeHTTP(rec, req)
	if lost {
		p.lost++
	}
	return answer{rec.Code, rec.Header(), rec.Body.String()}, !lost
}

func (p *replica) drain(t testing.TB, face http.Handler, rng *rand.Rand, faults bool) {
	for tries := 0; len(p.tray) > 0 && tries < 8; tries++ {
		batch := p.tray[:1+rng.IntN(len(p.tray))]
		lines := make([]string, len(batch))
		for i, r := range batch {
			lines[i] = r.line
		}
		res, came := p.ask(face, http.MethodPost, "/exchange/push", pushBody(t, lines...), faults && rng.IntN(3) == 0)
		if !came {
			continue // a lost answer: everything stays and is sent again
		}
		if res.status != http.StatusOK {
			t.Fatalf("push: got %d %s", res.status, res.body)
		}
		for _, receipt := range receiptsOf(t, res, len(batch)) {
			i := slices.IndexFunc(p.tray, func(r envelopeLine) bool { return r.id == receipt.ID })
			if i < 0 || receipt.State == "refused" {
				t.Fatalf("receipt %+v for what is not in the tray", receipt)
			}
			p.kept = append(p.kept, p.tray[i])
			p.tray = slices.Delete(p.tray, i, i+1)
		}
	}
}

func (p *replica) pull(t testing.TB, face http.Handler, log string, rng *rand.Rand, faults bool) {
	for range 40 {
		path := fmt.Sprintf("/exchange/pull?log=%s&after=%s&limit=%d", log, p.cursor, 1+rng.IntN(20))
		res, came := p.ask(face, http.MethodGet, path, nil, faults && rng.IntN(4) == 0)
		if !came {
			return
		}
		var page pullAnswer
		must(t, json.Unmarshal([]byte(res.body), &page))
		for _, r := range page.Records {
			if int64(len(p.log)+1) != r.Pos {
				t.Fatalf("got place %d after %d records: a gap or a double", r.Pos, len(p.log))
			}
			p.log = append(p.log, r.Record)
		}
		p.cursor = page.Next // with the data, never before it
		if !page.More {
			return
		}
	}
}

// convergeRuns asks for more than the thousand runs: go test ./server -run Converge -converge-runs 100000
var convergeRuns = flag.Int("converge-runs", 1000, "runs of the convergence test")

// memoryFolder is a folder in memory where the system has one, so that runs are not spent waiting for a disk; what a disk does to a
// store is the kill test's matter. Without one it is an ordinary folder.
func memoryFolder(t *testing.T) string {
	t.Helper()
	dir, err := os.MkdirTemp("/dev/shm", "tripwell-converge-")
	if err != nil {
		return t.TempDir()
	}
	t.Cleanup(func() { _ = os.RemoveAll(dir) })
	return dir
}

// Several phones write, lose answers, and are joined by a server that is closed and opened again: at the end each record is
// in the log once, every phone's copy is the log, and neither n nor pos has a gap.
func TestConverge_PhonesAndAServerThatRestarts(t *testing.T) {
	runs := *convergeRuns
	if testing.Short() {
		runs = 50
	}
	// One store serves all runs, each with a site of its own: to make a store costs more than a run.
	dir := memoryFolder(t)
	open := func() (*store.Store, http.Handler) {
		s, err := store.Open(dir, store.Options{Now: time.Now, Create: true})
		must(t, err)
		srv, err := New(s, Options{})
		must(t, err)
		return s, srv.Handler()
	}
	s, face := open()
	defer func() { must(t, s.Close()) }()
	ctx := context.Background()
	manager, err := s.PutPerson(ctx, "", store.Person{Name: "Manager 1", Role: "manager", All: true, Active: true})
	must(t, err)
	phones := make([]*replica, 3)
	for i := range phones {
		h := &handset{r: &rig{t: t}, installation: newID(), person: manager.ID}
		h.token, err = s.Enrol(ctx, manager.ID, h.installation)
		must(t, err)
		phones[i] = &replica{h: h}
	}
	restarts, lost := 0, 0
	for run := range runs {
		rng := rand.New(rand.NewPCG(20261201, uint64(run)))
		site, device := newID(), newID()
		_, err := s.Append(ctx, store.Draft{Kind: "site.registered", Log: site, Subject: site, By: manager.ID, Body: set{"set": set{"code": fmt.Sprintf("R-%d", run), "name": "Run", "zone": "UTC", "standard": "NEC"}}})
		must(t, err)
		made := map[string]bool{}
		for _, p := range phones {
			*p = replica{h: p.h, lost: p.lost}
			p.h.n.Store(0)
		}
		for range 4 + rng.IntN(10) {
			p := phones[rng.IntN(len(phones))]
			switch rng.IntN(4) {
			case 0, 1:
				kind, body := "device.set", any(set{"set": set{"note": fmt.Sprint(rng.IntN(9))}})
				if rng.IntN(3) == 0 {
					kind, body = "entry.made", entryBody(4+rng.Float64()*3)
				}
				e := p.h.record(kind, site, device, body)
				p.tray = append(p.tray, envelopeLine{e.ID, e.bytes(t)})
				made[e.ID] = true
			case 2:
				p.drain(t, face, rng, true)
			case 3:
				p.pull(t, face, site, rng, true)
			}
			if rng.IntN(200) == 0 { // some dozens of times in all
				must(t, s.Close())
				s, face = open()
				restarts++
			}
		}
		for _, p := range phones {
			p.drain(t, face, rng, false)
		}
		for _, p := range phones {
			p.pull(t, face, site, rng, false)
		}
		agree(t, run, site, phones, made)
	}
	for _, p := range phones {
		lost += p.lost
	}
	t.Logf("%d runs, %d restarts, %d lost answers", runs, restarts, lost)
	report, err := s.Check(ctx, nil)
	must(t, err)
	if len(report.Problems) > 0 || report.Gaps != 0 || report.Reused != 0 {
		t.Errorf("check: %d gaps in n, %d n used twice, problems %v", report.Gaps, report.Reused, report.Problems)
	}
}

func agree(t *testing.T, run int, site string, phones []*replica, made map[string]bool) {
	t.Helper()
	first := phones[0].log
	seen := map[string]int{}
	for _, line := range first {
		var env struct{ ID, Kind string }
		must(t, json.Unmarshal([]byte(line), &env))
		if env.Kind != "site.registered" {
			seen[env.ID]++
		}
	}
	for id := range made {
		if seen[id] != 1 {
			t.Fatalf("run %d: record %s is in the log of %s %d times, want once", run, id, site, seen[id])
		}
	}
	if len(seen) != len(made) {
		t.Fatalf("run %d: %d records in the log, %d were made", run, len(seen), len(made))
	}
	for i, p := range phones {
		if len(p.tray) > 0 || strings.Join(p.log, "\n") != strings.Join(first, "\n") {
			t.Fatalf("run %d: phone %d has %d records left to send and a copy of %d, the first one's is %d", run, i, len(p.tray), len(p.log), len(first))
		}
	}
}
