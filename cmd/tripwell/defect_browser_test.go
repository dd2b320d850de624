package main

import (
	"fmt"
	"strings"
	"testing"
	"time"

	"tripwell/forms"
	"tripwell/static/chromium"
	"tripwell/store"
)

// soundGFCI finds devices of the demo's clinic that passed and feed nothing, for failures of our own.
func soundGFCI(t *testing.T, dir string, n int) []store.DeviceRow {
	t.Helper()
	s, err := store.Open(dir, store.Options{Now: time.Now})
	if err != nil {
		t.Fatal(err)
	}
	defer s.Close()
	var out []store.DeviceRow
	err = s.View(store.Scope{Role: "owner", All: true}, func(v *store.View) error {
		for row, err := range v.Devices("KILN-LANE") {
			if err != nil {
				return err
			}
			list, _, err := v.DeviceDefects(row.ID, forms.NoDay)
			if err != nil {
				return err
			}
			if row.Kind == forms.GFCIReceptacle && !row.Retired && row.Last["button"].Result == forms.Pass && len(list) == 0 && len(out) < n && row.Circuit != "" {
				out = append(out, row)
			}
		}
		return nil
	})
	if err != nil || len(out) < n {
		t.Fatalf("got %d sound devices of %d (%v)", len(out), n, err)
	}
	return out
}

// pair is a crew's phone and a manager's desk at one server.
type pair struct {
	phone, desk *chromium.Window
	base        string
}

func newPair(t *testing.T, dir string) *pair {
	t.Helper()
	p := start(t, "demo", "--listen", "127.0.0.1:0", "--data", dir)
	crew, manager := p.link("crew"), p.link("manager")
	x := &pair{phone: chromium.Phone(t), desk: chromium.Desk(t), base: crew[:strings.Index(crew, "/in/")]}
	for w, in := range map[*chromium.Window]string{x.phone: crew, x.desk: manager} {
		w.Open(in)
		w.Press("main", "")
		w.Until("somebody signed in", `!location.pathname.startsWith("/in")`)
	}
	x.phone.Open(x.base + "/field")
	x.phone.Sees("Kiln Lane")
	return x
}

// at goes to a page of the phone once the device is on it.
func (x *pair) at(page string) {
	x.phone.T.Helper()
	x.phone.Until("the page "+page, fmt.Sprintf(`(location.hash === %[1]q || (location.hash = %[1]q, false)) && document.querySelector("main")`, page))
}

func (x *pair) pick(code, word string) {
	x.phone.T.Helper()
	x.phone.Tap("#ask-"+code+" .pick button", word)
}

func (x *pair) set(selector, text string) {
	x.phone.T.Helper()
	x.phone.Until("the field "+selector, fmt.Sprintf(`((e) => e && (e.value = %q, e.dispatchEvent(new Event("input", { bubbles: true })), true))(document.querySelector(%q))`, text, selector))
}

func (x *pair) sent() {
	x.phone.T.Helper()
	x.phone.Until("all sent", `document.querySelector(".foot .tray")?.innerText.includes("All sent")`)
}

// fails makes the button test of a device fail on the phone.
func (x *pair) fails(device string) {
	x.phone.T.Helper()
	x.at("#/test/" + device + "/button")
	x.phone.Tap("button", "Something else")
	x.pick("condition", "Sound")
	x.pick("found", "On")
	x.pick("button_trips", "No")
	x.phone.Tap(".go", "Save")
	x.phone.Sees("Make it safe first")
}

func (x *pair) passes(device string) {
	x.phone.T.Helper()
	x.at("#/test/" + device + "/button")
	x.phone.Tap("button", "Off on TEST")
	x.phone.Tap(".go", "Save")
	x.phone.Sees("saved")
	x.sent()
}

// defectOf finds the open defect of a device at the desk and opens its page.
func (x *pair) defectOf(device string) string {
	x.desk.T.Helper()
	x.desk.Open(x.base + "/devices/" + device)
	x.desk.Press("main", "TEST does not trip it")
	x.desk.Until("the defect", `location.pathname.startsWith("/defects/")`)
	return x.desk.Value(`location.pathname`)
}

func (x *pair) deskSays(act, text string) {
	x.desk.T.Helper()
	x.desk.Press("main", act)
	x.desk.Type("#f-text", text)
	x.desk.Press("form.form", act)
	x.desk.Until("the defect again", `location.pathname.split("/").length === 3`)
}

func (x *pair) deskSees(path, text string) {
	x.desk.T.Helper()
	x.desk.Open(x.base + path)
	x.desk.Sees(text)
}

