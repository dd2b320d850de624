package results

import (
	"bytes"
	"testing"

	"github.com/xuri/excelize/v2"

	"tripwell/export/intake"
	"tripwell/export/paper"
	"tripwell/forms"
	"tripwell/store"
	"tripwell/store/record"
)

// A round made in the office goes out as a worksheet and comes back filled in by hand: its tests count for it, whatever day they carry.
func TestRound_ItsWorksheetComesBackToIt(t *testing.T) {
	h := smallHouse(t)
	site, round := record.NamedID("site", "ELM-4"), record.NamedID("round")
	h.must(h.append(store.Draft{Kind: "round.made", Log: site, Subject: round, Body: map[string]any{"set": map[string]any{
		"stops": []string{deviceID("ELM-4", 0) + "/button", deviceID("ELM-4", 3) + "/button"}}}}))
	var raw bytes.Buffer
	h.must(h.View(everything, func(v *store.View) error {
		list, err := paper.RoundOf(v, forms.DayOf(h.now), paper.RoundAsk{Site: site, Round: round, Until: forms.NoDay, On: forms.DayOf(h.now)})
		if err == nil && (len(list.Stops) != 2 || list.Code != store.RoundCode(round)) {
			t.Errorf("got %d stops of round %q, want both of the round made", len(list.Stops), list.Code)
		}
		if err == nil {
			err = paper.Worksheet(&raw, list)
		}
		return err
	}))
	f, err := excelize.OpenReader(&raw)
	h.must(err)
	name := f.GetSheetList()[0]
	heads, err := f.GetRows(name)
	h.must(err)
	for i, head := range heads[0] {
		for row, value := range map[string]map[string]string{"2": {"Test day": "2026-11-28", "Read by": "Crew 1"}} {
			cell, _ := excelize.ColumnNumberToName(i + 1)
			if v := value[head]; v != "" {
				h.must(f.SetCellStr(name, cell+row, v))
			}
			if i == 6 { // the one-tap answer stands first after the leading columns
				h.must(f.SetCellStr(name, cell+row, "yes"))
			}
		}
	}
	var filled bytes.Buffer
	h.must(f.Write(&filled))
	book, err := intake.Open("round.xlsx", bytes.NewReader(filled.Bytes()), intake.Caps{})
	h.must(err)
	report, err := Import(t.Context(), h.Store, h.ID(), book, Ask{Source: Paper}, nil)
	h.must(err)
	if report.Taken != 1 {
		t.Fatalf("got %+v", report)
	}
	h.must(h.View(everything, func(v *store.View) error {
		r, err := v.Round(round)
		if err == nil && (r.Stops[0].State != store.StopDone || !r.Stops[0].Paper || r.Stops[1].State != store.StopLeft) {
			t.Errorf("got %+v, want the first done on paper", r.Stops)
		}
		return err
	}))
}
