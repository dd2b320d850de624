package main

import (
	"fmt"
	"io"
	"net"
	"net/http"
	"path/filepath"
	"strings"
	"syscall"
	"testing"
	"time"

	"github.com/xuri/excelize/v2"

	"tripwell/static"
	"tripwell/static/chromium"
)

// The whole way of one entry on a clean checkout: a crew at a phone measures a device whose trip time is too long for
// the current it was tested at; the manager reads it in the office; an auditor gets it in the workbook.
func TestDemo_EntryFromPhoneToWorkbook(t *testing.T) {
	chromium.Need(t)
	words, err := static.ReadWords("en")
	if err != nil {
		t.Fatal(err)
	}
	server, dir := startDemo(t)

	phone := chromium.Phone(t)
	phone.Open(server.link("crew"))
	phone.Until("the sign-in button", `document.querySelector("main form button")`)
	phone.Press("main form", "")
	phone.Press("a.row", "Kiln Lane Day Clinic")
	phone.Press(".filter .pair", strings.TrimSpace(strings.ReplaceAll(words.Say("field.filter_all", "n", ""), "()", "")))
	phone.Press("a.row", "Pantry, by the sink")
	phone.Picture("device")
	phone.Press(".choose", words.Say("task.instrument"))
	phone.Until("the form", `document.querySelector("#ask-condition")`)
	device := phone.JS(`location.hash.split("/")[2]`).(string)

	phone.JS(`(() => { const s = document.querySelector("#instrument"); s.value = s.options[1].value; s.dispatchEvent(new Event("change", {bubbles: true})); })()`)
	pick := func(code, answer string) {
		t.Helper()
		option := words.Say("option." + code + "." + answer)
		if !words.Has("option." + code + "." + answer) {
			if option = words.Say("option." + answer); !words.Has("option." + answer) {
				option = words.Say("field." + answer)
			}
		}
		phone.Press("#ask-"+code+" .pick", option)
		phone.Until(code+" answered "+answer, fmt.Sprintf(`[...document.querySelectorAll("#ask-%s [aria-pressed=true]")].length === 1`, code))
	}
	pick("condition", "sound")
	pick("found", "on")
	pick("wiring", "correct")
	pick("ground_continuous", "yes")
	pick("button_trips", "yes")
	pick("button_resets", "yes")
	phone.Type("#in-test_current_ma", "6.8")
	phone.Type("#in-trip_time_ms", "5200")

	// UL 943 Class A: T = (20/I)^1.43 s, at 6.8 mA 4.677191 s (seen second-hand, recomputed): 5200 ms is outside.
	phone.Until("the verdict under the trip time", `document.querySelector("#ask-trip_time_ms .v.fail")`)
	under := digitsJoined(phone.Text("#ask-trip_time_ms"))
	for _, want := range []string{"6.8", "4677"} {
		if !strings.Contains(under, want) {
			t.Errorf("under the trip time stands %q, want %s in it", under, want)
		}
	}
	phone.JS(`document.querySelector("#ask-trip_time_ms").scrollIntoView({block: "center"})`)
	phone.Picture("outside")
	if wide := phone.JS(`document.documentElement.scrollWidth`).(float64); wide > 390 {
		t.Errorf("the form is %v px wide on a screen of 390", wide)
	}
	phone.Press("footer .big.go", "")
	phone.Until("saved", `document.querySelector(".saved .v.fail")`)
	phone.Until("all sent", `document.querySelector("footer .tray").textContent.includes(`+chromium.Quote(words.Say("field.all_sent"))+`)`)
	phone.Picture("saved")

	office := chromium.Desk(t)
	office.Open(server.link("manager"))
	office.Press("main form", "")
	office.Until("the overview naming the device that failed", `document.querySelector("main").innerText.includes("Pantry, by the sink")`)
	office.Picture("overview")
	office.Open(server.link("address") + "/devices/" + device)
	history := digitsJoined(office.Text("main"))
	for _, want := range []string{"Pantry, by the sink", "5200", "6.8", words.Say("verdict.fail")} {
		if !strings.Contains(history, want) {
			t.Errorf("the device's page does not say %q", want)
		}
	}
	office.Picture("history")

	file := filepath.Join(t.TempDir(), "kiln-lane.xlsx")
	if _, stderr, code := tripwell(t, "", "workbook", "-o", file, "--data", dir, "--site", "KILN-LANE"); code != 0 {
		t.Fatalf("workbook beside the running server: exit %d, %s", code, stderr)
	}
	holdsEntry(t, file, words)

	if err := server.stop(syscall.SIGTERM); err != nil {
		t.Errorf("the server stopped with %v, want exit code 0", err)
	}
}

// Without flags the demo takes a new temporary folder and the next free port; what it prints can be used at once.
func TestDemo_WithoutFlags(t *testing.T) {
	if testing.Short() {
		t.Skip("starts a server; left out with -short")
	}
	temp := t.TempDir()
	t.Setenv("TMPDIR", temp)
	if l, err := net.Listen("tcp", "127.0.0.1:8080"); err == nil { // else another program has it, which is as good
		defer l.Close()
	}
	began := time.Now()
	p := start(t, "demo")
	t.Logf("ready after %v", time.Since(began).Round(time.Millisecond))
	if strings.HasSuffix(p.link("address"), ":8080") {
		t.Errorf("the demo says it listens on %s, which is taken", p.link("address"))
	}
	if !strings.Contains(p.output(), "It is kept in "+temp) {
		t.Errorf("the temporary folder is not named:\n%s", p.output())
	}
	for _, role := range []string{"manager", "crew", "auditor"} {
		res, err := http.Get(p.link(role))
		if err != nil {
			t.Fatal(err)
		}
		page, err := io.ReadAll(res.Body)
		res.Body.Close()
		if err != nil || res.StatusCode != http.StatusOK || !strings.Contains(string(page), "<form") {
			t.Errorf("the %s's link answers %s, %v: want a page with a button", role, res.Status, err)
		}
	}
	if err := p.stop(syscall.SIGTERM); err != nil {
		t.Errorf("stopped with %v, want exit code 0", err)
	}
}

// digitsJoined drops the spaces that stand between digits of one figure (4 677).
func digitsJoined(s string) string {
	for _, space := range []string{"\u2009", "\u202f", "\u00a0"} {
		s = strings.ReplaceAll(s, space, "")
	}
	return s
}

// holdsEntry opens the workbook again and looks for the entry, its reading and its verdict.
func holdsEntry(t *testing.T, file string, words *static.Words) {
	t.Helper()
	book, err := excelize.OpenFile(file)
	if err != nil {
		t.Fatal(err)
	}
	defer book.Close()
	for sheet, wants := range map[string][]string{
		"entries":  {"Pantry, by the sink", words.Say("verdict.fail")},
		"readings": {"Pantry, by the sink", "5200", "4677"},
	} {
		rows, err := book.GetRows(words.Say("sheet.name."+sheet), excelize.Options{RawCellValue: true})
		if err != nil {
			t.Fatalf("sheets %v: %v", book.GetSheetList(), err)
		}
		if !hasRow(rows, wants) {
			t.Errorf("the sheet of %s has no row with %q", sheet, wants)
		}
	}
}

// hasRow reports whether one row has each of the words in some cell.
func hasRow(rows [][]string, wants []string) bool {
	for _, row := range rows {
		line := strings.Join(row, "\x1f")
		found := 0
		for _, want := range wants {
			if strings.Contains(line, want) {
				found++
			}
		}
		if found == len(wants) {
			return true
		}
	}
	return false
}
