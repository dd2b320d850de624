package server

import (
	"bytes"
	"context"
	"encoding/json"
	"fmt"
	"io"
	"log/slog"
	"net"
	"net/http"
	"net/http/cookiejar"
	"strings"
	"sync/atomic"
	"testing"
	"time"

	"github.com/google/uuid"

	"tripwell/store"
)

// rig is a real store with a site, served over real HTTP on loopback. It checks the store when the test ends.
type rig struct {
	t       testing.TB
	dir     string
	store   *store.Store
	server  *Server
	url     string
	manager store.Person
	crew    store.Person
	auditor store.Person
	site    string
	devices []string
}

func newRig(t testing.TB, devices int) *rig {
	t.Helper()
	r := &rig{t: t, dir: t.TempDir()}
	var err error
	r.store, err = store.Open(r.dir, store.Options{Now: time.Now, Create: true})
	must(t, err)
	r.people()
	r.site = newID()
	r.append(store.Draft{Kind: "site.registered", Log: r.site, Subject: r.site, Body: set{"set": set{"code": "KILN-LANE", "name": "Kiln Lane Day Clinic", "zone": "America/Chicago", "standard": "NEC"}}})
	r.crew = r.person("Crew 1", "crew", r.site)
	r.auditor = r.person("Auditor 1", "auditor", r.site)
	r.devices = r.registerDevices(devices)
	r.serve()
	t.Cleanup(r.close)
	return r
}

// set is a body or a part of one.
type set = map[string]any

func (r *rig) people() {
	var err error
	r.manager, err = r.store.PutPerson(context.Background(), "", store.Person{Name: "Manager 1", Role: "manager", All: true, Active: true})
	must(r.t, err)
}

func (r *rig) person(name, role string, sites ...string) store.Person {
	p, err := r.store.PutPerson(context.Background(), r.manager.ID, store.Person{Name: name, Role: role, Sites: sites, Active: true})
	must(r.t, err)
	return p
}

func (r *rig) append(drafts ...store.Draft) {
	r.t.Helper()
	for i := range drafts {
		if drafts[i].By == "" {
			drafts[i].By = r.manager.ID
		}
	}
	_, err := r.store.Append(context.Background(), drafts...)
	must(r.t, err)
}

func (r *rig) registerDevices(n int) []string {
	var ids []string
	var drafts []store.Draft
	for i := range n {
		place, device := newID(), newID()
		drafts = append(drafts,
			store.Draft{Kind: "place.registered", Log: r.site, Subject: place, Body: set{"set": set{"building": "Main", "floor": "Ground floor", "room": fmt.Sprintf("Room %d", i/4+1), "name": fmt.Sprintf("Outlet %d", i%4+1), "order": i}}},
			store.Draft{Kind: "device.registered", Log: r.site, Subject: device, Body: set{"set": set{"kind": "gfci-receptacle", "place": place, "rating_a": 20, "installed": "2024-03-01"}}})
		ids = append(ids, device)
	}
	for len(drafts) > 0 {
		k := min(len(drafts), 400)
		r.append(drafts[:k]...)
		drafts = drafts[k:]
	}
	return ids
}

func (r *rig) serve() {
	var err error
	r.server, err = New(r.store, Options{Log: slog.New(slog.NewTextHandler(testLog{r.t}, &slog.HandlerOptions{Level: slog.LevelError, ReplaceAttr: shorter}))})
	must(r.t, err)
	l, err := net.Listen("tcp", "127.0.0.1:0")
	must(r.t, err)
	ctx, stop := context.WithCancel(context.Background())
	ended := make(chan error, 1)
	go func() { ended <- r.server.Serve(ctx, l, nil) }()
	r.url = "http://" + l.Addr().String()
	r.t.Cleanup(func() {
		stop()
		must(r.t, <-ended)
	})
}

// close holds the rule that every test leaves a sound store whose read models are what a rebuild gives.
func (r *rig) close() {
	if r.t.Failed() {
		_ = r.store.Close()
		return
	}
	report, err := r.store.Check(context.Background(), nil)
	must(r.t, err)
	for _, p := range report.Problems {
		r.t.Errorf("check: %s", p)
	}
	must(r.t, r.store.Close())
}

// shorter keeps a stack trace from drowning the test's own words.
func shorter(_ []string, a slog.Attr) slog.Attr {
	if text := fmt.Sprint(a.Value.Any()); len(text) > 1200 {
		a.Value = slog.StringValue(text[:1200] + "…")
	}
	return a
}

type testLog struct{ t testing.TB }

func (l testLog) Write(p []byte) (int, error) {
	l.t.Log(strings.TrimSpace(string(p)))
	return len(p), nil
}

