package server

import (
	"encoding/json"
	"fmt"
	"net/http"
	"net/url"
	"strings"
	"testing"

	"tripwell/store"
)

func TestPush_StoresTheExactBytesAndPullGivesThemBack(t *testing.T) {
	r := newRig(t, 2)
	h := r.handset(r.crew)
	// 4.50 and the bare < > & must come back as they were sent: the record is its bytes, not its meaning.
	rec := h.entry(r.devices[0], 4.5).bytes(t)
	rec = strings.Replace(rec, `"value":119.4`, `"value":119.40`, 1)
	rec = strings.Replace(rec, `"source":"phone"`, `"note":"wet < dry & \u00e9 é","source":"phone"`, 1)
	got := h.push(rec)[0]
	if got.State != "stored" || got.Log != r.site || got.Pos < 1 || got.Store != r.store.ID() {
		t.Fatalf("got %+v, want stored with its place in the site's log", got)
	}
	if again := h.push(rec)[0]; again.State != "already" || again.Pos != got.Pos {
		t.Errorf("the same record again: got %+v, want already at the same place", again)
	}
	var found bool
	for _, p := range h.pullAll(r.site) {
		if p.Pos == got.Pos {
			found = true
			if p.Record != rec {
				t.Errorf("got bytes %s, want %s", p.Record, rec)
			}
		}
	}
	if !found {
		t.Error("the pulled log does not hold the record")
	}
	asked := receiptsOf(t, h.send("/exchange/ask", []byte(`{"ids":["`+got.ID+`"]}`)), 1)
	if asked[0].Pos != got.Pos {
		t.Errorf("ask: got %+v, want the place %d", asked[0], got.Pos)
	}
}

// pullAll walks a log from its beginning by cursors, three records at a time at first.
func (h *handset) pullAll(log string) []store.PulledRecord {
	h.r.t.Helper()
	var all []store.PulledRecord
	after, limit := "", 3
	for {
		res := h.fetch("/exchange/pull?" + url.Values{"log": {log}, "after": {after}, "limit": {fmt.Sprint(limit)}}.Encode())
		if res.status != http.StatusOK {
			h.r.t.Fatalf("pull: got %d %s", res.status, res.body)
		}
		var page pullAnswer
		must(h.r.t, json.Unmarshal([]byte(res.body), &page))
		all = append(all, page.Records...)
		if !page.More {
			return all
		}
		if page.Next == after {
			h.r.t.Fatal("pull: the cursor does not move")
		}
		after, limit = page.Next, 500
	}
}

func TestPush_OneBadRecordNeverSpoilsItsNeighbours(t *testing.T) {
	r := newRig(t, 2)
	h := r.handset(r.crew)
	good := func() string { return h.entry(r.devices[0], 4.5).bytes(t) }
	elsewhere := newID()
	r.append(store.Draft{Kind: "site.registered", Log: elsewhere, Subject: elsewhere, Body: set{"set": set{"code": "OTHER", "name": "Ottermoor Swim Hall", "zone": "UTC", "standard": "NEC"}}})
	used := h.entry(r.devices[1], 4.4)
	if got := h.push(used.bytes(t))[0]; got.State != "stored" {
		t.Fatalf("got %+v, want stored", got)
	}
	changed := used
	changed.Body = entryBody(9.9)
	stranger := h.entry(r.devices[0], 4.5)
	stranger.From = newID()
	forged := h.entry(r.devices[0], 4.5)
	forged.By = r.auditor.ID
	wrongSite := h.entry(r.devices[0], 4.5)
	wrongSite.Log = elsewhere
	org := h.record("limits.set", "org", newID(), set{"limits": set{}})

	cases := []struct{ name, record, code string }{
		{"malformed JSON", `{"id":"` + newID() + `","kind":`, "malformed"},
		{"empty", ``, "malformed"},
		{"not an object", `[1,2]`, ""},
		{"duplicate names", strings.Replace(good(), `"v":1`, `"v":1,"v":1`, 1), "duplicate_name"},
		{"duplicate names deep inside", strings.Replace(good(), `"value":"on"`, `"value":"on","value":"tripped"`, 1), "duplicate_name"},
		{"unknown kind", h.record("entry.vanished", r.site, r.devices[0], set{}).bytes(t), "unknown_kind"},
		{"number beyond 2^53", strings.Replace(good(), `"value":24`, `"value":9007199254740994`, 1), "number_range"},
		{"record over 64 KiB", strings.Replace(good(), `"source":"phone"`, `"note":"`+strings.Repeat("x", 66_000)+`","source":"phone"`, 1), "too_large"},
		{"used id with other bytes", changed.bytes(t), "id_reused"},
		{"somebody else's installation", stranger.bytes(t), "not_permitted"},
		{"somebody else's name", forged.bytes(t), "not_permitted"},
		{"a site not given", wrongSite.bytes(t), "not_permitted"},
		{"org by a crew", org.bytes(t), "not_permitted"},
	}
	for _, c := range cases {
		t.Run(c.name, func(t *testing.T) {
			before, after := good(), good()
			got := h.push(before, c.record, after)
			if got[1].State != "refused" || c.code != "" && got[1].Code != c.code {
				t.Errorf("got %+v, want refused %s", got[1], c.code)
			}
			if !strings.HasSuffix(got[1].Text, ".") {
				t.Errorf("got text %q, want a sentence", got[1].Text)
			}
			if got[0].State != "stored" || got[2].State != "stored" {
				t.Errorf("neighbours: got %s and %s, want both stored", got[0].State, got[2].State)
			}
			if res := h.fetch("/exchange/people"); res.status != http.StatusOK {
				t.Errorf("afterwards: got %d, want the server up", res.status)
			}
		})
	}
}

