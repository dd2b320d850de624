package results

import (
	"bytes"
	"fmt"
	"slices"
	"strings"
	"testing"
	"time"

	"github.com/xuri/excelize/v2"

	"tripwell/export/paper"
	"tripwell/forms"
	"tripwell/store"
)

// walk is a site whose places all carry a label.
const walk = `site,site_name,standard,building,floor,room,place,kind,panel,circuit,tag
ELM-4,Elm Yard,NEC,North,Ground,Kitchen,By the sink,gfci-receptacle,LP-1,1,K7QM2P3
ELM-4,Elm Yard,NEC,North,Ground,Kitchen,By the door,receptacle,LP-1,2,HQF7009
ELM-4,Elm Yard,NEC,South,Ground,Plant,Panel,gfci-breaker,LP-2,5,
`

// filler writes into the worksheets a round came as, as a person does: under the headings that stand there.
type filler struct {
	t *testing.T
	f *excelize.File
}

// column finds the column of a heading in the first row.
func (p *filler) column(sheet, heading string) int {
	p.t.Helper()
	rows, err := p.f.GetRows(sheet)
	if err != nil {
		p.t.Fatal(err)
	}
	n := slices.Index(rows[0], heading)
	if n < 0 {
		p.t.Fatalf("the worksheet %q has no heading %q: %q", sheet, heading, rows[0])
	}
	return n + 1
}

// row finds the row in which a cell of the sheet stands.
func (p *filler) row(sheet, text string) int {
	p.t.Helper()
	at, err := p.f.SearchSheet(sheet, text)
	if err != nil || len(at) != 1 {
		p.t.Fatalf("%q stands in %v of the worksheet %q, %v; want it once", text, at, sheet, err)
	}
	_, row, err := excelize.CellNameToCoordinates(at[0])
	if err != nil {
		p.t.Fatal(err)
	}
	return row
}

func (p *filler) fill(sheet, place string, cells map[string]any) {
	p.t.Helper()
	row := p.row(sheet, place)
	for heading, value := range cells {
		cell, err := excelize.CoordinatesToCellName(p.column(sheet, heading), row)
		if err == nil {
			err = p.f.SetCellValue(sheet, cell, value)
		}
		if err != nil {
			p.t.Fatal(err)
		}
	}
}

// roundBook writes the round of the site as the program hands it out, and opens it.
func (h *house) roundBook(t *testing.T) *filler {
	t.Helper()
	var out bytes.Buffer
	h.must(h.View(everything, func(v *store.View) error {
		r, err := paper.RoundOf(v, forms.Date(2026, time.November, 30), paper.RoundAsk{Site: "ELM-4", Until: forms.NoDay})
		if err != nil {
			return err
		}
		return paper.Worksheet(&out, r)
	}))
	f, err := excelize.OpenReader(&out)
	h.must(err)
	t.Cleanup(func() { f.Close() })
	return &filler{t, f}
}

// A round's own workbook goes out, is filled in by hand and comes back: the entries say what was typed, word for word.
func TestReadings_RoundWorkbookFilledInByHand(t *testing.T) {
	h := newHouse(t)
	h.register(walk)
	book := h.roundBook(t)
	const button, instrument, receptacle = "Button test", "Instrument test", "Receptacle test"
	sink, door, panel := "North · Ground · Kitchen · By the sink", "North · Ground · Kitchen · By the door", "South · Ground · Plant · Panel"
	day := time.Date(2026, time.November, 24, 0, 0, 0, 0, time.UTC)
	book.fill(button, sink, map[string]any{"Test day": day, "All in order": "yes", "Read by": "Crew 1"})
	book.fill(button, panel, map[string]any{"Test day": "25 Nov 2026", "Not tested because": "Could not get to it", "Read by": "crew 1", "Note": `=1+1 "behind" a rack`})
	book.fill(instrument, sink, map[string]any{"Test day": day, "Trip time (ms)": "24.50", "Trip current (mA)": 5.1, "Test current (mA)": "6,8", "Read by": "Crew 1", "Instrument": "TW-2207"})
	book.fill(receptacle, door, map[string]any{"Test day": day, "Read by": "Crew 1", "Wiring": "Correct", "Ground path resistance (Ω)": ">1999", "Line voltage (V)": 120})
	var typed bytes.Buffer
	h.must(book.f.Write(&typed))

	ask := Ask{Source: Paper, TypedBy: "Crew 1", DryRun: true}
	seen := h.bringRaw(typed.Bytes(), ask)
	if n := len(h.entries("ELM-4")); n != 0 {
		t.Fatalf("the preview wrote %d entries", n)
	}
	ask.DryRun = false
	done := h.bringRaw(typed.Bytes(), ask)
	// The breaker's instrument test was not made: its row stays silent.
	if done.Taken != 4 || done.Silent != 1 || done.Held() != 0 {
		t.Fatalf("taken %d, silent %d: %+v", done.Taken, done.Silent, done.Outcomes)
	}
	if fmt.Sprint(seen.Outcomes, seen.Results) != fmt.Sprint(done.Outcomes, done.Results) {
		t.Errorf("the preview said %+v, done was %+v", seen.Outcomes, done.Outcomes)
	}
	entries := map[string]store.Entry{}
	for _, e := range h.entries("ELM-4") {
		entries[e.Form[strings.Index(e.Form, "/")+1:]+" "+e.Device] = e
	}
	reading := func(e store.Entry, code string) forms.Reading { return e.Body.Readings[code] }
	e := entries["instrument "+deviceID("ELM-4", 0)]
	for code, want := range map[string]string{"trip_time_ms": "24.50 ms 24.5", "trip_current_ma": "5.1 mA 5.1", "test_current_ma": "6,8 mA 6.8"} {
		if r := reading(e, code); fmt.Sprint(r.Typed, " ", r.Unit, " ", r.Value) != want {
			t.Errorf("%s: got %+v, want %s", code, r, want)
		}
	}
	if e.Day != forms.Date(2026, time.November, 24) || e.Body.Given.Instrument == "" || e.Source != Paper || e.ReadBy == "" || e.TypedBy == "" {
		t.Errorf("instrument test: %+v", e)
	}
	e = entries["button "+deviceID("ELM-4", 0)]
	form := h.form(e.Form)
	for code, want := range form.Quick.Readings {
		if got := reading(e, code); fmt.Sprint(got.Value) != want {
			t.Errorf("one tap, %s: got %+v, want %s", code, got, want)
		}
	}
	e = entries["receptacle "+deviceID("ELM-4", 1)]
	if r := reading(e, "ground_ohm"); r.Above == nil || *r.Above != 1999 {
		t.Errorf("a bound: got %+v", r)
	}
	if got := reading(e, "wiring").Value; got != "correct" {
		t.Errorf("wiring: got %v", got)
	}
	e = entries["button "+deviceID("ELM-4", 2)]
	if e.Day != forms.Date(2026, time.November, 25) || e.Verdict.Result != forms.NotTested || e.Note != `=1+1 "behind" a rack` {
		t.Errorf("not tested: %+v", e)
	}
	if again := h.bringRaw(typed.Bytes(), ask); again.Taken != 0 || again.There != 4 {
		t.Errorf("again: %+v", again.Outcomes)
	}
}

// form gives the form of the book with an id.
func (h *house) form(id string) (form *forms.Form) {
	h.t.Helper()
	h.must(h.View(everything, func(v *store.View) error {
		list, err := v.Forms()
		for _, f := range list {
			if f.ID == id {
				form = f
			}
		}
		return err
	}))
	if form == nil {
		h.t.Fatalf("no form %s", id)
	}
	return form
}
