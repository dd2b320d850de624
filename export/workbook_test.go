package export

import (
	"bytes"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"iter"
	"slices"
	"strings"
	"testing"
	"time"

	"github.com/xuri/excelize/v2"

	"tripwell/forms"
	"tripwell/static"
	"tripwell/store"
)

func seq[T any](items ...T) iter.Seq2[T, error] {
	return func(yield func(T, error) bool) {
		for _, it := range items {
			if !yield(it, nil) {
				return
			}
		}
	}
}

func number(v float64) *float64 { return &v }

// handSource is a small workbook of hand-made values: one entry in force, one corrected, one imported.
func handSource(t testing.TB, demo bool) WorkbookSource {
	t.Helper()
	zone, err := time.LoadLocation("America/Chicago")
	if err != nil {
		t.Fatal(err)
	}
	site := store.Site{ID: "0192d4a0-0000-7000-8000-000000000001", Code: "ELM-4", Name: "Elm Street 4", Zone: "America/Chicago"}
	dev := store.DeviceRow{
		ID: "dev-1", Site: site.ID, SiteCode: site.Code, Kind: "gfci-receptacle", Tag: "K7QM2P3", Panel: "LP-2", Circuit: "14", Make: "Make A",
		Place:   store.Place{Building: "Main house", Floor: "Ground floor", Room: "Kitchen", Name: "By the sink"},
		RatingA: 20, Installed: forms.Date(2021, time.April, 12),
		Last: map[string]store.LastTest{"instrument": {Entry: "e1", Day: forms.Date(2026, time.November, 1), Result: forms.Fail}},
		Due:  []store.Due{{Task: "instrument", Due: forms.Date(2027, time.November, 1)}, {Task: "button", Due: forms.Date(2026, time.December, 31)}},
	}
	// 2026-11-01 in Chicago: clocks go back from 02:00 to 01:00, so 06:30 UTC is 01:30 CDT and 07:30 UTC is 01:30 CST.
	at := time.Date(2026, time.November, 1, 6, 30, 0, 0, time.UTC)
	slow := forms.Entry{Form: "gfci-receptacle/instrument", Readings: map[string]forms.Reading{
		"trip_time_ms": {Value: 4990.5, Unit: "ms"}, "test_current_ma": {Value: 6.5}, "found": {Value: "on"}, "ground_ohm": {Missing: "no-access"},
	}}
	slowVerdict := forms.Verdict{Result: forms.Fail, Findings: []forms.Finding{
		{Reading: "ground_ohm", Verdict: forms.Missing, Reason: "no-access"},
		{Reading: "trip_time_ms", Value: json.RawMessage("4990.5"), Verdict: forms.Fail, Limit: &forms.Bounds{Max: number(4988.9)}, Level: "must", Source: "UL 943"},
		{Reading: "trip_time_ms", Value: json.RawMessage(`{"above":310}`), At: map[string]any{"multiple": 5.0, "phase_deg": 180.0}, Verdict: forms.ConditionalFail, Limit: &forms.Bounds{Min: number(1), Max: number(40)}, Level: "must"},
	}}
	fine := slow
	fine.Readings = map[string]forms.Reading{"trip_time_ms": {Value: 25.0}, "wiring": {Value: "open-ground"}}
	fineVerdict := forms.Verdict{Result: forms.Pass, Findings: []forms.Finding{
		{Reading: "trip_time_ms", Value: json.RawMessage("25"), Verdict: forms.Pass, Limit: &forms.Bounds{Max: number(4988.9)}, Level: "must", Source: "UL 943"},
	}}
	line := func(id string, body forms.Entry, v forms.Verdict) EntryLine {
		return EntryLine{
			Site: site, Zone: zone, DeviceRow: dev, ByName: "Crew 1", Instrument: "Tester 7 SN-1",
			Entry: store.Entry{ID: id, Device: dev.ID, Site: site.ID, Task: "instrument", Day: forms.DayOf(at.In(zone)), At: at, Received: at.Add(time.Hour),
				By: "p1", Source: "phone", Pos: 7, Body: body, Verdict: v, LimitSet: "us-class-a", LimitRev: 1},
		}
	}
	first := line("e1", slow, slowVerdict)
	first.Flags = []store.Flag{{Code: "late", Detail: "9 days"}}
	corrected := line("e2", fine, fineVerdict)
	corrected.Corrections = []store.Correction{{By: "p2", At: at.Add(2 * time.Hour), Reason: "read the wrong row", InForce: true}}
	corrected.Replaced = []Replaced{{Body: slow, Verdict: slowVerdict}}
	imported := line("e3", forms.Entry{}, forms.Verdict{Result: forms.Pass})
	imported.Imported, imported.Source = true, "spreadsheet"
	return WorkbookSource{
		Sites: []store.Site{site}, AllSites: true, From: forms.NoDay, To: forms.Date(2026, time.November, 30), AsOf: time.Date(2026, 12, 1, 9, 0, 0, 0, time.UTC),
		Store: "store-1", Epoch: 2, Demo: demo, Head: "tripwell/org/store-1/2\n5\nAAAA\n\n— signed\n",
		Logs:    []LogLine{{store.LogHead{Log: site.ID, Size: 12, Root: "cm9vdA=="}, "ELM-4"}},
		Devices: seq(DeviceLine{Site: site, Device: dev}), Entries: seq(first, corrected, imported),
		Due:        seq(DueLine{Site: site, DueRow: store.DueRow{Device: dev, Due: store.Due{Task: "button", Due: forms.Date(2026, time.December, 31), Last: forms.NoDay, State: "never-tested"}}}),
		Limits:     []LimitLine{{Set: "us-class-a", Revision: 1, InForce: forms.Date(1900, time.January, 1), ID: "trip-time", Reading: "trip_time_ms", Limit: "words", Level: "must", Source: "UL 943"}},
		PersonName: func(id string) string { return map[string]string{"p2": "Crew 2"}[id] },
	}
}