func must(t testing.TB, err error) {
	t.Helper()
	if err != nil {
		t.Fatal(err)
	}
}

func newID() string { return uuid.Must(uuid.NewV7()).String() }

// ---- browsers ------------------------------------------------------------------------------------------------

// browser is a signed-out browser with its own cookies that does not follow redirects.
func browser(t testing.TB) *http.Client {
	jar, err := cookiejar.New(nil)
	must(t, err)
	return &http.Client{Jar: jar, CheckRedirect: func(*http.Request, []*http.Request) error { return http.ErrUseLastResponse }}
}

// signIn opens a one-time link as p and presses its button.
func (r *rig) signIn(p store.Person) *http.Client {
	r.t.Helper()
	token, err := r.store.NewLink(p.ID, time.Hour)
	must(r.t, err)
	b := browser(r.t)
	res := r.open(b, "/in/"+token)
	if res.status != http.StatusOK || !strings.Contains(res.body, p.Name) {
		r.t.Fatalf("sign-in page of %s: got %d", p.Name, res.status)
	}
	if res = r.submit(b, "/in/"+token, ""); res.status != http.StatusSeeOther {
		r.t.Fatalf("sign in as %s: got %d %s, want 303", p.Name, res.status, res.body)
	}
	return b
}

type answer struct {
	status int
	header http.Header
	body   string
}

func (r *rig) do(client *http.Client, req *http.Request) answer {
	r.t.Helper()
	res, err := client.Do(req)
	must(r.t, err)
	defer res.Body.Close()
	body, err := io.ReadAll(res.Body)
	must(r.t, err)
	return answer{res.StatusCode, res.Header, string(body)}
}

// open gets a page the way a browser does.
func (r *rig) open(client *http.Client, path string) answer {
	r.t.Helper()
	req, err := http.NewRequest(http.MethodGet, r.url+path, nil)
	must(r.t, err)
	req.Header.Set("Accept", "text/html,application/xhtml+xml")
	req.Header.Set("Sec-Fetch-Site", "same-origin")
	return r.do(client, req)
}

// submit posts a form of our own page.
func (r *rig) submit(client *http.Client, path, form string) answer {
	r.t.Helper()
	req, err := http.NewRequest(http.MethodPost, r.url+path, strings.NewReader(form))
	must(r.t, err)
	req.Header.Set("Accept", "text/html")
	req.Header.Set("Content-Type", "application/x-www-form-urlencoded")
	req.Header.Set("Sec-Fetch-Site", "same-origin")
	return r.do(client, req)
}

// ---- phones --------------------------------------------------------------------------------------------------

// handset is an enrolled installation that makes records the way the field client does.
type handset struct {
	r            *rig
	url          string // where it sends; a proxy's address in some tests
	client       *http.Client
	installation string
	person       string
	token        string
	n            atomic.Int64
}

func (r *rig) enrol(p store.Person) *handset {
	r.t.Helper()
	h := &handset{r: r, url: r.url, client: &http.Client{Timeout: 30 * time.Second}, installation: newID(), person: p.ID}
	b := r.signIn(p)
	req, err := http.NewRequest(http.MethodPost, r.url+"/exchange/enrol", strings.NewReader(`{"installation":"`+h.installation+`"}`))
	must(r.t, err)
	req.Header.Set("Sec-Fetch-Site", "same-origin")
	res := r.do(b, req)
	if res.status != http.StatusOK {
		r.t.Fatalf("enrol: got %d %s", res.status, res.body)
	}
	var got enrolAnswer
	must(r.t, json.Unmarshal([]byte(res.body), &got))
	h.token = got.Token
	return h
}

// handset enrols without a browser.
func (r *rig) handset(p store.Person) *handset {
	r.t.Helper()
	h := &handset{r: r, url: r.url, client: &http.Client{Timeout: 30 * time.Second}, installation: newID(), person: p.ID}
	var err error
	h.token, err = r.store.Enrol(context.Background(), p.ID, h.installation)
	must(r.t, err)
	return h
}

// envelope is a record before it becomes bytes.
type envelope struct {
	ID      string `json:"id"`
	Kind    string `json:"kind"`
	V       int    `json:"v"`
	Log     string `json:"log"`
	Subject string `json:"subject"`
	At      string `json:"at"`
	Clock   string `json:"clock"`
	By      string `json:"by"`
	From    string `json:"from"`
	N       int64  `json:"n"`
	Body    any    `json:"body"`
}