// From a fail on the phone to closed by a manager: made safe at the wall, repaired, closed at the desk before its test and
// waiting for it, then closed by the test on the phone.
func TestBrowser_DefectLivesFromTheFailToClosed(t *testing.T) {
	chromium.Need(t)
	dir := demoFolder(t)
	d := soundGFCI(t, dir, 1)[0].ID
	x := newPair(t, dir)
	x.fails(d)
	x.phone.Picture("failed")
	x.set("#how", "Breaker off, locked and tagged")
	x.phone.Tap(".choose .go", "Made safe")
	x.phone.Sees("made safe")
	x.sent()
	defect := x.defectOf(d)
	x.desk.Sees("Breaker off, locked and tagged")
	x.deskSays("Repaired", "Module changed")
	x.deskSays("Close", "Seen to")
	x.desk.Sees("what failed has not passed since")
	x.passes(d)
	x.deskSees(defect, "the passing test of")
	x.desk.Picture("closed")
}

// Locked off and proved dead, replaced, LINE and LOAD, the full test of the new device: that entry closes the defect of the
// old one, and the manager sees both devices.
func TestBrowser_ReplacementClosesTheDefectByItsFullTest(t *testing.T) {
	chromium.Need(t)
	dir := demoFolder(t)
	d := soundGFCI(t, dir, 1)[0].ID
	x := newPair(t, dir)
	x.fails(d)
	x.phone.Tap("a", "Replace it")
	x.phone.Tap("#step-locked", "")
	x.phone.Sees("The rest opens when")
	x.phone.Tap("#step-dead", "")
	x.phone.Tap(".pick button", "Failed its test")
	x.set("#serial", "N-1")
	x.phone.Tap("#step-load", "")
	x.phone.Tap(".go", "Replaced, test it")
	x.phone.Until("the test of the new device", `location.hash.endsWith("/instrument")`)
	x.sent()
	x.desk.Open(x.base + "/devices/" + d)
	x.desk.Sees("waiting for the full test of the new device")
	for code, word := range map[string]string{"condition": "Sound", "found": "On", "wiring": "Correct", "ground_continuous": "Yes", "button_trips": "Yes"} {
		x.pick(code, word)
	}
	x.pick("button_resets", "Yes")
	x.set("#in-test_current_ma", "8")
	x.set("#in-trip_time_ms", "30 ms")
	x.phone.Tap(".go", "Save")
	x.phone.Sees("saved")
	x.sent()
	x.defectOf(d)
	x.desk.Sees("the passing test of")
	x.desk.Sees("the new device")
}

// A fail typed by mistake is corrected on the phone that made it: its defect goes, and the manager sees the struck-out answer and
// what it came to. A fail that was none needs no repair.
func TestBrowser_CorrectionTakesTheDefectAway(t *testing.T) {
	chromium.Need(t)
	dir := demoFolder(t)
	d := soundGFCI(t, dir, 1)[0].ID
	x := newPair(t, dir)
	x.fails(d)
	x.sent()
	defect := x.defectOf(d)
	x.at("#/device/" + d)
	x.phone.Tap("a", "Correct")
	x.pick("button_trips", "Yes")
	x.pick("button_resets", "Yes")
	x.set("#reason", "Wrong answer pressed")
	x.phone.Tap(".go", "")
	x.phone.Sees("saved")
	x.sent()
	x.deskSees(defect, "corrected or withdrawn")
	x.desk.Open(x.base + "/devices/" + d)
	x.desk.Press("table.entries tbody tr:first-child", "")
	x.desk.Sees("the defect is gone too")
	x.desk.Until("the struck-out answer", `document.querySelector(".struck s")?.innerText.trim() === "No" && document.querySelector(".struck .v.fail")`)
	x.desk.Picture("corrected")
}

// A certificate finds an instrument reading too low: the tests it puts in doubt are ranked, and made due in one step.
func TestBrowser_RecallMakesTestsDue(t *testing.T) {
	chromium.Need(t)
	x := newPair(t, demoFolder(t))
	x.desk.Open(x.base + "/set-up")
	x.desk.Press("main table", "Instrument A")
	x.desk.Press("main", "Add a certificate")
	x.desk.Until("the form", `document.querySelector("#f-out")`)
	x.desk.JS(`(() => { document.querySelector("#f-out").value = "yes"; document.getElementById("f-percent.trip_current_ma").value = "-15"; return true })()`)
	x.desk.Press("form.form", "Keep the certificate")
	x.desk.Until("the recall", `location.pathname.includes("/recall/")`)
	x.desk.Sees("tests are in doubt")
	x.desk.Until("the worst first", `document.querySelector("tbody tr .v.fail")`)
	x.desk.Picture("recall")
	x.desk.Press("form.form", "Make them due")
	x.desk.Until("the dates", `location.pathname === "/dates"`)
}