func opened(t testing.TB, src WorkbookSource) *excelize.File {
	t.Helper()
	var out bytes.Buffer
	if err := Workbook(&out, src); err != nil {
		t.Fatal(err)
	}
	f, err := excelize.OpenReader(bytes.NewReader(out.Bytes()))
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { f.Close() })
	return f
}

// table reads a sheet as rows of heading → raw value.
func table(t testing.TB, f *excelize.File, sheet string, head int) []map[string]string {
	t.Helper()
	rows, err := f.GetRows(sheet, excelize.Options{RawCellValue: true})
	if err != nil {
		t.Fatal(err)
	}
	var out []map[string]string
	for _, r := range rows[head:] {
		m := map[string]string{}
		for i, v := range r {
			if v != "" {
				m[rows[head-1][i]] = v
			}
		}
		out = append(out, m)
	}
	return out
}

func wantCells(t *testing.T, what string, got, want map[string]string) {
	t.Helper()
	for k, v := range want {
		if got[k] != v {
			t.Errorf("%s, %s: got %q, want %q", what, k, got[k], v)
		}
	}
}

func TestWorkbook_SheetsInOrder(t *testing.T) {
	f := opened(t, handSource(t, false))
	want := []string{"Cover", "Register", "Entries", "Readings", "Flags", "Due", "Defects", "Corrections", "Compliance", "Protection gaps", "Instruments", "Plans", "Limits",
		"People", "Imported", "Refused", "Sample", "Columns"}
	if got := f.GetSheetList(); !slices.Equal(got, want) {
		t.Errorf("got sheets %v, want %v", got, want)
	}
}