func (h *handset) record(kind, log, subject string, body any) envelope {
	at := time.Now()
	n := h.n.Add(1)
	return envelope{ID: newID(), Kind: kind, V: 1, Log: log, Subject: subject, At: at.Format("2006-01-02T15:04:05.000Z07:00"),
		Clock: fmt.Sprintf("%016x", uint64(at.UnixMilli())<<16|uint64(n&0xffff)), By: h.person, From: h.installation, N: n, Body: body}
}

// entry is an instrument test of a device, about 900 bytes.
func (h *handset) entry(device string, tripMA float64) envelope {
	return h.record("entry.made", h.r.site, device, entryBody(tripMA))
}

func entryBody(tripMA float64) set {
	typed := func(v float64, unit string) set {
		return set{"typed": fmt.Sprint(v), "unit": unit, "value": v}
	}
	return set{
		"form":  "gfci-receptacle/instrument",
		"given": set{"kind": "gfci-receptacle", "rating_a": 20, "form_rev": 1, "limit_set": "us-class-a", "limit_rev": 1, "equipment_ground": "yes", "ramp": set{"ma_per_s": 0.1}},
		"readings": set{
			"found": set{"value": "on"}, "condition": set{"value": "sound"}, "voltage_v": typed(119.4, "V"), "wiring": set{"value": "correct"}, "ground_continuous": set{"value": "yes"},
			"button_trips": set{"value": "yes"}, "load_dead_when_tripped": set{"value": "yes"}, "button_resets": set{"value": "yes"},
			"trip_current_ma": typed(tripMA, "mA"), "test_current_ma": typed(6.5, "mA"), "trip_time_ms": typed(24, "ms"), "restored": set{"value": "yes"},
		},
		"shown": set{"result": "pass", "limit_rev": 1, "judge": 1}, "source": "phone",
	}
}

func (e envelope) bytes(t testing.TB) string {
	t.Helper()
	var b bytes.Buffer
	enc := json.NewEncoder(&b)
	enc.SetEscapeHTML(false)
	must(t, enc.Encode(e))
	return strings.TrimSuffix(b.String(), "\n")
}

func pushBody(t testing.TB, records ...string) []byte {
	t.Helper()
	type row struct {
		Record string `json:"record"`
	}
	rows := make([]row, len(records))
	for i, rec := range records {
		rows[i].Record = rec
	}
	b, err := json.Marshal(set{"protocol": 1, "sent": time.Now().UTC().Format(time.RFC3339Nano), "records": rows})
	must(t, err)
	return b
}

// send posts to the exchange and gives the raw answer.
func (h *handset) send(path string, body []byte) answer {
	h.r.t.Helper()
	req := h.request(http.MethodPost, path, body)
	return h.r.do(h.client, req)
}

func (h *handset) request(method, path string, body []byte) *http.Request {
	h.r.t.Helper()
	req, err := http.NewRequest(method, h.url+path, bytes.NewReader(body))
	must(h.r.t, err)
	req.Header.Set("Authorization", "Bearer "+h.token)
	req.Header.Set("Content-Type", "application/json")
	return req
}

func (h *handset) fetch(path string) answer {
	h.r.t.Helper()
	return h.r.do(h.client, h.request(http.MethodGet, path, nil))
}

// push sends records and wants a receipt for each.
func (h *handset) push(records ...string) []store.Receipt {
	h.r.t.Helper()
	res := h.send("/exchange/push", pushBody(h.r.t, records...))
	if res.status != http.StatusOK {
		h.r.t.Fatalf("push: got %d %s", res.status, res.body)
	}
	return receiptsOf(h.r.t, res, len(records))
}

func receiptsOf(t testing.TB, res answer, want int) []store.Receipt {
	t.Helper()
	var got receiptsAnswer
	must(t, json.Unmarshal([]byte(res.body), &got))
	if len(got.Receipts) != want {
		t.Fatalf("got %d receipts, want %d: %s", len(got.Receipts), want, res.body)
	}
	return got.Receipts
}

// wantWrong checks an error on the wire: its status, its code, and that it is a whole sentence.
func wantWrong(t testing.TB, res answer, status int, code string) Wrong {
	t.Helper()
	var got wrongBody
	if err := json.Unmarshal([]byte(res.body), &got); err != nil {
		t.Fatalf("got %d %q, want an error %s (%v)", res.status, res.body, code, err)
	}
	if res.status != status || got.Error.Code != code {
		t.Errorf("got %d %s, want %d %s (%s)", res.status, got.Error.Code, status, code, got.Error.Text)
	}
	if !strings.HasSuffix(got.Error.Text, ".") || len(got.Error.Text) < 20 {
		t.Errorf("got text %q, want a whole sentence", got.Error.Text)
	}
	return got.Error
}
