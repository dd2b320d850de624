package server

import (
	"bytes"
	"context"
	"encoding/json"
	"fmt"
	"io"
	"math/rand/v2"
	"net"
	"net/http"
	"os/exec"
	"path/filepath"
	"sync"
	"sync/atomic"
	"testing"
	"time"

	"tripwell/store"
)

const (
	killRounds  = 20
	killPhones  = 4
	killBatch   = 7
	killDevices = 40
)

// TestKill_NoAcknowledgedRecordIsLost kills a real server (SIGKILL) at random moments while phones push. After every
// round each record it acknowledged is there with its bytes, the store passes the check, and a rebuild gives the same
// read models. What was not acknowledged is sent again in the next round, as a phone does.
func TestKill_NoAcknowledgedRecordIsLost(t *testing.T) {
	if testing.Short() {
		t.Skip("kills a server twenty times")
	}
	r := newRig(t, killDevices)
	phones := make([]*killPhone, killPhones)
	for i := range phones {
		phones[i] = &killPhone{handset: r.handset(r.crew)}
	}
	must(t, r.store.Close())
	binary := buildTripwell(t)
	acked := map[string]string{}
	for round := range killRounds {
		address := freeAddress(t)
		serve := exec.Command(binary, "serve", "--data", r.dir, "--listen", address)
		var said bytes.Buffer
		serve.Stdout, serve.Stderr = &said, &said
		must(t, serve.Start())
		waitFor(t, address)
		var wg sync.WaitGroup
		for _, p := range phones {
			wg.Go(func() { p.pushUntilCut("http://" + address) })
		}
		waitForAcks(t, phones, 1+rand.IntN(60), &said)
		time.Sleep(time.Duration(rand.IntN(20_000)) * time.Microsecond)
		must(t, serve.Process.Kill())
		_ = serve.Wait()
		wg.Wait()
		for _, p := range phones {
			if p.failed != nil {
				t.Fatalf("round %d: %v", round, p.failed)
			}
			for id, rec := range p.acked {
				acked[id] = rec
			}
		}
		checkKilled(t, r, acked, round)
	}
	t.Logf("%d records acknowledged over %d kills", len(acked), killRounds)
	if len(acked) < killRounds {
		t.Error("hardly anything was acknowledged: the kills come too early to prove anything")
	}
	var err error
	r.store, err = store.Open(r.dir, store.Options{Now: time.Now})
	must(t, err) // the rig closes it
}

// waitForAcks waits until that many batches have been acknowledged in this round, so that a slow machine is not killed
// before it did anything.
func waitForAcks(t *testing.T, phones []*killPhone, batches int, said *bytes.Buffer) {
	t.Helper()
	var before int64
	for _, p := range phones {
		before += p.batches.Load()
	}
	for began := time.Now(); time.Since(began) < 30*time.Second; time.Sleep(time.Millisecond) {
		var now int64
		for _, p := range phones {
			now += p.batches.Load()
		}
		if now-before >= int64(batches) {
			return
		}
	}
	t.Fatalf("the server does not acknowledge %d batches in 30 s; it said:\n%s", batches, said)
}

func checkKilled(t *testing.T, r *rig, acked map[string]string, round int) {
	t.Helper()
	s, err := store.Open(r.dir, store.Options{Now: time.Now})
	must(t, err)
	defer func() { must(t, s.Close()) }()
	must(t, s.View(ownerScope, func(v *store.View) error {
		for id, want := range acked {
			got, _, err := v.Record(id)
			if err != nil || string(got) != want {
				t.Fatalf("round %d: acknowledged record %s: got %q (%v), want %q", round, id, got, err, want)
			}
		}
		return nil
	}))
	report, err := s.Check(context.Background(), nil)
	must(t, err)
	for _, p := range report.Problems {
		t.Errorf("round %d: check: %s", round, p)
	}
	before, err := s.ViewHash()
	must(t, err)
	must(t, s.Rebuild(context.Background(), nil))
	after, err := s.ViewHash()
	must(t, err)
	if before != after {
		t.Errorf("round %d: the read models hash to %s, rebuilt to %s", round, before, after)
	}
}

// killPhone keeps what it still has to send, as a phone's tray does.
type killPhone struct {
	*handset
	tray    []string
	acked   map[string]string
	failed  error
	batches atomic.Int64
}

func (p *killPhone) pushUntilCut(url string) {
	client := &http.Client{Transport: &http.Transport{}}
	defer client.CloseIdleConnections()
	if p.acked == nil {
		p.acked = map[string]string{}
	}
	for {
		for len(p.tray) < killBatch {
			p.tray = append(p.tray, p.entry(p.r.devices[rand.IntN(len(p.r.devices))], 4.5).bytes(p.r.t))
		}
		req, err := http.NewRequest(http.MethodPost, url+"/exchange/push", bytes.NewReader(pushBody(p.r.t, p.tray...)))
		if err != nil {
			p.failed = err
			return
		}
		req.Header.Set("Authorization", "Bearer "+p.token)
		res, err := client.Do(req)
		if err != nil {
			return // cut
		}
		if res.StatusCode != http.StatusOK {
			text, _ := io.ReadAll(res.Body)
			_ = res.Body.Close()
			p.failed = fmt.Errorf("push: %d %s", res.StatusCode, text)
			return
		}
		var got receiptsAnswer
		err = json.NewDecoder(res.Body).Decode(&got)
		_ = res.Body.Close()
		if err != nil {
			return // cut in the middle of the answer
		}
		for i, receipt := range got.Receipts {
			if receipt.State != "stored" && receipt.State != "already" {
				p.failed = &store.Error{Code: receipt.Code, Text: receipt.State + ": " + receipt.Text}
				return
			}
			p.acked[receipt.ID] = p.tray[i]
		}
		p.tray = nil
		p.batches.Add(1)
	}
}

func buildTripwell(t *testing.T) string {
	t.Helper()
	binary := filepath.Join(t.TempDir(), "tripwell")
	build := exec.Command("go", "build", "-o", binary, "tripwell/cmd/tripwell")
	if out, err := build.CombinedOutput(); err != nil {
		t.Fatalf("build: %v\n%s", err, out)
	}
	return binary
}

func freeAddress(t *testing.T) string {
	t.Helper()
	l, err := net.Listen("tcp", "127.0.0.1:0")
	must(t, err)
	defer l.Close()
	return l.Addr().String()
}

func waitFor(t *testing.T, address string) {
	t.Helper()
	for range 200 {
		if c, err := net.Dial("tcp", address); err == nil {
			_ = c.Close()
			return
		}
		time.Sleep(25 * time.Millisecond)
	}
	t.Fatalf("the server does not answer at %s", address)
}
