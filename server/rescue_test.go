package server

import (
	"context"
	"encoding/json"
	"net/http"
	"strings"
	"testing"
	"time"

	"tripwell/store"
)

func trayOf(t *testing.T, records ...string) string {
	t.Helper()
	rows := []set{}
	for _, rec := range records {
		rows = append(rows, set{"record": rec, "state": "waiting"})
	}
	b, err := json.Marshal(set{"tripwell": "tray", "v": 1, "installation": newID(), "person": "Crew 1", "made": "2026-12-01T08:00:00.000Z", "records": rows})
	must(t, err)
	return string(b)
}

func TestTray_AFileTakenInTwiceAddsEachRecordOnceAndSaysHowItCame(t *testing.T) {
	r := newRig(t, 2)
	h, other := r.handset(r.crew), r.handset(r.manager)
	good, sent := h.entry(r.devices[0], 4.5).bytes(t), h.entry(r.devices[1], 4.6)
	h.push(sent.bytes(t))
	forged := other.entry(r.devices[0], 4.5)
	forged.By = r.auditor.ID // never signed in on that phone
	file := trayOf(t, good, sent.bytes(t), forged.bytes(t), "{cut")
	report, err := r.server.takeTray(context.Background(), strings.NewReader(file), "rescue")
	must(t, err)
	if report.Records != 4 || report.Stored != 1 || report.Already != 1 || len(report.Refused) != 2 {
		t.Fatalf("got %+v, want one new, one here, two refused", report)
	}
	again, err := r.server.takeTray(context.Background(), strings.NewReader(file), "rescue")
	must(t, err)
	if again.Stored != 0 || again.Already != 2 || len(again.Refused) != 2 {
		t.Errorf("again: got %+v, want nothing new", again)
	}
	var via int
	for _, p := range h.pullAll(r.site) {
		if p.Record == good && strings.Contains(p.Stamp, `"via":"rescue"`) {
			via++
		}
	}
	if via != 1 {
		t.Errorf("got %d records stamped with how they came, want 1", via)
	}
	// By the office page: the manager alone.
	b := r.signIn(r.manager)
	body := "--x\r\nContent-Disposition: form-data; name=\"file\"; filename=\"t.json\"\r\n\r\n" + file + "\r\n--x--\r\n"
	req := formRequest(t, r.url+"/tray", body)
	if res := r.do(b, req); res.status != 200 || !strings.Contains(res.body, "0 new, 2 were here, 2 refused") {
		t.Errorf("office page: got %d %s", res.status, res.body)
	}
	if res := r.do(r.signIn(r.crew), formRequest(t, r.url+"/tray", body)); res.status != 403 {
		t.Errorf("crew: got %d, want 403", res.status)
	}
}

func TestBackup_TellsPhonesWhatItCovers(t *testing.T) {
	r := newRig(t, 2)
	h := r.handset(r.crew)
	got := h.push(h.entry(r.devices[0], 4.5).bytes(t))[0]
	image, err := r.store.CheckedImage(context.Background(), nil)
	must(t, err)
	if image.Logs[r.site] != got.Pos || image.Size == 0 || len(image.SHA256) != 64 {
		t.Errorf("got %+v, want all %d records of the site", image, got.Pos)
	}
	covered := func() int64 {
		var page pullAnswer
		must(t, json.Unmarshal([]byte(h.fetch("/exchange/pull?log="+r.site).body), &page))
		return page.BackedUp
	}
	if n := covered(); n != 0 {
		t.Errorf("before it is safe elsewhere: got %d covered, want 0", n)
	}
	h.push(h.entry(r.devices[1], 4.5).bytes(t))
	must(t, r.store.NoteBackup(context.Background(), image.Logs))
	must(t, image.Discard())
	if n := covered(); n != got.Pos {
		t.Errorf("got %d covered, want the %d of the copy", n, got.Pos)
	}
}