// Bytes that are no UTF-8 belong to one record; the batch still goes through and the damage is kept as it came.
func TestPush_DamagedTextIsKeptAsItCame(t *testing.T) {
	r := newRig(t, 1)
	h := r.handset(r.crew)
	good := h.entry(r.devices[0], 4.5).bytes(t)
	damaged := strings.Replace(h.entry(r.devices[0], 4.5).bytes(t), `"sound"`, "\"so\xffnd\"", 1)
	body := `{"protocol":1,"records":[{"record":` + quoted(t, good) + `},{"record":` + quotedRaw(damaged) + `},{"record":"half a pair \ud83d here"}]}`
	got := receiptsOf(t, h.send("/exchange/push", []byte(body)), 3)
	if got[0].State != "stored" || got[1].State != "refused" || got[1].Code != "malformed" || got[2].State != "refused" {
		t.Fatalf("got %+v", got)
	}
	must(t, r.store.View(ownerScope, func(v *store.View) error {
		refused, err := v.Refused()
		if err != nil {
			return err
		}
		for _, x := range refused {
			if string(x.Bytes) == damaged {
				return nil
			}
		}
		t.Errorf("quarantine does not hold the damaged bytes among %d refusals", len(refused))
		return nil
	}))
}

func quoted(t testing.TB, s string) string {
	b, err := json.Marshal(s)
	must(t, err)
	return string(b)
}

