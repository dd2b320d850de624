package server

import (
	"bytes"
	"context"
	"encoding/json"
	"errors"
	"io"
	"net/http"
	"net/url"
	"strings"
	"testing"
	"time"

	"github.com/labstack/echo/v4"
	"github.com/xuri/excelize/v2"

	"tripwell/export/register"
	"tripwell/forms"
	"tripwell/store"
)

// doors gives the two ways of a command to the same store: beside a running server, and alone.
func (r *rig) doors() map[string]func(t *testing.T) *Door {
	return map[string]func(t *testing.T) *Door{
		"beside a server": func(t *testing.T) *Door {
			l, err := ListenSocket(r.dir)
			must(t, err)
			srv := &http.Server{Handler: r.server.OwnerHandler()}
			ended := make(chan error, 1)
			go func() { ended <- srv.Serve(l) }()
			d, err := OpenDoor(t.Context(), r.dir, func() (*store.Store, error) {
				return nil, errors.New("the store was opened although a server answers")
			})
			must(t, err)
			t.Cleanup(func() {
				must(t, d.Close())
				must(t, srv.Close())
				<-ended
			})
			if !d.Beside() {
				t.Error("got a door that is alone")
			}
			return d
		},
		"alone": func(t *testing.T) *Door {
			must(t, r.store.Close())
			d, err := OpenDoor(t.Context(), r.dir, func() (*store.Store, error) {
				return store.Open(r.dir, store.Options{Now: time.Now})
			})
			must(t, err)
			t.Cleanup(func() {
				must(t, d.Close())
				r.reopen()
			})
			if d.Beside() {
				t.Error("got a door beside a server")
			}
			return d
		},
	}
}

// reopen gives the rig its store back.
func (r *rig) reopen() {
	var err error
	r.store, err = store.Open(r.dir, store.Options{Now: time.Now})
	must(r.t, err)
}

func ask(t *testing.T, d *Door, path string, query url.Values) []byte {
	t.Helper()
	body, err := d.Ask(t.Context(), http.MethodGet, path, query, nil)
	must(t, err)
	defer body.Close()
	raw, err := io.ReadAll(body)
	must(t, err)
	return raw
}

func TestDoor_AnswersTheSameBesideAServerAndAlone(t *testing.T) {
	r := newRig(t, 3)
	h := r.enrol(r.crew)
	if got := h.push(h.entry(r.devices[0], 4.5).bytes(t))[0]; got.State != "stored" {
		t.Fatalf("got %+v", got)
	}
	for _, way := range []string{"beside a server", "alone"} { // alone closes the rig's store, so it comes last
		open := r.doors()[way]
		t.Run(way, func(t *testing.T) {
			d := open(t)
			t.Run("info", func(t *testing.T) {
				var info Info
				must(t, json.Unmarshal(ask(t, d, "/own/info", nil), &info))
				if info.Store == "" || info.Epoch != 1 || info.Demo {
					t.Errorf("got %+v", info)
				}
			})
			t.Run("due", func(t *testing.T) { checkDue(t, r, d) })
			t.Run("workbook", func(t *testing.T) { checkWorkbook(t, d) })
			t.Run("a wrong site is told", func(t *testing.T) {
				_, err := d.Ask(t.Context(), http.MethodGet, "/own/due", url.Values{"site": {"NOWHERE"}}, nil)
				var refusal *store.Error
				if !errors.As(err, &refusal) || refusal.Code != "not_found" || !strings.HasSuffix(refusal.Text, ".") {
					t.Errorf("got %v, want not_found with a sentence", err)
				}
			})
			t.Run("labels without an address are refused", func(t *testing.T) {
				_, err := d.Ask(t.Context(), http.MethodGet, "/own/labels", nil, nil)
				var refusal *store.Error
				if !errors.As(err, &refusal) || refusal.Code != "invalid" {
					t.Errorf("got %v, want invalid", err)
				}
			})
			t.Run("check", func(t *testing.T) {
				var report store.CheckReport
				must(t, d.Follow(t.Context(), http.MethodGet, "/own/check", nil, nil, nil, &report))
				if len(report.Problems) > 0 || report.Records == 0 {
					t.Errorf("got %+v", report)
				}
			})
			t.Run("rebuild", func(t *testing.T) { checkRebuild(t, d) })
		})
	}
}

