package static

import (
	"crypto/sha256"
	"encoding/hex"
	"encoding/json"
	"fmt"
	"io"
	"net/http"
	"net/http/httptest"
	"os"
	"path/filepath"
	"strings"
	"sync"
	"testing"
	"time"

	"tripwell/static/chromium"
)

// exchangeStandIn speaks the exchange to one phone and keeps what it decided. Faults are switched on from the test: the line
// is really cut, and an answer can be lost after the records are kept.
type exchangeStandIn struct {
	mu         sync.Mutex
	cut        bool
	loseAnswer bool
	signedOut  bool
	again      int // records that were here already
	order      []string
	records    map[string]string
	snapshot   []byte
	photos     map[string]int // name → bytes
}

const (
	standInSite   = "01900000-0000-7000-8000-000000000001"
	standInPerson = "01900000-0000-7000-8000-0000000000b1"
)

func newStandIn(t *testing.T) *exchangeStandIn {
	t.Helper()
	read := func(pattern string) []any {
		names, err := filepath.Glob(filepath.Join("..", "forms", "data", pattern, "*.json"))
		if err != nil || len(names) == 0 {
			t.Fatalf("no %s found: %v", pattern, err)
		}
		var all []any
		for _, name := range names {
			raw, err := os.ReadFile(name)
			if err != nil {
				t.Fatal(err)
			}
			var one any
			if err := json.Unmarshal(raw, &one); err != nil {
				t.Fatalf("%s: %v", name, err)
			}
			if list, ok := one.([]any); ok {
				all = append(all, list...)
			} else {
				all = append(all, one)
			}
		}
		return all
	}
	var places, devices []any
	for i, name := range []string{"Pantry, by the sink", "Counter, left end", "Counter, right end"} {
		place := fmt.Sprintf("01900000-0000-7000-8000-0000000001%02d", i)
		places = append(places, map[string]any{"id": place, "floor": "Ground floor", "room": "Kitchen", "name": name})
		devices = append(devices, map[string]any{
			"id": fmt.Sprintf("01900000-0000-7000-8000-0000000002%02d", i), "kind": "gfci-receptacle", "place": place, "panel": "LP-2", "circuit": fmt.Sprint(10 + i),
			"fields": map[string]any{"nominal_v": 120}, "due": []any{map[string]any{"task": "button", "due": "2020-01-31", "state": "overdue"}},
		})
	}
	raw, err := json.Marshal(map[string]any{
		"site":  map[string]any{"id": standInSite, "code": "NORTH", "name": "North house", "zone": "UTC", "standard": "NEC"},
		"today": "2020-02-01", "places": places, "devices": devices, "forms": read("forms"), "limit_sets": read("limits"), "instruments": []any{},
	})
	if err != nil {
		t.Fatal(err)
	}
	return &exchangeStandIn{records: map[string]string{}, photos: map[string]int{}, snapshot: raw}
}

func (x *exchangeStandIn) set(fn func()) {
	x.mu.Lock()
	defer x.mu.Unlock()
	fn()
}

func (x *exchangeStandIn) ServeHTTP(w http.ResponseWriter, r *http.Request) {
	x.mu.Lock()
	defer x.mu.Unlock()
	if x.cut {
		panic(http.ErrAbortHandler)
	}
	w.Header().Set("Content-Type", "application/json")
	if x.signedOut {
		w.WriteHeader(http.StatusUnauthorized)
		_, _ = w.Write([]byte(`{"error":{"code":"not_signed_in"}}`))
		return
	}
	logs := []any{map[string]any{"log": standInSite, "code": "NORTH", "name": "North house"}}
	switch r.URL.Path {
	case "/exchange/enrol":
		x.answer(w, map[string]any{"token": "t", "person": map[string]any{"id": standInPerson}, "logs": logs})
	case "/exchange/logs":
		x.answer(w, map[string]any{"logs": logs})
	case "/exchange/snapshot":
		_, _ = w.Write(x.snapshot)
	case "/exchange/photo":
		raw, _ := io.ReadAll(r.Body)
		name := r.URL.Query().Get("sha256")
		if sum := sha256.Sum256(raw); hex.EncodeToString(sum[:]) != name || x.records[r.URL.Query().Get("entry")] == "" {
			http.Error(w, `{"error":{"code":"invalid"}}`, http.StatusBadRequest)
			return
		}
		x.photos[name] = len(raw)
		x.answer(w, map[string]any{"sha256": name})
	case "/exchange/push":
		x.push(w, r)
	default:
		http.NotFound(w, r)
	}
}

