package main

import (
	"encoding/json"
	"os"
	"path/filepath"
	"regexp"
	"strings"
	"testing"
	"time"

	"github.com/chromedp/cdproto/emulation"
	"github.com/chromedp/chromedp"

	"tripwell/static/chromium"
)

// axeOf gives the checks of axe-core (testdata/axe, MPL 2.0, unchanged, never served), as a script to run on a page. What
// they hold a page against: WCAG 2.2, levels A and AA.
func axeOf(t *testing.T) string {
	t.Helper()
	raw, err := os.ReadFile(filepath.Join("..", "..", "testdata", "axe", "axe.min.js"))
	if err != nil {
		t.Fatal(err)
	}
	return string(raw) + ";undefined"
}

// violation is one rule that a page breaks, with the places.
type violation struct {
	Rule, Help string
	Places     []string
}

// check runs the checks on the page as it stands; only names one rule, "" is all.
func check(w *chromium.Window, axe, only string) (found []violation) {
	w.T.Helper()
	if _, err := chromedp.Run(w.Ctx, chromedp.Evaluate[any](`globalThis.axe ? 1 : (() => { `+axe+` })()`)); err != nil {
		w.Fail("axe: %v", err)
	}
	run := `{ type: "tag", values: ["wcag2a", "wcag2aa", "wcag21a", "wcag21aa", "wcag22aa"] }`
	if only != "" {
		run = `{ type: "rule", values: [` + chromium.Quote(only) + `] }`
	}
	raw := w.Value(`axe.run(document, { runOnly: ` + run + `, resultTypes: ["violations"] }).then((r) => JSON.stringify(r.violations.map((v) => ({ Rule: v.id, Help: v.help,
		Places: v.nodes.slice(0, 4).map((n) => n.html.slice(0, 160) + " | " + (n.any[0]?.message ?? n.all[0]?.message ?? n.none[0]?.message ?? "")) }))))`)
	if err := json.Unmarshal([]byte(raw), &found); err != nil {
		w.Fail("axe: %v", err)
	}
	return found
}

// dark shows the window's pages as a phone or desk set to dark does.
func dark(w *chromium.Window, yes bool) {
	w.T.Helper()
	scheme := "light"
	if yes {
		scheme = "dark"
	}
	params := emulation.SetEmulatedMediaParams{Features: []*emulation.MediaFeature{{Name: "prefers-color-scheme", Value: scheme}}}
	if _, err := chromedp.Call(w.Ctx, emulation.SetEmulatedMedia, params); err != nil {
		w.Fail("%v", err)
	}
}

// checkBoth holds a page against all rules in light, and its colours in dark.
func checkBoth(w *chromium.Window, axe, name string) {
	w.T.Helper()
	checkIn(w, axe, name, "", "color-contrast")
}

// checkIn holds a page against all rules in light ("") and one rule in dark, as named.
func checkIn(w *chromium.Window, axe, name string, modes ...string) {
	w.T.Helper()
	for _, mode := range modes {
		dark(w, mode != "")
		for _, v := range check(w, axe, mode) {
			w.T.Errorf("%s (dark: %v): %s: %s\n\t%s", name, mode != "", v.Rule, v.Help, strings.Join(v.Places, "\n\t"))
		}
	}
	dark(w, false)
}

// Every page a manager reaches by links from the first one, one of each kind.
func TestAccess_OfficePagesBreakNoRule(t *testing.T) {
	chromium.Need(t)
	axe := axeOf(t)
	server, _ := startDemo(t)
	office := chromium.Desk(t)
	office.Open(server.link("manager"))
	checkBoth(office, axe, "the sign-in page")
	office.Press("main form", "")
	office.Until("the overview", `document.querySelector("nav a[href='/sites']")`)
	kind := regexp.MustCompile(`[0-9a-f]{8}-[0-9a-f-]{27}|/sites/[A-Z0-9-]+|/(?:limits|forms|plans)/[^?]+|\?.*`)
	seen, queue := map[string]bool{}, []string{"/"}
	for len(queue) > 0 && len(seen) < 40 {
		path := queue[0]
		queue = queue[1:]
		if k := kind.ReplaceAllString(path, "…"); seen[k] {
			continue
		} else {
			seen[k] = true
		}
		office.Open(server.link("address") + path)
		if len(seen) <= 12 {
			checkBoth(office, axe, path)
		} else {
			checkIn(office, axe, path, "") // the colours are the same few tokens everywhere
		}
		links, _ := office.JS(`[...new Set([...document.querySelectorAll("a[href]")].filter((a) => a.origin === location.origin && !a.hasAttribute("download") && !/\.(xlsx|pdf|csv|jsonl|svg|png|zip|ics)|^\/(table|workbook|label\b|label\?|labels\.|round-sheet|device-sheet|bundle|records|field|out)/.test(a.pathname + a.search)).map((a) => a.pathname + a.search))].join("\n")`).(string)
		queue = append(queue, strings.Fields(links)...)
	}
	if len(seen) < 20 {
		t.Errorf("only %d kinds of pages were reached: %v", len(seen), seen)
	}
	t.Logf("%d kinds of pages", len(seen))
}