func checkDue(t *testing.T, r *rig, d *Door) {
	raw := ask(t, d, "/own/due", url.Values{"on": {forms.DayOf(time.Now()).String()}, "site": {"KILN-LANE"}})
	lines := strings.Split(strings.TrimSpace(string(raw)), "\n")
	seen := map[string]bool{}
	for _, line := range lines {
		var fields map[string]any
		must(t, json.Unmarshal([]byte(line), &fields))
		for _, name := range []string{"device", "tag", "site", "place", "task", "due", "state", "last"} {
			if _, ok := fields[name]; !ok {
				t.Errorf("line %s lacks %s", line, name)
			}
		}
		if len(fields) != 8 || fields["site"] != "KILN-LANE" || fields["state"] == "upcoming" {
			t.Errorf("got line %s", line)
		}
		seen[fields["device"].(string)] = true
	}
	if !seen[r.devices[1]] || !seen[r.devices[2]] {
		t.Errorf("devices never tested are missing among %d lines", len(lines))
	}
}

func checkWorkbook(t *testing.T, d *Door) {
	f, err := excelize.OpenReader(bytes.NewReader(ask(t, d, "/own/workbook", url.Values{"site": {"KILN-LANE"}})))
	must(t, err)
	defer f.Close()
	if sheets := f.GetSheetList(); len(sheets) < 5 {
		t.Errorf("got sheets %v", sheets)
	}
}

func checkRebuild(t *testing.T, d *Door) {
	var got Rebuilt
	err := d.Follow(t.Context(), http.MethodPost, "/own/rebuild", nil, nil, nil, &got)
	var refusal *store.Error
	switch {
	case d.Beside() && (!errors.As(err, &refusal) || refusal.Code != "conflict"):
		t.Errorf("beside a server: got %v, want a refusal", err)
	case !d.Beside() && (err != nil || got.ViewHash == ""):
		t.Errorf("alone: got %+v, %v", got, err)
	}
}

func TestDoor_ImportsARegister(t *testing.T) {
	r := newRig(t, 0)
	r.enrol(r.crew)
	d := r.doors()["beside a server"](t)
	file := "site,building,floor,room,spot,kind,panel,circuit,rating_a\nKILN-LANE,Main,Ground floor,Kitchen,By the sink,gfci-receptacle,LP-2,14,20\n"
	var report register.Report
	must(t, d.Follow(t.Context(), http.MethodPost, "/own/import/register", nil, strings.NewReader(file), nil, &report))
	if report.Added != 1 {
		t.Errorf("got %+v, want one device added", report)
	}
	must(t, d.Follow(t.Context(), http.MethodPost, "/own/import/register", nil, strings.NewReader(file), nil, &report))
	if report.Added != 0 || report.Unchanged != 1 {
		t.Errorf("the same file again: got %+v, want nothing added", report)
	}
}

func TestDoor_WithoutAStoreSaysSo(t *testing.T) {
	_, err := OpenDoor(t.Context(), t.TempDir(), func() (*store.Store, error) {
		return nil, refuse(codeNotFound, "data", "There is no store.")
	})
	var refusal *store.Error
	if !errors.As(err, &refusal) || refusal.Code != "not_found" {
		t.Errorf("got %v, want the refusal of opening", err)
	}
}

func TestDoor_ALongAnswerCanBeGivenUp(t *testing.T) {
	s, err := New(nil, Options{Alone: true})
	must(t, err)
	gone := make(chan struct{})
	table := []route{{get, "/own/long", owner, func(s *Server, c echo.Context) error {
		return s.work(c, func(ctx context.Context, progress func(done, total int64)) (any, error) {
			progress(1, 2)
			<-ctx.Done()
			close(gone)
			return nil, ctx.Err()
		})
	}, 0}}
	p := newPipes()
	srv := &http.Server{Handler: s.face(table)}
	ended := make(chan error, 1)
	go func() { ended <- srv.Serve(p) }()
	d := &Door{client: &http.Client{Transport: &http.Transport{DialContext: p.dial}}}
	ctx, stop := context.WithCancel(t.Context())
	var told int64
	err = d.Follow(ctx, http.MethodGet, "/own/long", nil, nil, func(done, total int64) { told = done; stop() }, &struct{}{})
	if !errors.Is(err, context.Canceled) || told != 1 {
		t.Errorf("got %v after %d, want cancelled after the first progress", err, told)
	}
	select {
	case <-gone:
	case <-time.After(5 * time.Second):
		t.Error("the work goes on although nobody listens")
	}
	must(t, srv.Close())
	<-ended
}
