package server

import (
	"bytes"
	"context"
	"image"
	"image/color"
	"image/jpeg"
	"mime/multipart"
	"net/http"
	"net/url"
	"regexp"
	"strings"
	"testing"
)

// hrefOf finds the first link of a page that matches.
func hrefOf(t testing.TB, page, pattern string) string {
	t.Helper()
	m := regexp.MustCompile(`href="(` + pattern + `)"`).FindStringSubmatch(page)
	if m == nil {
		t.Fatalf("the page has no link like %s", pattern)
	}
	return m[1]
}

const anyDefect = `/defects/[0-9a-f-]{36}`

// say fills in a form of a defect and sends it.
func (r *rig) say(b *http.Client, path string, pairs ...string) answer {
	r.t.Helper()
	form := setAll(r.openForm(b, path), pairs...)
	return r.submit(b, path, form.Encode())
}

func wantIn(t testing.TB, page string, all ...string) {
	t.Helper()
	for _, want := range all {
		if !strings.Contains(page, want) {
			t.Errorf("the page does not say %q", want)
		}
	}
}

func TestDefect_FromTheFailToClosed(t *testing.T) {
	r := newRig(t, 3)
	h := r.handset(r.crew)
	b := r.signIn(r.manager)
	fail := h.entry(r.devices[1], 19) // UL 943 Class A: the device must trip between 4 and 6 mA
	h.push(fail.bytes(t))
	list := r.open(b, "/defects").body
	wantIn(t, list, "1 failed, still in use for", "Still in use", "19"+thin+"mA", "Outlet 2")
	defect := hrefOf(t, list, anyDefect)
	wantIn(t, r.open(b, "/defects?state=in-use&site=KILN-LANE&severity=unsafe").body, defect)
	wantIn(t, r.open(b, "/entries/"+fail.ID).body, defect)

	if res := r.submit(b, defect+"/safe", setAll(r.openForm(b, defect+"/safe"), "text", " ").Encode()); res.status != http.StatusUnprocessableEntity {
		t.Errorf("made safe, nobody says how: got %d", res.status)
	}
	r.say(b, defect+"/safe", "text", "Breaker off and locked")
	wantIn(t, r.open(b, "/").body, "1 failed, not in use.")
	r.say(b, defect+"/assign", "to", r.crew.ID, "due", "2027-01-04", "parts", "GFCI receptacle 20 A\nwall plate")
	wantIn(t, r.open(b, "/defects/parts").body, "2 parts to bring.", "wall plate", "Outlet 2")
	r.say(b, defect+"/close", "text", "seen to")
	wantIn(t, r.open(b, defect).body, "what failed has not passed since", "Breaker off and locked", "Crew 1")
	r.say(b, defect+"/repaired", "text", "Module changed")
	h.push(h.entry(r.devices[1], 5).bytes(t))
	wantIn(t, r.open(b, defect).body, "Closed", "the passing test of", "Module changed")
	wantIn(t, r.open(b, "/").body, "Nothing overdue, nothing failed.")
	wantIn(t, r.open(b, "/defects/past").body, "1 defect closed")
	r.say(b, defect+"/reopen", "text", "Trips again")
	wantIn(t, r.open(b, defect).body, "It was opened again.", "Still in use")
}

// A correction of the failing entry takes the defect away, and what was said of it stays to be seen.
func TestDefect_GoesWithTheCorrection(t *testing.T) {
	r := newRig(t, 1)
	h := r.handset(r.crew)
	b := r.signIn(r.manager)
	fail := h.entry(r.devices[0], 51)
	h.push(fail.bytes(t))
	defect := hrefOf(t, r.open(b, "/defects").body, anyDefect)
	r.say(b, defect+"/safe", "text", "Breaker off")
	path := "/entries/" + fail.ID + "/correct"
	if res := r.say(b, path, "reason", "decimal point", "reading.trip_current_ma", "5.1"); res.status != http.StatusSeeOther {
		t.Fatalf("correct: %d", res.status)
	}
	if res := r.open(b, defect); res.status != http.StatusNotFound || !strings.Contains(res.body, "corrected or withdrawn") {
		t.Errorf("the defect that was corrected away: got %d %s", res.status, res.body)
	}
	wantIn(t, r.open(b, "/defects").body, "No open defects.")
	wantIn(t, r.open(b, "/devices/"+r.devices[0]).body, "a defect that a correction took away", "Breaker off")
	wantIn(t, r.open(b, "/entries/"+fail.ID).body, "the defect is gone too", "<s>")
}