func quotedRaw(s string) string {
	return `"` + strings.NewReplacer(`\`, `\\`, `"`, `\"`).Replace(s) + `"`
}

func TestPush_BadBatchesAreToldAndDecideNothing(t *testing.T) {
	r := newRig(t, 1)
	h := r.handset(r.crew)
	many := make([]string, 501)
	for i := range many {
		many[i] = `{}`
	}
	cases := []struct {
		name, body string
		status     int
		code       string
	}{
		{"empty body", "", 400, "invalid"},
		{"blank body", " \n", 400, "invalid"},
		{"malformed body", `{"protocol":1,"records":[`, 400, "invalid"},
		{"two values", `{"protocol":1,"records":[]} {}`, 400, "invalid"},
		{"unknown field", `{"protocol":1,"records":[],"more":1}`, 400, "invalid"},
		{"duplicate field", `{"protocol":1,"protocol":1,"records":[]}`, 400, "invalid"},
		{"wrong protocol", `{"protocol":2,"records":[]}`, 400, "invalid"},
		{"record as an object", `{"protocol":1,"records":[{"record":{"id":1}}]}`, 400, "invalid"},
		{"record missing", `{"protocol":1,"records":[{}]}`, 400, "invalid"},
		{"sent is no time", `{"protocol":1,"sent":"now","records":[]}`, 400, "invalid"},
		{"501 records", string(pushBody(t, many...)), 413, "too_large"},
		{"over 512 KiB", `{"protocol":1,"records":[{"record":"` + strings.Repeat("x", 513<<10) + `"}]}`, 413, "too_large"},
	}
	for _, c := range cases {
		t.Run(c.name, func(t *testing.T) {
			wantWrong(t, h.send("/exchange/push", []byte(c.body)), c.status, c.code)
		})
	}
	// The size is also held where it is not announced.
	req := h.request(http.MethodPost, "/exchange/push", nil)
	req.Body, req.ContentLength = http.NoBody, 0
	chunked, err := http.NewRequest(http.MethodPost, h.url+"/exchange/push", unsized{strings.NewReader(`{"protocol":1,"records":[{"record":"` + strings.Repeat("x", 600<<10) + `"}]}`)})
	must(t, err)
	chunked.Header = req.Header
	wantWrong(t, r.do(h.client, chunked), 413, "too_large")
}

// unsized hides a reader's length, so that it is sent in chunks.
type unsized struct{ r *strings.Reader }

func (u unsized) Read(p []byte) (int, error) { return u.r.Read(p) }

func TestPush_ALostRequestOrAnswerCostsOneRepeat(t *testing.T) {
	r := newRig(t, 1)
	h := r.handset(r.crew)
	cut := newLine(t, strings.TrimPrefix(r.url, "http://"))
	h.url = cut.url()
	h.client = &http.Client{Transport: &http.Transport{DisableKeepAlives: true}}
	first := h.entry(r.devices[0], 4.4).bytes(t)
	cut.deaf.Store(true)
	if _, err := h.client.Do(h.request(http.MethodPost, "/exchange/push", pushBody(t, first))); err == nil || cut.cuts.Load() == 0 {
		t.Fatal("the request came through a cut line")
	}
	cut.deaf.Store(false)
	if got := h.push(first)[0]; got.State != "stored" {
		t.Errorf("after a lost request: got %+v, want stored", got)
	}
	records := []string{h.entry(r.devices[0], 4.5).bytes(t), h.entry(r.devices[0], 4.6).bytes(t)}
	cut.cuts.Store(0)
	cut.swallow.Store(true)
	if _, err := h.client.Do(h.request(http.MethodPost, "/exchange/push", pushBody(t, records...))); err == nil {
		t.Fatal("the answer came through a cut line")
	}
	if cut.cuts.Load() == 0 {
		t.Fatal("the server never answered: nothing was lost")
	}
	cut.swallow.Store(false)
	for _, got := range h.push(records...) {
		if got.State != "already" || got.Pos < 1 {
			t.Errorf("got %+v, want already with its place", got)
		}
	}
}

func TestExchange_NeedsTheTokenOfAnInstallation(t *testing.T) {
	r := newRig(t, 1)
	h := r.enrol(r.crew)
	for _, c := range []struct{ method, path string }{
		{"POST", "/exchange/push"}, {"GET", "/exchange/pull?log=" + r.site}, {"POST", "/exchange/ask"}, {"GET", "/exchange/logs"},
		{"GET", "/exchange/people"}, {"GET", "/exchange/snapshot?log=" + r.site},
	} {
		req, err := http.NewRequest(c.method, r.url+c.path, strings.NewReader("{}"))
		must(t, err)
		wantWrong(t, r.do(h.client, req), 401, "not_signed_in")
		req.Header.Set("Authorization", "Bearer not-a-token")
		req.Body = http.NoBody
		req.ContentLength = 0
		wantWrong(t, r.do(h.client, req), 401, "not_signed_in")
	}
	// A session alone is not enough: its cookie would come along with another site's form.
	b := r.signIn(r.crew)
	req, err := http.NewRequest(http.MethodGet, r.url+"/exchange/logs", nil)
	must(t, err)
	wantWrong(t, r.do(b, req), 401, "not_signed_in")
}

func TestExchange_ShowsOnlyTheSitesGiven(t *testing.T) {
	r := newRig(t, 1)
	h := r.enrol(r.crew)
	elsewhere := newID()
	r.append(store.Draft{Kind: "site.registered", Log: elsewhere, Subject: elsewhere, Body: set{"set": set{"code": "OTHER", "name": "Ottermoor Swim Hall", "zone": "UTC", "standard": "NEC"}}})
	other := r.person("Crew 2", "crew", elsewhere)

	var logs logsAnswer
	must(t, json.Unmarshal([]byte(h.fetch("/exchange/logs").body), &logs))
	var names []string
	for _, l := range logs.Logs {
		names = append(names, l.Log)
	}
	if got, want := strings.Join(names, " "), "org "+r.site; got != want {
		t.Errorf("logs: got %s, want %s", got, want)
	}
	var pulled pullAnswer
	must(t, json.Unmarshal([]byte(h.fetch("/exchange/pull?log="+elsewhere).body), &pulled))
	if !pulled.NotYours || len(pulled.Records) != 0 {
		t.Errorf("pull of another site: got %+v, want not_yours", pulled)
	}
	wantWrong(t, h.fetch("/exchange/snapshot?log="+elsewhere), 404, "not_found")
	people := h.fetch("/exchange/people").body
	if !strings.Contains(people, r.crew.ID) || strings.Contains(people, other.ID) {
		t.Errorf("people: got %s, want those of the own site only", people)
	}
	var snap store.Snapshot
	must(t, json.Unmarshal([]byte(h.fetch("/exchange/snapshot?log="+r.site).body), &snap))
	if snap.Site.ID != r.site || len(snap.Devices) != 1 || snap.Cursor == "" {
		t.Errorf("snapshot: got site %s, %d devices, cursor %q", snap.Site.ID, len(snap.Devices), snap.Cursor)
	}
	// The cursor goes on where the snapshot stands.
	rec := h.entry(r.devices[0], 4.5).bytes(t)
	h.push(rec)
	must(t, json.Unmarshal([]byte(h.fetch("/exchange/pull?"+url.Values{"log": {r.site}, "after": {snap.Cursor}}.Encode()).body), &pulled))
	if len(pulled.Records) != 1 || pulled.Records[0].Record != rec {
		t.Errorf("after the snapshot: got %d records, want the one pushed since", len(pulled.Records))
	}
}

func TestExchange_StrangeCursorAsksForASnapshot(t *testing.T) {
	r := newRig(t, 1)
	h := r.handset(r.crew)
	res := h.fetch("/exchange/pull?" + url.Values{"log": {r.site}, "after": {newID() + ".7.12"}}.Encode())
	if !strings.Contains(res.body, `"snapshot":true`) && res.status != 400 {
		t.Errorf("got %d %s, want snapshot", res.status, res.body)
	}
}
