package static

import (
	"encoding/json"
	"fmt"
	"strings"
	"testing"

	"github.com/skip2/go-qrcode"

	"tripwell/static/chromium"
)

// labelFilm is a film of a label's code, drawn by another encoder than the client's own reader comes from.
func labelFilm(t *testing.T, text string) string {
	t.Helper()
	code, err := qrcode.New(text, qrcode.Medium)
	if err != nil {
		t.Fatal(err)
	}
	return chromium.Film(t, code.Bitmap())
}

// writtenRecord is what a test reads of a record at the server.
type writtenRecord struct {
	Kind, Subject string
	N             int
	Body          struct {
		Tag      string
		Set      map[string]any
		Photos   []string
		Readings map[string]struct{ Missing string }
	}
}

func (x *exchangeStandIn) written(t *testing.T) []writtenRecord {
	t.Helper()
	x.mu.Lock()
	defer x.mu.Unlock()
	out := make([]writtenRecord, len(x.order))
	for i, id := range x.order {
		if err := json.Unmarshal([]byte(x.records[id]), &out[i]); err != nil {
			t.Fatal(err)
		}
	}
	return out
}

// Without signal a label is scanned and its device added, a photo taken, a room found locked; everything arrives once and
// in the order it was done, the photo after its entry.
func TestField_WorksAtTheWallWithoutSignal(t *testing.T) {
	x := newStandIn(t)
	tag := "K7QM2P3"
	p := chromium.Phone(t, chromium.Camera(labelFilm(t, "HTTPS://ELSEWHERE.INVALID/T/"+tag)))
	p.Open(serveClient(t, x) + "/field")
	p.Sees("North house")
	x.set(func() { x.cut = true })

	p.Tap("a", "Find or scan")
	p.Tap("button", "Scan")
	p.Sees("This label names nothing on this phone")
	p.Until("the page is still ours", `location.pathname === "/field" && location.hash.includes("K7QM2P3")`)
	p.Tap("a", "Add the device")
	for field, text := range map[string]string{"name": "By the window", "room": "Kitchen", "floor": "Ground floor"} {
		p.Until("the field "+field, fmt.Sprintf(`((e) => e && (e.value = %q, e.dispatchEvent(new Event("input", { bubbles: true }))))(document.querySelector("#place-%s"))`, text, field))
	}
	p.Tap("button", "Add and test")
	p.Tap("button", "Off on TEST")
	p.Hand("input[type=file]", chromium.Shot(t, 0))
	p.Until("the photo", `document.querySelector(".shots img")?.naturalWidth === 1600`)
	p.Tap(".go", "Save")
	p.Sees("By the window: saved")
	p.Until("the next outlet", `document.querySelector("h1").innerText.startsWith("Pantry")`)

	p.Until("the room", `(location.hash = "#/room/NORTH/01900000-0000-7000-8000-000000000200", true)`)
	p.Tap(".pick button", "Could not get")
	p.Tap(".go", "Save for 3")
	p.Sees("3 to come back to")
	p.Reload()
	p.Sees("7 kept on this phone")

	x.set(func() { x.cut = false })
	p.Tap("a.tray", "")
	p.Tap("button", "Send now")
	p.Sees("All sent")
	var kinds []string
	for i, r := range x.written(t) {
		kinds = append(kinds, r.Kind)
		if r.N != i+1 {
			t.Errorf("record %d has n %d", i+1, r.N)
		}
	}
	want := "place.registered device.registered tag.bound entry.made entry.made entry.made entry.made"
	if got := strings.Join(kinds, " "); got != want {
		t.Fatalf("got %s, want %s", got, want)
	}
	all := x.written(t)
	if all[2].Body.Tag != tag || all[2].Subject != all[0].Subject || all[3].Subject != all[1].Subject {
		t.Errorf("got label %q on %s and a test of %s", all[2].Body.Tag, all[2].Subject, all[3].Subject)
	}
	if len(all[3].Body.Photos) != 1 || x.photos[all[3].Body.Photos[0]] == 0 {
		t.Errorf("got photos %v of the entry and %v at the server", all[3].Body.Photos, x.photos)
	}
	if got := all[4].Body.Readings["button_trips"].Missing; got != "no-access" {
		t.Errorf("got %q for a test in a locked room, want no-access", got)
	}
}