func TestDefect_ByHandWithItsPhoto(t *testing.T) {
	r := newRig(t, 1)
	b := r.signIn(r.manager)
	img := image.NewRGBA(image.Rect(0, 0, 2400, 1200))
	for i := range img.Pix {
		img.Pix[i] = byte(i)
	}
	img.Set(0, 0, color.White)
	var picture bytes.Buffer
	must(t, jpeg.Encode(&picture, img, nil))
	path := "/devices/" + r.devices[0] + "/defects"
	form := setAll(r.openForm(b, path+"/new"), "text", "Face cracked", "severity", "repair", "parts", "receptacle")
	if res := r.sendFile(b, path, form, []byte("no picture")); res.status != http.StatusUnprocessableEntity || !strings.Contains(res.body, "Face cracked") {
		t.Errorf("a file that is no picture: got %d", res.status)
	}
	res := r.sendFile(b, path, form, picture.Bytes())
	if res.status != http.StatusSeeOther {
		t.Fatalf("record a defect: %d %s", res.status, res.body)
	}
	page := r.open(b, res.header.Get("Location")).body
	wantIn(t, page, "Face cracked", "Repair", "receptacle")
	photo := r.open(b, hrefOf(t, page, `/records/[0-9a-f-]{36}/photos/[0-9a-f]{64}`))
	got, kind, err := image.DecodeConfig(strings.NewReader(photo.body))
	if err != nil || kind != "jpeg" || got.Width != 1600 || got.Height != 800 {
		t.Errorf("the photo: %v %s %dx%d, want a JPEG of 1600 by 800", err, kind, got.Width, got.Height)
	}
	again := r.sendFile(b, path, form, picture.Bytes())
	if again.status != http.StatusSeeOther || strings.Count(r.open(b, "/defects").body, "Face cracked") != 1 {
		t.Error("sent twice, it is not one defect")
	}
	other := r.signIn(r.person("Crew 9", "crew"))
	if res := r.open(other, res.header.Get("Location")); res.status != http.StatusNotFound {
		t.Errorf("whoever has not the site: got %d", res.status)
	}
}

// sendFile sends a form with a file.
func (r *rig) sendFile(b *http.Client, path string, form url.Values, raw []byte) answer {
	r.t.Helper()
	var body bytes.Buffer
	w := multipart.NewWriter(&body)
	for name, values := range form {
		for _, v := range values {
			if name != fileField {
				must(r.t, w.WriteField(name, v))
			}
		}
	}
	file, err := w.CreateFormFile(fileField, "picture.jpg")
	must(r.t, err)
	_, err = file.Write(raw)
	must(r.t, err)
	must(r.t, w.Close())
	req, err := http.NewRequestWithContext(context.Background(), http.MethodPost, r.url+path, &body)
	must(r.t, err)
	req.Header.Set("Content-Type", w.FormDataContentType())
	req.Header.Set("Origin", r.url)
	return r.do(b, req)
}

// Exif 2.3, 4.6.4 A: Orientation (0x0112) 6 stands on its side, to be turned a quarter clockwise.
func TestTurnOf_ReadsTheCamerasOrientation(t *testing.T) {
	header := "\xff\xd8\xff\xe1\x00\x22Exif\x00\x00"
	little := header + "II*\x00\x08\x00\x00\x00\x01\x00\x12\x01\x03\x00\x01\x00\x00\x00\x06\x00\x00\x00"
	big := header + "MM\x00*\x00\x00\x00\x08\x00\x01\x01\x12\x00\x03\x00\x00\x00\x01\x00\x03\x00\x00"
	for raw, want := range map[string]int{little: 1, big: 2, header: 0, header + "II*\x00\xff\xff\xff\x7f": 0, "": 0} {
		if got := turnOf([]byte(raw)); got != want {
			t.Errorf("%q: got %d quarters, want %d", raw, got, want)
		}
	}
	img := image.NewRGBA(image.Rect(0, 0, 2, 1))
	img.Set(0, 0, color.White)
	if out := turned(img, 1); out.Bounds().Dy() != 2 || out.At(0, 0) != img.At(0, 0) {
		t.Errorf("a quarter turn: got %v", out)
	}
}
