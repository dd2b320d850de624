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

// deskSees opens a page of the desk until it says a text: a phone waits a moment after a tap before it sends, and its foot says
// "All sent" of what was there before.
func (x *pair) deskSees(path, text string) {
	x.desk.T.Helper()
	for end := time.Now().Add(20 * time.Second); time.Now().Before(end); time.Sleep(500 * time.Millisecond) {
		if x.desk.Open(x.base + path); strings.Contains(x.desk.Text("body"), text) {
			return
		}
	}
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
	x.deskSees("/devices/"+d, "waiting for the full test of the new device")
	for code, word := range map[string]string{"condition": "Sound", "found": "On", "wiring": "Correct", "ground_continuous": "Yes", "button_trips": "Yes"} {
		x.pick(code, word)
	}
	x.pick("button_resets", "Yes")
	x.set("#in-test_current_ma", "8")
	x.set("#in-trip_time_ms", "30 ms")
	x.phone.Tap(".go", "Save")
	x.phone.Sees("saved")
	x.sent()
	x.deskSees(x.defectOf(d), "the passing test of")
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

// Measured on the phone with an instrument that is found out of tolerance afterwards: the manager sees the test in doubt, makes
// it due, the phone tests again with another instrument, and the recall says so.
func TestBrowser_RecallFromThePhoneToTestedAgain(t *testing.T) {
	chromium.Need(t)
	dir := demoFolder(t)
	d := soundGFCI(t, dir, 1)[0].ID
	x := newPair(t, dir)
	measure := func(instrument, current string) {
		t.Helper()
		x.at("#/test/" + d + "/instrument")
		x.phone.Until("the instrument "+instrument, fmt.Sprintf(`((e) => { const o = e && [...e.options].find((o) => o.text.startsWith(%q)); if (!o) return false; e.value = o.value; e.dispatchEvent(new Event("change", { bubbles: true })); return true })(document.querySelector("#instrument"))`, instrument))
		for code, word := range map[string]string{"condition": "Sound", "found": "On", "wiring": "Correct", "ground_continuous": "Yes", "button_trips": "Yes"} {
			x.pick(code, word)
		}
		x.pick("button_resets", "Yes")
		x.set("#in-trip_current_ma", current)
		x.set("#in-test_current_ma", "8")
		x.set("#in-trip_time_ms", "30 ms")
		x.phone.Tap(".go", "Save")
		x.phone.Sees("saved")
		x.sent()
	}
	measure("Instrument A", "5.6")
	x.desk.Open(x.base + "/set-up")
	x.desk.Press("main table", "Instrument A")
	x.desk.Press("main", "Add a certificate")
	x.desk.Until("the form", `document.querySelector("#f-out")`)
	x.desk.JS(`(() => { document.querySelector("#f-out").value = "yes"; document.getElementById("f-percent.trip_current_ma").value = "-15"; return true })()`)
	x.desk.Press("form.form", "Keep the certificate")
	x.desk.Until("the recall", `location.pathname.includes("/recall/")`)
	recall := x.desk.Value(`location.pathname`)
	x.desk.Sees("tests are in doubt")
	x.desk.Until("the worst first", `document.querySelector("tbody tr .v.fail")`) // 5.6 was 5.6 / 0.85 = 6.6 mA
	x.desk.Picture("recall")
	x.desk.Press("form.form", "Make them due")
	x.desk.Until("the dates", `location.pathname === "/dates"`)
	measure("Instrument B", "5.1")
	x.desk.Open(x.base + recall)
	x.desk.Sees("was tested again since")
	x.desk.Until("this one among them", `[...document.querySelectorAll("tbody tr")].some((r) => r.innerText.includes("tested again") && r.querySelector("a[href^='/entries/']"))`)
	x.deskSees("/devices/"+d, "5.1")
	x.desk.Picture("recall-again")
}

// A defect seen without a test is kept on the phone with its photo's place, made safe there, and closed by the manager after the
// repair and its test.
func TestBrowser_DefectOpenedByHandOnThePhone(t *testing.T) {
	chromium.Need(t)
	dir := demoFolder(t)
	d := soundGFCI(t, dir, 1)[0].ID
	x := newPair(t, dir)
	x.at("#/device/" + d)
	x.phone.Tap("a", "Note a defect")
	x.phone.Tap(".go", "Keep the defect")
	x.phone.Sees("Say what is wrong first")
	x.set("#text", "Cover plate cracked")
	x.set("#parts", "Wall plate, screws")
	x.phone.Until("a photo is chosen", `(async (input) => { if (!input) return false; const c = Object.assign(document.createElement("canvas"), { width: 40, height: 30 }); c.getContext("2d").fillRect(0, 0, 20, 20); const b = await new Promise((y) => c.toBlob(y, "image/jpeg")); const t = new DataTransfer(); t.items.add(new File([b], "a.jpg", { type: "image/jpeg" })); input.files = t.files; input.dispatchEvent(new Event("change", { bubbles: true })); return true })(document.querySelector("input[type=file]"))`)
	x.phone.Until("the photo stands on the page", `document.querySelector(".shots img")`)
	x.phone.Tap(".go", "Keep the defect")
	x.phone.Sees("Make it safe first")
	x.phone.Sees("Cover plate cracked")
	x.phone.Picture("flaw")
	x.set("#how", "Taped off")
	x.phone.Tap(".choose .go", "Made safe")
	x.phone.Sees("made safe")
	x.sent()
	x.desk.Open(x.base + "/devices/" + d)
	x.desk.Press("main", "Cover plate cracked")
	x.desk.Until("the defect", `location.pathname.startsWith("/defects/")`)
	defect := x.desk.Value(`location.pathname`)
	x.desk.Sees("Taped off")
	x.desk.Sees("Wall plate, screws")
	x.desk.Until("its photo", `document.querySelector(".photos img")?.naturalWidth > 0`)
	x.deskSays("Repaired", "New cover plate")
	x.passes(d)
	x.desk.Open(x.base + defect)
	x.desk.Picture("flaw-desk")
}

// An item that travels is found by its tag, brought to the site the phone works at with one tap, and both sites' pages say so.
func TestBrowser_ItemIsBroughtToAnotherSite(t *testing.T) {
	chromium.Need(t)
	dir := demoFolder(t)
	x := newPair(t, dir)
	item := ""
	x.phone.Until("an item is on the phone", `(location.hash === "#/find" || (location.hash = "#/find", false)) && document.querySelector("input[type=search]")`)
	x.set("input[type=search]", "Portable GFCI")
	x.phone.Until("portable items are found", `document.querySelectorAll('ul.rows a.row[href^="#/device/"]').length > 0`)
	item = strings.TrimPrefix(x.phone.Value(`[...document.querySelectorAll('ul.rows a.row[href^="#/device/"]')].pop().getAttribute("href")`), "#/device/")
	x.at("#/site/KILN-LANE")
	x.phone.Sees("Kiln Lane")
	x.at("#/device/" + item)
	x.phone.Tap("#bring", "Bring it here")
	x.phone.Sees("Now at Kiln Lane")
	x.phone.Picture("item")
	x.at("#/site/KILN-LANE")
	x.phone.Sees("here from elsewhere")
	x.sent()
	x.deskSees("/sites/KILN-LANE", "here from elsewhere")
	x.deskSees("/devices/"+item, "Kiln Lane")
	x.desk.Picture("item-desk")
}