// smallTargets lists what is to be tapped and is lower than 48 px or narrower than 24 px (a link within a sentence apart).
const smallTargets = `[...document.querySelectorAll("a[href], button, input, select, textarea, summary")].filter((e) => {
	const r = e.closest("label")?.getBoundingClientRect() ?? e.getBoundingClientRect(), own = e.getBoundingClientRect();
	const inLine = e.matches("p a:not(:only-child), .notice a");
	return own.width > 1 && own.height > 0 && getComputedStyle(e).visibility !== "hidden" && !inLine && (Math.max(r.height, own.height) < 47.5 || Math.max(r.width, own.width) < 24);
}).map((e) => e.outerHTML.slice(0, 110) + " " + Math.round(e.getBoundingClientRect().width) + "×" + Math.round(e.getBoundingClientRect().height)).join("\n")`

// tooWide names what makes a page wider than the window, "" where nothing does.
const tooWide = `document.documentElement.scrollWidth <= innerWidth ? "" : [...document.querySelectorAll("main *, header *, footer *")].filter((e) => e.getBoundingClientRect().right > innerWidth + 1).slice(-3).map((e) => e.outerHTML.slice(0, 140)).join("\n")`

// Every screen of the phone, its sheets opened, with targets a gloved thumb hits.
func TestAccess_PhoneScreensBreakNoRule(t *testing.T) {
	chromium.Need(t)
	axe := axeOf(t)
	server, _ := startDemo(t)
	phone := chromium.Phone(t)
	phone.Open(server.link("crew"))
	phone.Press("main form", "")
	phone.Until("a site on the phone", `document.querySelector(".row .tag") && !document.body.innerText.includes("Fetching") && document.querySelectorAll("ul.rows a.row").length > 0`)
	phone.Tap("main > ul.rows a.row", "")
	phone.Until("a device due", `document.querySelector('a.row[href^="#/device/"]')`)
	site := phone.Value(`location.hash.split("/")[2]`)
	device := phone.Value(`document.querySelector('a.row[href^="#/device/"]').getAttribute("href").split("/")[2]`)
	screens := []string{"#/", "#/site/" + site, "#/device/" + device, "#/round/" + site, "#/hand/" + site, "#/take/" + site, "#/room/" + site + "/" + device, "#/people", "#/along", "#/tray", "#/find",
		"#/add/" + site, "#/label/" + device, "#/move/" + device, "#/replace/" + device, "#/dark/" + device, "#tag=K7QM2P3"}
	for _, task := range []string{"button", "instrument"} {
		screens = append(screens, "#/test/"+device+"/"+task)
	}
	visit := func(screen string) {
		t.Helper()
		phone.Until(screen, `(location.hash = `+chromium.Quote(screen)+`, document.querySelector("header.where h1"))`)
		time.Sleep(150 * time.Millisecond) // lists follow in slices
		phone.JS(`document.querySelectorAll("details").forEach((d) => { d.open = true; })`)
	}
	for _, screen := range screens {
		visit(screen)
		checkBoth(phone, axe, screen)
		if wide, _ := phone.JS(tooWide).(string); wide != "" {
			t.Errorf("%s is wider than the phone:\n%s", screen, wide)
		}
		if small, _ := phone.JS(smallTargets).(string); small != "" {
			t.Errorf("%s has targets lower than 48 px:\n%s", screen, small)
		}
	}

	// In Spanish on the narrowest phone, and with the text twice as large: nothing runs out of the page, no word is missing.
	if _, err := chromedp.Call(phone.Ctx, emulation.SetUserAgentOverride, emulation.SetUserAgentOverrideParams{UserAgent: phone.Value("navigator.userAgent"), AcceptLanguage: "es"}); err != nil {
		t.Fatal(err)
	}
	phone.Do(chromedp.EmulateViewport(360, 740))
	phone.Reload()
	phone.Until("Spanish", `document.documentElement.lang === "es" && document.querySelector("header.where h1")`)
	for _, screen := range screens {
		visit(screen)
		phone.Picture("es_" + strings.NewReplacer("#", "", "/", "-").Replace(screen))
		if key, _ := phone.JS(`document.body.innerText.match(/\b(?:field|phone|walk|register|scan|dark|replace|correct|photo|caution|reading|option|step|verdict|limit)\.[a-z_.]+/)?.[0] ?? ""`).(string); key != "" {
			t.Errorf("%s says %s, which no catalogue has", screen, key)
		}
		for _, size := range []string{"", "200%"} {
			phone.JS(`document.documentElement.style.fontSize = ` + chromium.Quote(size))
			if wide, _ := phone.JS(tooWide).(string); wide != "" {
				t.Errorf("%s in Spanish, text %s, is wider than the phone:\n%s", screen, size, wide)
			}
		}
		phone.JS(`document.documentElement.style.fontSize = ""`)
	}
}
