package server

import (
	"archive/zip"
	"bytes"
	"io"
	"net/url"
	"regexp"
	"strings"
	"testing"

	"tripwell/static/chromium"
	"tripwell/store"
)

// hostile is text that becomes a script wherever somebody forgets that it is text; formula is what a spreadsheet would
// run. hurt tells that something did.
const (
	hostile = `"'><img src=x onerror="globalThis.hurt=1"><script>globalThis.hurt=1;alert(1)</script><svg onload=globalThis.hurt=1>{{7*7}}${globalThis.hurt=1}`
	formula = `=HYPERLINK("http://evil.example","x")`
)

// hostileHouse is a site whose every text somebody hostile wrote.
func hostileHouse(t *testing.T) (r *rig, manager store.Person) {
	t.Helper()
	r = newRig(t, 1)
	site, place, device, panel, circuit, item := newID(), newID(), newID(), newID(), newID(), newID()
	r.append(
		store.Draft{Kind: "site.registered", Log: site, Subject: site, Body: set{"set": set{"code": "EVIL", "name": hostile, "zone": "UTC", "standard": "NEC", "address": hostile}}},
		store.Draft{Kind: "panel.set", Log: site, Subject: panel, Body: set{"set": set{"name": hostile, "location": formula}}},
		store.Draft{Kind: "circuit.set", Log: site, Subject: circuit, Body: set{"set": set{"panel": panel, "numbers": "1", "feeds": hostile, "conductor": formula}}},
		store.Draft{Kind: "place.registered", Log: site, Subject: place, Body: set{"set": set{"building": hostile, "floor": hostile, "room": formula, "name": hostile, "critical_load": hostile, "whom_to_tell": hostile}}},
		store.Draft{Kind: "device.registered", Log: site, Subject: device, Body: set{"set": set{"kind": "gfci-receptacle", "place": place, "circuit": circuit, "make": hostile, "model": formula, "serial": hostile, "note": hostile, "installed": "2024-03-01"}}},
		store.Draft{Kind: "device.registered", Log: site, Subject: item, Body: set{"set": set{"kind": "extension-cord", "make": hostile, "serial": hostile, "where": hostile}}},
	)
	crew := r.person(hostile, "crew", site)
	h := r.handset(crew)
	for _, ma := range []float64{4.5, 9.5} {
		entry := h.entry(device, ma)
		entry.Log = site
		entry.Body.(set)["note"] = hostile
		h.push(entry.bytes(t))
	}
	h.push(h.record("defect.opened", site, newID(), set{"device": device, "text": hostile, "cause": "by-hand", "severity": "repair", "parts": []string{hostile, formula}}).bytes(t))
	return r, r.manager
}