func (x *exchangeStandIn) answer(w http.ResponseWriter, v any) {
	_ = json.NewEncoder(w).Encode(v)
}

func (x *exchangeStandIn) push(w http.ResponseWriter, r *http.Request) {
	var body struct {
		Protocol int
		Records  []struct{ Record string }
	}
	if err := json.NewDecoder(r.Body).Decode(&body); err != nil || body.Protocol != 1 {
		http.Error(w, "bad push", http.StatusBadRequest)
		return
	}
	var receipts []any
	for _, rec := range body.Records {
		var env struct{ ID string }
		if err := json.Unmarshal([]byte(rec.Record), &env); err != nil {
			http.Error(w, "bad record", http.StatusBadRequest)
			return
		}
		state := "already"
		if _, known := x.records[env.ID]; known {
			x.again++
		} else {
			state = "stored"
			x.records[env.ID] = rec.Record
			x.order = append(x.order, env.ID)
		}
		receipts = append(receipts, map[string]any{"id": env.ID, "state": state})
	}
	if x.loseAnswer {
		x.loseAnswer = false
		panic(http.ErrAbortHandler)
	}
	x.answer(w, map[string]any{"receipts": receipts})
}

// serveClient serves the client's files as the program does, under the same content policy.
func serveClient(t *testing.T, x *exchangeStandIn) string {
	t.Helper()
	words, err := ReadWords("en")
	if err != nil {
		t.Fatal(err)
	}
	mux := http.NewServeMux()
	mux.Handle("/exchange/", x)
	mux.Handle("/assets/", http.StripPrefix("/assets/", http.FileServerFS(Files)))
	mux.HandleFunc("/assets/"+PhoneWordsName("en"), func(w http.ResponseWriter, _ *http.Request) {
		raw, err := PhoneWords(Files, "en")
		if err != nil {
			t.Error(err)
		}
		w.Header().Set("Content-Type", "application/json")
		_, _ = w.Write(raw)
	})
	mux.HandleFunc("/field", func(w http.ResponseWriter, _ *http.Request) {
		w.Header().Set("Content-Type", "text/html; charset=utf-8")
		w.Header().Set("Content-Security-Policy", "default-src 'none'; script-src 'self'; style-src 'self'; connect-src 'self'; img-src 'self' blob: data:")
		fmt.Fprintf(w, `<!doctype html><meta name="viewport" content="width=device-width"><link rel="stylesheet" href="/assets/tokens.css"><link rel="stylesheet" href="/assets/field.css">
<script type="module" src="/assets/field.mjs"></script><body class="field"><div id="field" data-failed="%s"></div>`, words.Say("field.could_not_start"))
	})
	srv := httptest.NewServer(mux)
	t.Cleanup(srv.Close)
	return srv.URL
}