func TestWorkbook_CellsOpenedAgain(t *testing.T) {
	f := opened(t, handSource(t, false))
	// Serial days count from 1899-12-30 (ECMA-376, 1900 date system): 2026-11-01 is 46327.
	const day, halfPastOne = "46327", "46327.0625"
	reg := table(t, f, "Register", 1)
	wantCells(t, "register", reg[0], map[string]string{
		"Site code": "ELM-4", "Room": "Kitchen", "Spot": "By the sink", "Tag": "K7Q-M2P-3", "Rating (A)": "20", "Rated residual current (mA)": "",
		"Installed": "44298", "Status": "in service", "Last instrument test": day, "Last button test": "", "Next date": "46387",
	})
	entries := table(t, f, "Entries", 1)
	if len(entries) != 3 {
		t.Fatalf("got %d entries, want 3", len(entries))
	}
	wantCells(t, "entry", entries[0], map[string]string{
		"Entry id": "e1", "Test day": day, "Trip time (ms)": "4990.5", "Test current (mA)": "6.5", "Trip current (mA)": "", "Entered by": "Crew 1",
		"Entered (site time)": halfPastOne, "Received (site time)": halfPastOne, "Time zone": "America/Chicago", "Status": "in force", "Flags": "1",
		"Limit set and revision": "us-class-a r1", "Place in the log": "7", "Instrument": "Tester 7 SN-1",
	})
	wantCells(t, "corrected entry", entries[1], map[string]string{"Status": "corrected", "Trip time (ms)": "25",
		"Corrections": "Corrected 2026-11-01 02:30 by Crew 2: read the wrong row"})
	wantCells(t, "imported entry", entries[2], map[string]string{"Imported": "imported: not witnessed by Tripwell", "Source": "spreadsheet"})
	wantCells(t, "flag", table(t, f, "Flags", 1)[0], map[string]string{"Entry id": "e1", "Detail": "9 days", "Test day": day})
	wantCells(t, "due", table(t, f, "Due", 1)[0], map[string]string{"Due": "46387", "Last tested": "", "Tag": "K7Q-M2P-3"})
	wantCells(t, "limit", table(t, f, "Limits", 1)[0], map[string]string{"Revision": "1", "Limit": "words", "In force from": "1900-01-01", "Source of the limit": "UL 943"})
}

func TestWorkbook_ReadingsSayNumberBoundAndWords(t *testing.T) {
	rows := table(t, opened(t, handSource(t, false)), "Readings", 1)
	var of = map[string][]map[string]string{}
	for _, r := range rows {
		of[r["Entry id"]] = append(of[r["Entry id"]], r)
	}
	if len(of["e1"]) != 5 {
		t.Fatalf("entry e1: got %d readings, want 3 findings and 2 that no limit spoke of", len(of["e1"]))
	}
	e1 := of["e1"]
	wantCells(t, "number", e1[1], map[string]string{"Value": "4990.5", "Limit, at most": "4988.9", "Limit, at least": "", "Level": "must", "Status": "in force", "Source of the limit": "UL 943"})
	wantCells(t, "bound", e1[2], map[string]string{"Value": "", "Value in words": ">310", "Limit, at least": "1", "Limit, at most": "40"})
	if !strings.Contains(e1[2]["Conditions"], "5") || !strings.Contains(e1[2]["Conditions"], "180") {
		t.Errorf("conditions: got %q", e1[2]["Conditions"])
	}
	words, err := static.ReadWords("en")
	if err != nil {
		t.Fatal(err)
	}
	wantCells(t, "missing reading", e1[0], map[string]string{"Value": "", "Value in words": words.Say("missing.no-access"), "Verdict": words.Say("verdict.missing"), "Unit": ""})
	wantCells(t, "not judged", e1[4], map[string]string{"Value": "6.5", "Verdict": "", "Limit set and revision": ""})
}

func TestWorkbook_ReplacedReadingsNeverDisappear(t *testing.T) {
	rows := table(t, opened(t, handSource(t, false)), "Readings", 1)
	var inForce, replaced bool
	for _, r := range rows {
		if r["Entry id"] != "e2" || r["Conditions"] != "" {
			continue
		}
		inForce = inForce || r["Status"] == "corrected" && r["Value"] == "25"
		replaced = replaced || r["Status"] == "replaced" && r["Value"] == "4990.5" && r["Verdict"] == table(t, opened(t, handSource(t, false)), "Readings", 1)[1]["Verdict"]
	}
	if !inForce || !replaced {
		t.Errorf("readings in force shown: %v, failing readings that were replaced shown: %v", inForce, replaced)
	}
}

