package main

import (
	"bytes"
	"encoding/base64"
	"path/filepath"
	"strings"
	"testing"

	"github.com/chromedp/chromedp"
	"github.com/xuri/excelize/v2"

	"tripwell/static"
)

// A manager takes the messy sample in: mends what nothing could know, sees what would be, imports, fetches the rows to
// correct. Without any script of ours: the office pages have none.
func TestImport_ManagerTakesAMessyRegisterIn(t *testing.T) {
	chromium(t)
	words, err := static.ReadWords("en")
	if err != nil {
		t.Fatal(err)
	}
	file, err := filepath.Abs(filepath.Join("..", "..", "testdata", "register-messy.xlsx"))
	if err != nil {
		t.Fatal(err)
	}
	server, _ := startDemo(t)
	office := openBrowser(t, 1280, 900)
	office.open(server.link("manager"))
	office.press("main form", "")
	office.wait("the overview", `document.querySelector("nav a[href='/sites']")`)
	office.open(server.link("address") + "/sites")
	office.press("main", words.Say("intake.heading"))
	office.wait("the form", `document.querySelector("#f-file")`)
	office.do(chromedp.SetUploadFiles(chromedp.CSS("#f-file"), []string{file}))
	office.picture("file")
	office.press("main form", words.Say("intake.look"))
	office.wait("the preview", `document.querySelector("#rows, #problems")`)
	office.picture("preview")
	if sums := office.text(".sums"); !strings.HasPrefix(sums, "0") {
		t.Errorf("before anything is mended it would import: %s", sums)
	}
	// choose sets the select that is named for a heading or a word.
	choose := func(label, value string) {
		t.Helper()
		find := `[...document.querySelectorAll("select")].find((s) => (s.ariaLabel ?? s.labels[0]?.textContent ?? "").startsWith(` + quote(label) + `))`
		office.wait("the question "+label, find)
		office.js(`(() => { ` + find + `.value = ` + quote(value) + `; })()`)
	}
	choose("Which one", "place")
	choose("Thing with button", "gfci-receptacle")
	office.press("main form", words.Say("intake.look_now"))
	office.wait("the dates asked for", `document.querySelector("#f-dates") && document.querySelector("#f-zone")`)
	choose(words.Say("intake.dates"), "mdy")
	office.keys("#f-zone", "America/Chicago")
	office.press("main form", words.Say("intake.look_now"))
	office.wait("431 rows to import", `[...document.querySelectorAll("button.go")].some((b) => b.textContent.includes("431"))`)
	office.picture("mended")
	office.press("main form", "431")
	office.wait("the import done", `document.querySelector("h1").textContent.includes("431")`)
	office.picture("done")

	// The page's own link, fetched with the browser's own session.
	raw, ok := office.js(`(() => { const x = new XMLHttpRequest(); x.open("GET", document.querySelector("a[href$='rejects.xlsx']").href, false); x.overrideMimeType("text/plain; charset=x-user-defined"); x.send();
		return btoa([...x.responseText].map((c) => String.fromCharCode(c.charCodeAt(0) & 255)).join("")); })()`).(string)
	if !ok {
		t.Fatal("the rows to correct were not sent")
	}
	packed, err := base64.StdEncoding.DecodeString(raw)
	if err != nil {
		t.Fatal(err)
	}
	book, err := excelize.OpenReader(bytes.NewReader(packed))
	if err != nil {
		t.Fatal(err)
	}
	defer book.Close()
	rows, err := book.GetRows(book.GetSheetName(0))
	if err != nil {
		t.Fatal(err)
	}
	if len(rows) != 10 || rows[0][2] != "What to correct" || !strings.Contains(rows[1][2], "kind") || rows[1][0] != "Ash House" {
		t.Errorf("rows to correct: %q", rows)
	}
	office.open(server.link("address") + "/sites/ASH-HOUSE")
	if head := office.text("main"); !strings.Contains(head, "221") {
		t.Errorf("the new site's page says %.300s", head)
	}
}