// On every page a manager reaches, and on the phone, hostile text is text: nothing of it runs, and the policy had nothing to stop.
func TestSafety_HostileTextRunsNowhere(t *testing.T) {
	chromium.Need(t)
	r, manager := hostileHouse(t)
	p := openHandheld(t, r.url)
	p.signIn(r, manager)
	kind := regexp.MustCompile(`[0-9a-f]{8}-[0-9a-f-]{27}|/sites/[A-Z0-9-]+|\?.*`)
	seen, texts, queue := map[string]bool{}, 0, []string{"/sites", "/sites/EVIL", "/people", "/defects", "/defects/parts", "/dates", "/"}
	for len(queue) > 0 && len(seen) < 50 {
		path := queue[0]
		queue = queue[1:]
		if k := kind.ReplaceAllString(path, "…"); seen[k] && path != "/sites/EVIL" {
			continue
		} else {
			seen[k] = true
		}
		p.visit(path)
		if hurt := p.Value(`String(globalThis.hurt ?? "") + [...document.querySelectorAll("script:not([src]), [onerror], [onload], img[src='x']")].map((e) => e.outerHTML).join()`); hurt != "" {
			t.Errorf("%s: %s", path, hurt)
		}
		if strings.Contains(p.Value(`document.body.textContent`), "globalThis.hurt=1") {
			texts++
		}
		links := p.Value(`[...new Set([...document.querySelectorAll("a[href]")].filter((a) => a.origin === location.origin && !a.hasAttribute("download") && !/\.(xlsx|pdf|csv|jsonl|svg|png|zip|ics)|^\/(table|workbook|label\b|label\?|labels\.|round-sheet|device-sheet|bundle|field|out)/.test(a.pathname + a.search)).map((a) => a.pathname + a.search))].join("\n")`)
		queue = append(queue, strings.Fields(links)...)
	}
	if len(seen) < 30 || texts < 12 {
		t.Errorf("%d kinds of pages, %d with the hostile text: want more to be sure of", len(seen), texts)
	}
	t.Logf("%d kinds of pages, %d showed the text", len(seen), texts)

	p.visit("/field")
	p.ready()
	p.Until("the sites", `document.querySelectorAll("main a.row").length > 0`)
	p.Tap("a.row", `"'><img`)
	p.Until("all its devices", `([...document.querySelectorAll("button, label, a")].find((e) => e.innerText.startsWith("All ("))?.click(), document.querySelector('a.row[href^="#/device/"]'))`)
	device := p.Value(`document.querySelector('a.row[href^="#/device/"]').getAttribute("href")`)
	for _, screen := range []string{device, strings.Replace(device, "#/device/", "#/test/", 1) + "/instrument", "#/people", "#/along", "#/tray"} {
		p.Until(screen, `(location.hash = `+chromium.Quote(screen)+`, document.querySelector("header.where h1"))`)
		if hurt := p.Value(`String(globalThis.hurt ?? "") + [...document.querySelectorAll("script:not([src]), [onerror], [onload], img[src='x']")].map((e) => e.outerHTML).join()`); hurt != "" {
			t.Errorf("%s: %s", screen, hurt)
		}
	}
}

// In what people take away it is text too: no formula in a workbook, none a spreadsheet would make of a CSV, nothing that runs in a PDF.
func TestSafety_HostileTextIsTextInFiles(t *testing.T) {
	r, manager := hostileHouse(t)
	b := r.signIn(manager)
	book := r.open(b, "/workbook.xlsx")
	z, err := zip.NewReader(strings.NewReader(book.body), int64(len(book.body)))
	must(t, err)
	found := false
	for _, f := range z.File {
		part, err := f.Open()
		must(t, err)
		raw, err := io.ReadAll(part)
		must(t, err)
		found = found || bytes.Contains(raw, []byte("HYPERLINK"))
		if strings.HasPrefix(f.Name, "xl/worksheets/") && (bytes.Contains(raw, []byte("<f>")) || bytes.Contains(raw, []byte("<f "))) {
			t.Errorf("%s holds a formula", f.Name)
		}
		if strings.Contains(f.Name, "_rels") && bytes.Contains(raw, []byte("evil.example")) {
			t.Errorf("%s leads to somewhere else", f.Name)
		}
	}
	if !found {
		t.Error("the workbook does not hold the text at all")
	}
	for _, sheet := range []string{"register", "entries"} {
		csv := r.open(b, "/table?"+url.Values{"sheet": {sheet}, "as": {"csv"}}.Encode())
		if csv.status != 200 {
			t.Errorf("%s as CSV: got %d", sheet, csv.status)
		}
		for _, cell := range regexp.MustCompile(`(?m)(?:^|,)"?([=+@\t][^,\n]*)`).FindAllStringSubmatch(csv.body, -1) {
			t.Errorf("%s as CSV: a cell begins %.30q", sheet, cell[1])
		}
	}
	for _, file := range []string{"/labels.pdf?site=EVIL", "/round-sheet?site=EVIL", "/device-sheet?site=EVIL"} {
		pdf := r.open(b, file)
		for _, runs := range []string{"/JavaScript", "/JS", "/Launch", "/OpenAction", "/URI"} {
			if pdf.status == 200 && strings.Contains(pdf.body, runs+" ") {
				t.Errorf("%s holds %s", file, runs)
			}
		}
		if pdf.status >= 500 {
			t.Errorf("%s: got %d", file, pdf.status)
		}
	}
}