func TestWorkbook_FeaturesSurvive(t *testing.T) {
	for _, demo := range []bool{false, true} {
		f := opened(t, handSource(t, demo))
		head := 1
		if demo {
			head = 2
		}
		titles := map[string]string{}
		for _, n := range f.GetDefinedName() {
			if n.Name == "_xlnm.Print_Titles" {
				titles[n.Scope] = n.RefersTo
			}
		}
		wide := map[string]bool{"Register": true, "Entries": true, "Readings": true, "Defects": true, "Corrections": true, "Plans": true}
		for _, name := range f.GetSheetList() {
			layout, err := f.GetPageLayout(name)
			if err != nil || layout.Orientation == nil || *layout.Orientation != "landscape" || layout.FitToWidth == nil || *layout.FitToWidth < 1 || *layout.FitToWidth > 4 || (*layout.FitToWidth == 1) == wide[name] || layout.FitToHeight == nil || *layout.FitToHeight != 0 {
				t.Errorf("%s: page layout %+v, %v; want landscape, one page wide, and more for the sheets of many columns", name, layout, err)
			}
			if p, err := f.GetSheetProps(name); err != nil || p.FitToPage == nil || !*p.FitToPage {
				t.Errorf("%s: fit to page is off", name)
			}
			hf, err := f.GetHeaderFooter(name)
			if err != nil || hf == nil || !strings.Contains(hf.OddFooter, "&P") || strings.Contains(hf.OddHeader, "DEMO") != demo {
				t.Errorf("%s: header and footer %+v, %v", name, hf, err)
			}
			if name == "Cover" {
				continue
			}
			panes, err := f.GetPanes(name)
			if err != nil || !panes.Freeze || panes.YSplit != head {
				t.Errorf("%s: panes %+v, %v; want %d rows frozen", name, panes, err, head)
			}
			tables, err := f.GetTables(name)
			if err != nil || len(tables) != 1 || !strings.HasPrefix(tables[0].Range, fmt.Sprintf("A%d:", head)) {
				t.Errorf("%s: tables %+v, %v; want one with a filter from row %d", name, tables, err, head)
			}
			if want := fmt.Sprintf("'%s'!$1:$%d", name, head); titles[name] != want {
				t.Errorf("%s: print titles %q, want %q", name, titles[name], want)
			}
			if w, _ := f.GetColWidth(name, "A"); w < 9 || w == 9.140625 {
				t.Errorf("%s: column A is %.2f wide, not the width it was given", name, w)
			}
			first, _ := f.GetCellValue(name, "A1")
			if strings.HasPrefix(first, "DEMO") != demo {
				t.Errorf("%s: A1 is %q in a demo=%v store", name, first, demo)
			}
		}
	}
}

func TestWorkbook_CoverSaysWhatAnAuditorAsks(t *testing.T) {
	f := opened(t, handSource(t, true))
	rows, err := f.GetRows("Cover")
	if err != nil {
		t.Fatal(err)
	}
	all := ""
	for _, r := range rows {
		all += strings.Join(r, "\t") + "\n"
	}
	for _, want := range []string{
		"DEMO", "ELM-4", "Elm Street 4", "America/Chicago", "To 2026-11-30", "2026-12-01 09:00:00 UTC", "store-1", "Epoch\t2", fmt.Sprintf("Judge version\t%d", forms.JudgeVersion),
		"us-class-a r1", "12 records, root cm9vdA==", "tripwell/org/store-1/2", "What it does not prove", "Where local codes",
	} {
		if !strings.Contains(all, want) {
			t.Errorf("the cover does not say %q", want)
		}
	}
	for _, r := range rows {
		for _, cell := range r {
			if strings.HasPrefix(cell, "sheet.") || strings.Contains(cell, "{") {
				t.Errorf("a word is missing or unfilled on the cover: %q", cell)
			}
		}
	}
}

