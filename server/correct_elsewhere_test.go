package server

import (
	"fmt"
	"strings"
	"testing"

	"tripwell/static/chromium"
	"tripwell/store"
)

// A test made on one phone is corrected by its tester on another: the same form with what was recorded, the correction in force as
// its own phone's would be. A colleague's phone may not.
func TestCorrection_OfATestMadeOnAnotherPhone(t *testing.T) {
	chromium.Need(t)
	r := newRig(t, 2)
	first := r.handset(r.crew)
	made := first.entry(r.devices[0], 4.5)
	first.push(made.bytes(t))
	p := openHandheld(t, r.url)
	p.signIn(r, r.crew)
	p.ready()
	p.Until("the device", `(location.hash = "#/device/`+r.devices[0]+`", document.querySelector('a[href="#/correct/`+made.ID+`"]'))`)
	p.Tap("a", "Correct")
	p.Until("what was recorded", `document.querySelector('#ask-trip_current_ma input')?.value === "4.5"`)
	for at, text := range map[string]string{"#ask-trip_current_ma input": "5.4", "#reason": "Misread the display"} {
		p.Value(fmt.Sprintf(`(() => { const el = document.querySelector(%q); el.value = %q; el.dispatchEvent(new Event("input", { bubbles: true })); return "typed"; })()`, at, text))
	}
	p.Until("all that is needed", `document.querySelector(".go").getAttribute("aria-disabled") === "false"`)
	p.Tap(".go", "")
	p.Sees("saved on this phone")
	p.sendAll()
	var got store.Entry
	must(t, r.store.View(r.manager.Scope(), func(v *store.View) (err error) { got, err = v.Entry(made.ID); return err }))
	if len(got.Corrections) != 1 {
		t.Fatalf("got %d corrections, want one", len(got.Corrections))
	}
	k := got.Corrections[0]
	if figure := k.Body.Readings["trip_current_ma"]; !k.InForce || k.By != r.crew.ID || figure.Value != 5.4 {
		t.Errorf("got %+v by %s, in force: %v, want 5.4 mA in force", figure, k.By, k.InForce)
	}
	raw := ""
	must(t, r.store.View(r.manager.Scope(), func(v *store.View) error {
		b, _, err := v.Record(got.Corrections[0].Record)
		raw = string(b)
		return err
	}))
	if !strings.Contains(raw, p.installation()) || p.installation() == first.installation {
		t.Errorf("got %s, want it made on the second phone", raw)
	}
	// Corrected once more, the form begins with what stands now.
	p.Until("the correction again", `(location.hash = "#/correct/`+made.ID+`", document.querySelector('#ask-trip_current_ma input')?.value === "5.4")`)

	other := openHandheld(t, r.url)
	other.signIn(r, r.person("Crew 8", "crew", r.site))
	other.ready()
	other.Until("a colleague's refusal", `(location.hash = "#/correct/`+made.ID+`", document.querySelector("h1")?.innerText === "Somebody else made this entry")`)
}
