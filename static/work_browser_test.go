package static

import (
	"bytes"
	"encoding/json"
	"fmt"
	"image"
	"image/jpeg"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"

	"github.com/chromedp/chromedp"
)

// labelFilm writes a film of one frame, in YUV4MPEG2, that shows a label's code; the vendored encoder draws it under node.
func labelFilm(t *testing.T, text string) string {
	t.Helper()
	node, err := exec.LookPath("node")
	if err != nil {
		if os.Getenv("CI") != "" {
			t.Fatal("node is missing, and in CI the scan must be tested")
		}
		t.Skip("node is missing: no label can be drawn")
	}
	out, err := exec.Command(node, "--input-type=module", "-e", fmt.Sprintf(
		`import encodeQR from "./vendor/qr-index.mjs"; console.log(encodeQR(%q, "raw").map((r) => r.map(Number).join("")).join("\n"))`, text)).CombinedOutput()
	if err != nil {
		t.Fatalf("draw the label: %v\n%s", err, out)
	}
	rows := strings.Fields(string(out))
	const width, height, module = 640, 480, 8
	luma := bytes.Repeat([]byte{235}, width*height)
	for y, row := range rows {
		for x, c := range row {
			if c != '1' {
				continue
			}
			for i := range module * module {
				luma[(60+y*module+i/module)*width+120+x*module+i%module] = 16
			}
		}
	}
	film := append([]byte(fmt.Sprintf("YUV4MPEG2 W%d H%d F10:1 Ip C420jpeg\nFRAME\n", width, height)), luma...)
	film = append(film, bytes.Repeat([]byte{128}, width*height/2)...)
	path := filepath.Join(t.TempDir(), "label.y4m")
	if err := os.WriteFile(path, film, 0o600); err != nil {
		t.Fatal(err)
	}
	return path
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
	p := openPhone(t, chromedp.Flag("use-fake-ui-for-media-stream", true), chromedp.Flag("use-fake-device-for-media-stream", true),
		chromedp.Flag("use-file-for-fake-video-capture", labelFilm(t, "HTTPS://ELSEWHERE.INVALID/T/"+tag)))
	p.do(chromedp.Navigate(serveClient(t, x) + "/field"))
	p.sees("North house")
	x.set(func() { x.cut = true })

	p.press("a", "Find or scan")
	p.press("button", "Scan")
	p.sees("This label names nothing on this phone")
	p.until("the page is still ours", `location.pathname === "/field" && location.hash.includes("K7QM2P3")`)
	p.press("a", "Add the device")
	for field, text := range map[string]string{"name": "By the window", "room": "Kitchen", "floor": "Ground floor"} {
		p.until("the field "+field, fmt.Sprintf(`((e) => e && (e.value = %q, e.dispatchEvent(new Event("input", { bubbles: true }))))(document.querySelector("#place-%s"))`, text, field))
	}
	p.press("button", "Add and test")
	p.press("button", "Off on TEST")
	var shot bytes.Buffer
	if err := jpeg.Encode(&shot, image.NewGray(image.Rect(0, 0, 2000, 1000)), nil); err != nil {
		t.Fatal(err)
	}
	file := filepath.Join(t.TempDir(), "shot.jpg")
	if err := os.WriteFile(file, shot.Bytes(), 0o600); err != nil {
		t.Fatal(err)
	}
	p.do(chromedp.SetUploadFiles("input[type=file]", []string{file}))
	p.until("the photo", `document.querySelector(".shots img")?.naturalWidth === 1600`)
	p.press(".go", "Save")
	p.sees("By the window: saved")
	p.until("the next outlet", `document.querySelector("h1").innerText.startsWith("Pantry")`)

	p.until("the room", `(location.hash = "#/room/NORTH/01900000-0000-7000-8000-000000000200", true)`)
	p.press(".pick button", "Could not get")
	p.press(".go", "Save for 3")
	p.sees("3 to come back to")
	p.do(chromedp.Reload())
	p.sees("7 kept on this phone")

	x.set(func() { x.cut = false })
	p.press("a.tray", "")
	p.press("button", "Send now")
	p.sees("All sent")
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