func TestField_KeepsDraftsAndEntriesThroughReloadsCutsAndLostAnswers(t *testing.T) {
	x := newStandIn(t)
	p := chromium.Phone(t)
	p.Open(serveClient(t, x) + "/field")
	p.Tap("a", "North house")
	p.Tap("a", "Pantry")
	p.Tap("a", "Button test")

	// A draft outlives the page, and what is switched off is said everywhere.
	p.Tap("button", "Something else")
	p.Tap("#ask-condition button", "Sound")
	p.Tap("#ask-found button", "On")
	p.Tap("#ask-button_trips button", "Yes")
	p.Sees("Still off: Pantry, by the sink")
	draftKept(p, 3) // no hand loads the page again within the milliseconds of a write
	p.Reload()
	p.Until("the draft after loading again", `document.querySelectorAll("#ask-condition [aria-pressed=true], #ask-found [aria-pressed=true], #ask-button_trips [aria-pressed=true]").length === 3`)
	p.Until("the list", `(location.hash = "#/site/NORTH", true)`)
	p.Sees("Still off: Pantry, by the sink")
	p.Tap("a.off", "Still off")

	// The line is cut: three entries are kept, through a reload too.
	x.set(func() { x.cut = true })
	p.Tap("#ask-button_resets button", "Yes")
	p.Tap(".go", "Save")
	p.Sees("Pantry, by the sink: saved on this phone")
	for i, next := range []string{"2 kept on this phone", "3 kept on this phone"} {
		p.Tap(".one-tap", "")
		p.Until("the one tap", `document.querySelector(".go").getAttribute("aria-disabled") === "false"`)
		p.Tap(".go", "Save")
		p.Sees(next)
		if i == 1 {
			p.Sees("Nothing due")
		}
	}
	p.Reload()
	p.Sees("3 kept on this phone")
	p.Sees("No signal")

	// The line is back, signed out: nothing goes, nothing is dropped.
	x.set(func() { x.cut, x.signedOut = false, true })
	p.Tap("a.tray", "")
	p.Tap("button", "Send now")
	p.Sees("You are signed out")
	p.Sees("3 kept on this phone")

	// Signed in, the first answer is lost after the records were kept: the phone sends again by itself, each is there once.
	x.set(func() { x.signedOut, x.loseAnswer = false, true })
	p.Tap("button", "Send now")
	p.Sees("All sent")

	x.mu.Lock()
	defer x.mu.Unlock()
	if x.loseAnswer || x.again != 3 {
		t.Errorf("got %d records sent again after the lost answer, want 3", x.again)
	}
	if len(x.order) != 3 {
		t.Fatalf("got %d records at the server, want 3", len(x.order))
	}
	var rows []map[string]any
	p.Rows("tray", "records", &rows)
	if len(rows) != 3 {
		t.Fatalf("got %d rows in the tray's store, want 3", len(rows))
	}
	for i, id := range x.order {
		var env struct {
			N     int
			By    string
			Log   string
			Clock string
			Body  struct{ Shown struct{ Result string } }
		}
		if err := json.Unmarshal([]byte(x.records[id]), &env); err != nil {
			t.Fatal(err)
		}
		if env.N != i+1 || env.Log != standInSite || env.By != standInPerson || len(env.Clock) != 16 || env.Body.Shown.Result != "pass" {
			t.Errorf("record %d: got %s", i+1, x.records[id])
		}
		same := false
		for _, row := range rows {
			same = same || row["id"] == id && row["record"] == x.records[id]
			if state := row["state"]; row["id"] == id && (state != "sent" && state != "kept") {
				t.Errorf("record %d is %v on the phone after its receipt", i+1, state)
			}
		}
		if !same {
			t.Errorf("record %d is not, byte for byte, what the phone kept", i+1)
		}
	}
	if strings.Contains(x.records[x.order[0]], `"draft`) {
		t.Error("a record carries parts of its draft")
	}
}

// draftKept waits until the only draft on the phone's disk holds so many answers.
func draftKept(p *chromium.Window, answers int) {
	p.T.Helper()
	for range 200 {
		var drafts []struct{ Answers map[string]any }
		p.Rows("tray", "drafts", &drafts)
		if len(drafts) == 1 && len(drafts[0].Answers) == answers {
			return
		}
		time.Sleep(50 * time.Millisecond)
	}
	p.Fail("the draft with %d answers is not on the disk", answers)
}
