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

// entryBetween finds an instrument entry of the demo that passed with a trip current between two figures.
func entryBetween(t *testing.T, dir string, least, most float64) string {
	t.Helper()
	s, err := store.Open(dir, store.Options{Now: time.Now})
	if err != nil {
		t.Fatal(err)
	}
	defer s.Close()
	found := ""
	err = s.View(store.Scope{Role: "owner", All: true}, func(v *store.View) error {
		sites, err := v.Sites()
		if err != nil {
			return err
		}
		for _, site := range sites {
			for e, err := range v.SiteEntries(site.ID, forms.NoDay, forms.NoDay) {
				if err != nil {
					return err
				}
				if f, ok := e.Body.Readings["trip_current_ma"].Value.(float64); ok && f > least && f < most && e.LimitSet == "us-class-a" && e.Verdict.Result == forms.Pass {
					found = e.ID
				}
			}
		}
		return nil
	})
	if err != nil || found == "" {
		t.Fatalf("no entry between %g and %g mA that passed (%v)", least, most, err)
	}
	return found
}

func TestBrowser_ManagerRevisesALimitFromAPastDay(t *testing.T) {
	chromium.Need(t)
	dir := demoFolder(t)
	// Held to 5 mA, a device may show 5.66 mA on a ramp of 0.1 mA/s (the curve's integral from 5 mA), and more on a quicker one.
	entry := entryBetween(t, dir, 5, 5.6)
	p := start(t, "demo", "--listen", "127.0.0.1:0", "--data", dir)
	in := p.link("manager")
	base := in[:strings.Index(in, "/in/")]
	b := chromium.Desk(t)
	b.Open(in)
	b.Press("main", "")
	b.Until("the overview", `location.pathname === "/"`)
	b.Open(base + "/limits/us-class-a")
	b.Press("main", "Change this set")
	b.Until("the form", `document.querySelector("input[name='max.trip-current']")`)
	typed := func(name, value string) {
		t.Helper()
		b.JS(fmt.Sprintf(`(() => { document.querySelector("[name=" + %s + "]").value = %s; return true })()`, chromium.Quote(chromium.Quote(name)), chromium.Quote(value)))
	}
	typed("max.trip-current", "3")
	typed("in_force", "2025-01-01")
	typed("reason", "Advice of the maker")
	b.Press("form.form", "Show what it changes")
	b.Until("the refusal", `document.querySelector("[role=alert]")?.innerText.includes("above the most")`)
	typed("max.trip-current", "5")
	b.Press("form.form", "Show what it changes")
	b.Until("the preview", `document.querySelector("form[action='/revisions']")`)
	if text := b.Text("main"); !strings.Contains(text, "4 to 6") || !strings.Contains(text, "4 to 5") || !strings.Contains(text, "Conditional fail") {
		b.Fail("the preview does not say what changes")
	}
	b.Picture("preview")
	b.Press("main", "Accept this revision")
	b.Until("the set again", `location.pathname === "/limits/us-class-a"`)
	if text := b.Text("main"); !strings.Contains(text, "Revision 2") || !strings.Contains(text, "Advice of the maker") {
		b.Fail("the revision is not shown")
	}
	b.Open(base + "/entries/" + entry)
	b.Until("both judgements", `document.querySelector("#judgements")`)
	if text := b.Text("#judgements"); !strings.Contains(text, "Pass") || !strings.Contains(text, "Conditional fail") || !strings.Contains(text, "Advice of the maker") {
		b.Fail("both results should stand, got %s", text)
	}
	b.Picture("entry")
}