func TestWorkbook_CoverSaysWhyThereIsNoHead(t *testing.T) {
	src := handSource(t, false)
	src.Head, src.NoHead = "", "The store is shorter than what it signed."
	rows, err := opened(t, src).GetRows("Cover")
	if err != nil {
		t.Fatal(err)
	}
	for _, r := range rows {
		if r[0] == "Signed head" && strings.Contains(r[1], src.NoHead) {
			return
		}
	}
	t.Errorf("the cover does not say it: %v", rows)
}

func TestWorkbook_EveryHeadingHasWords(t *testing.T) {
	f := opened(t, handSource(t, false))
	for _, name := range f.GetSheetList()[1:] {
		rows, err := f.GetRows(name)
		if err != nil {
			t.Fatal(err)
		}
		seen := map[string]bool{}
		for _, h := range rows[0] {
			if strings.HasPrefix(h, "sheet.") || h == "" || seen[h] {
				t.Errorf("%s: heading %q has no words or stands twice", name, h)
			}
			seen[h] = true
		}
	}
}

func TestWorkbook_ShippedLimitsInWords(t *testing.T) {
	words, err := static.ReadWords("en")
	if err != nil {
		t.Fatal(err)
	}
	shipped := forms.Shipped().LimitSets
	lines := limitLines(words, shipped, nil)
	n := 0
	for _, set := range shipped {
		n += len(set.Limits)
	}
	if len(lines) != n || n == 0 {
		t.Fatalf("got %d lines of %d limits", len(lines), n)
	}
	curve := false
	for _, l := range lines {
		if l.Limit == "" || l.Source == "" || l.Reading == "" || strings.Contains(l.Limit, "sheet.") || strings.Contains(l.When, "sheet.") {
			t.Errorf("limit without words: %+v", l)
		}
		curve = curve || l.Set == "us-class-a" && l.Reading == "trip_time_ms" && strings.Contains(l.Limit, "(20 / I)^1.43")
	}
	if !curve {
		t.Error("the inverse-time limit is not among them")
	}
}

func TestWorkbook_EmptyStore(t *testing.T) {
	src := handSource(t, false)
	src.Devices, src.Entries, src.Due, src.Limits, src.Logs, src.Sites = seq[DeviceLine](), seq[EntryLine](), seq[DueLine](), nil, nil, nil
	f := opened(t, src)
	for _, name := range f.GetSheetList()[1:] {
		if tables, err := f.GetTables(name); err != nil || len(tables) != 1 {
			t.Errorf("%s: %d tables, %v", name, len(tables), err)
		}
	}
}

func TestWorkbook_FailingSourceIsAnError(t *testing.T) {
	src := handSource(t, false)
	broken := errors.New("page 7 cannot be read")
	src.Entries = func(yield func(EntryLine, error) bool) { yield(EntryLine{}, broken) }
	if err := Workbook(io.Discard, src); !errors.Is(err, broken) {
		t.Errorf("got %v, want the source's error", err)
	}
	if err := Workbook(brokenPipe{}, handSource(t, false)); !errors.Is(err, io.ErrClosedPipe) {
		t.Errorf("got %v, want the writer's error", err)
	}
}

type brokenPipe struct{}

func (brokenPipe) Write([]byte) (int, error) { return 0, io.ErrClosedPipe }

func TestWorkbook_FullSheetGoesOn(t *testing.T) {
	if testing.Short() {
		t.Skip("writes a sheet of 1,048,576 rows")
	}
	src := handSource(t, false)
	var flagged EntryLine
	for e := range src.Entries {
		flagged = e
		break
	}
	flagged.Body, flagged.Verdict, flagged.Flags = forms.Entry{}, forms.Verdict{}, make([]store.Flag, sheetRows/4)
	src.Entries = seq(flagged, flagged, flagged, flagged)
	var out bytes.Buffer
	if err := Workbook(&out, src); err != nil {
		t.Fatal(err)
	}
	f, err := excelize.OpenReader(bytes.NewReader(out.Bytes()))
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	rows, err := f.GetRows("Flags 2")
	if err != nil || len(rows) != 2 {
		t.Errorf("got %d rows on the further sheet, %v; want the heading and the one row that did not fit", len(rows), err)
	}
}
