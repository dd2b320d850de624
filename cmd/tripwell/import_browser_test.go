package main

import (
	"bytes"
	"encoding/base64"
	"path/filepath"
	"strings"
	"testing"

	"github.com/xuri/excelize/v2"

	"tripwell/static"
	"tripwell/static/chromium"
)

// A manager takes the messy sample in: mends what nothing could know, sees what would be, imports, fetches the rows to
// correct. Without any script of ours: the office pages have none.
func TestImport_ManagerTakesAMessyRegisterIn(t *testing.T) {
	chromium.Need(t)
	words, err := static.ReadWords("en")
	if err != nil {
		t.Fatal(err)
	}
	file, err := filepath.Abs(filepath.Join("..", "..", "testdata", "register-messy.xlsx"))
	if err != nil {
		t.Fatal(err)
	}
	server, _ := startDemo(t)
	office := chromium.Desk(t)
	office.Open(server.link("manager"))
	office.Press("main form", "")
	office.Until("the overview", `document.querySelector("nav a[href='/sites']")`)
	office.Open(server.link("address") + "/sites")
	office.Press("main", words.Say("intake.heading"))
	office.Until("the form", `document.querySelector("#f-file")`)
	office.Hand("#f-file", file)
	office.Picture("file")
	office.Press("main form", words.Say("intake.look"))
	office.Until("the preview", `document.querySelector("#rows, #problems")`)
	office.Picture("preview")
	if sums := office.Text(".sums"); !strings.HasPrefix(sums, "0") {
		t.Errorf("before anything is mended it would import: %s", sums)
	}
	// choose sets the select that is named for a heading or a word.
	choose := func(label, value string) {
		t.Helper()
		find := `[...document.querySelectorAll("select")].find((s) => (s.ariaLabel ?? s.labels[0]?.textContent ?? "").startsWith(` + chromium.Quote(label) + `))`
		office.Until("the question "+label, find)
		office.JS(`(() => { ` + find + `.value = ` + chromium.Quote(value) + `; })()`)
	}
	choose("Which one", "place")
	choose("Thing with button", "gfci-receptacle")
	office.Press("main form", words.Say("intake.look_now"))
	office.Until("the dates asked for", `document.querySelector("#f-dates") && document.querySelector("#f-zone")`)
	choose(words.Say("intake.dates"), "mdy")
	office.Type("#f-zone", "America/Chicago")
	office.Press("main form", words.Say("intake.look_now"))
	office.Until("431 rows to import", `[...document.querySelectorAll("button.go")].some((b) => b.textContent.includes("431"))`)
	office.Picture("mended")
	office.Press("main form", "431")
	office.Until("the import done", `document.querySelector("h1").textContent.includes("431")`)
	office.Picture("done")

	// The page's own link, fetched with the browser's own session.
	raw, ok := office.JS(`(() => { const x = new XMLHttpRequest(); x.open("GET", document.querySelector("a[href$='rejects.xlsx']").href, false); x.overrideMimeType("text/plain; charset=x-user-defined"); x.send();
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
	office.Open(server.link("address") + "/sites/ASH-HOUSE")
	if head := office.Text("main"); !strings.Contains(head, "221") {
		t.Errorf("the new site's page says %.300s", head)
	}
}