// Photos follow the records in the file; each is kept through the entry that names it, and what is not taken is named.
func TestTray_PhotosOfTheFileAreKept(t *testing.T) {
	r := newRig(t, 1)
	h := r.handset(r.crew)
	raw, name := picture(t, 40, 30, "jpeg")
	broken := strings.Repeat("ab", 32)
	e := photoEntry(h, r.devices[0], name, broken)
	photos := []set{{"sha256": name, "entry": e.ID, "base64": raw}, {"sha256": broken, "entry": e.ID, "base64": raw}, {"sha256": name, "entry": newID(), "base64": raw}}
	list, err := json.Marshal(photos)
	must(t, err)
	file := strings.TrimSuffix(trayOf(t, e.bytes(t)), "}") + `,"photos":` + string(list) + "}"
	report, err := r.server.takeTray(context.Background(), strings.NewReader(file), "rescue")
	must(t, err)
	if report.Stored != 1 || report.Photos != 1 || len(report.NoPhoto) != 2 || report.NoPhoto[0].Name != broken {
		t.Fatalf("got %+v, want one photo kept and two named", report)
	}
	office := r.signIn(r.manager)
	if res := r.open(office, "/entries/"+e.ID+"/photos/"+name); res.status != 200 || res.body != string(raw) {
		t.Errorf("the photo: got %d", res.status)
	}
	for _, path := range []string{"/entries/" + e.ID, "/kept-aside"} {
		if res := r.open(office, path); !strings.Contains(res.body, "These bytes are not the photo of that name.") {
			t.Errorf("%s does not say why a photo is missing", path)
		}
	}
	for _, torn := range []string{file[:len(file)-400], "{", "[]", `{"tripwell":"else","records":[]}`} {
		if _, err := r.server.takeTray(context.Background(), strings.NewReader(torn), "rescue"); err == nil || !isRefusal(err) {
			t.Errorf("a file that is none: got %v, want a refusal", err)
		}
	}
}

// A phone restored from another's image counts n again; it is told so once and may then draw a new id, and only then.
func TestRenew_OnlyACopiedPhoneGetsAnotherID(t *testing.T) {
	r := newRig(t, 2)
	h := r.handset(r.crew)
	if res := h.send("/exchange/renew", []byte(`{"installation":"`+newID()+`"}`)); res.status != 409 {
		t.Errorf("got %d, want 409 for a phone known once", res.status)
	}
	one, two := h.entry(r.devices[0], 4.5), h.entry(r.devices[1], 4.6)
	two.N = one.N
	receipts := h.push(one.bytes(t), two.bytes(t))
	if receipts[0].Reused || !receipts[1].Reused || receipts[1].State != "stored" {
		t.Fatalf("got %+v, want both stored and the second told that its n was taken", receipts)
	}
	fresh := newID()
	res := h.send("/exchange/renew", []byte(`{"installation":"`+fresh+`"}`))
	var got enrolAnswer
	must(t, json.Unmarshal([]byte(res.body), &got))
	if res.status != 200 || got.Token == "" || got.Token == h.token {
		t.Fatalf("got %d %s, want a token of its own", res.status, res.body)
	}
	late := h.entry(r.devices[0], 4.4).bytes(t) // made under the old id before
	if got := h.push(late)[0]; got.State != "stored" {
		t.Errorf("the old token no longer sends what was made under the old id: %+v", got)
	}
	h.installation, h.token = fresh, got.Token
	h.n.Store(0)
	if got := h.push(h.entry(r.devices[0], 4.3).bytes(t))[0]; got.State != "stored" || got.Reused {
		t.Errorf("got %+v, want stored under the new id", got)
	}
}

// A wrong phone clock refuses nothing; it is measured when the phone sends and flagged on the entry's page.
func TestClock_AWrongPhoneClockIsFlaggedToTheManager(t *testing.T) {
	r := newRig(t, 2)
	h := r.handset(r.crew)
	behind := 17 * time.Minute
	e, right := h.entry(r.devices[0], 4.5), h.entry(r.devices[1], 4.5)
	e.At = time.Now().Add(-behind).Format("2006-01-02T15:04:05.000Z07:00")
	body, err := json.Marshal(set{"protocol": 1, "sent": time.Now().Add(-behind).UTC().Format(time.RFC3339Nano), "records": []set{{"record": e.bytes(t)}}})
	must(t, err)
	if got := receiptsOf(t, h.send("/exchange/push", body), 1)[0]; got.State != "stored" {
		t.Fatalf("got %+v, want stored", got)
	}
	h.push(right.bytes(t))
	flags := func(id string) string {
		var codes []string
		must(t, r.store.View(r.manager.Scope(), func(v *store.View) error {
			e, err := v.Entry(id)
			for _, f := range e.Flags {
				codes = append(codes, f.Code)
			}
			return err
		}))
		return strings.Join(codes, " ")
	}
	if got := flags(e.ID); !strings.Contains(got, "clock") {
		t.Errorf("got flags %q, want clock", got)
	}
	if got := flags(right.ID); strings.Contains(got, "clock") {
		t.Errorf("got flags %q on an entry of a phone whose clock is right", got)
	}
	if page := r.open(r.signIn(r.manager), "/entries/"+e.ID); !strings.Contains(page.body, "17 min") {
		t.Errorf("the manager's page of the entry does not say how far off the clock was")
	}
}

func formRequest(t *testing.T, address, body string) *http.Request {
	t.Helper()
	req, err := http.NewRequest(http.MethodPost, address, strings.NewReader(body))
	must(t, err)
	req.Header.Set("Content-Type", "multipart/form-data; boundary=x")
	req.Header.Set("Accept", "text/html")
	req.Header.Set("Sec-Fetch-Site", "same-origin")
	return req
}
