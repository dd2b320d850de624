package results

import (
	"bytes"
	"encoding/csv"
	"fmt"
	"math/rand/v2"
	"os"
	"strings"
	"testing"
	"time"

	"github.com/xuri/excelize/v2"

	"tripwell/export"
	"tripwell/export/intake"
	"tripwell/forms"
	"tripwell/store"
	"tripwell/store/record"
)

const samples = "../../testdata/results/"

func sampleFile(t testing.TB, name string) []byte {
	t.Helper()
	raw, err := os.ReadFile(samples + name)
	if err != nil {
		t.Fatal(err)
	}
	return raw
}

// Writes the samples anew: TRIPWELL_WRITE_SAMPLES=1 go test -run TestSample_Write ./export/results
func TestSample_Write(t *testing.T) {
	if os.Getenv("TRIPWELL_WRITE_SAMPLES") == "" {
		t.Skip("the samples stand in testdata/results; set TRIPWELL_WRITE_SAMPLES to write them anew")
	}
	w := &sampler{t: t, r: rand.New(rand.NewPCG(7, 11))}
	w.write("register.csv", w.register())
	w.write("monthly.xlsx", w.monthly())
	w.write("instrument.csv", w.instrument())
}

type sampler struct {
	t       *testing.T
	r       *rand.Rand
	outlets []outlet
}

type outlet struct{ building, floor, room, place, kind, tag, panel, circuit string }

func (w *sampler) write(name string, raw []byte) {
	if err := os.WriteFile(samples+name, raw, 0o644); err != nil {
		w.t.Fatal(err)
	}
}

// register invents three buildings of a mill.
func (w *sampler) register() []byte {
	rooms := map[string][]string{
		"Mill House": {"Kitchen", "Scullery", "Wash room", "Pantry", "Stair", "Loft store"},
		"Dye Works":  {"Vat hall", "Drying room", "Pump pit", "Wash bay", "Colour store"},
		"Boiler Row": {"Boiler room", "Coal yard", "Workshop", "Canteen", "Showers"},
	}
	spots := []string{"By the door", "By the sink", "North wall", "Behind the bench", "Under the window", "At the pump"}
	var out bytes.Buffer
	c := csv.NewWriter(&out)
	c.Write([]string{"site", "site_name", "zone", "standard", "building", "floor", "room", "place", "kind", "panel", "circuit", "tag"})
	for _, building := range []string{"Mill House", "Dye Works", "Boiler Row"} {
		n := 0
		for _, floor := range []string{"Ground", "First", "Second"} {
			for _, room := range rooms[building] {
				for _, spot := range spots {
					if n++; n > 85 {
						continue
					}
					tag := ""
					for tag == "" {
						if made, ok := record.DrawTag(w.r.Uint32() & (1<<30 - 1)); ok {
							tag = made
						}
					}
					o := outlet{building, floor, room, spot, "gfci-receptacle", strings.ReplaceAll(record.ShowTag(tag), "\u2011", "-"), "LP-" + fmt.Sprint(1+n/30), fmt.Sprint(n%30 + 1)}
					w.outlets = append(w.outlets, o)
					c.Write([]string{"BIRCH-9", "Birch Mill", "America/Chicago", "NEC", o.building, o.floor, o.room, o.place, o.kind, o.panel, o.circuit, o.tag})
				}
			}
		}
	}
	c.Flush()
	return out.Bytes()
}

// monthly is a year's sheet as people keep one: a worksheet a building, titles above, floors as rows of their own, months
// across, everybody ticking in their own way.
func (w *sampler) monthly() []byte {
	f := excelize.NewFile()
	defer f.Close()
	months := []string{"Jan", "Feb", "Mar", "Apr", "May", "Jun", "Jul", "Aug", "Sep", "Oct", "Nov"}
	bold, _ := f.NewStyle(&excelize.Style{Font: &excelize.Font{Bold: true}})
	dated, _ := f.NewStyle(&excelize.Style{NumFmt: 14})
	sheet, floor, row := "", "", 0
	for _, o := range w.outlets {
		if o.building != sheet {
			if sheet == "" {
				f.SetSheetName("Sheet1", o.building)
			} else {
				f.SetCellValue(sheet, fmt.Sprintf("A%d", row+2), "Total")
				f.SetCellFormula(sheet, fmt.Sprintf("C%d", row+2), fmt.Sprintf("COUNTA(C6:C%d)", row))
				f.NewSheet(o.building)
			}
			sheet, floor, row = o.building, "", 5
			f.SetCellValue(sheet, "A1", "Birch Mill: TEST buttons "+o.building+" 2026")
			f.MergeCell(sheet, "A1", "F1")
			f.SetCellStyle(sheet, "A1", "A1", bold)
			f.SetCellValue(sheet, "A2", "OK or initials when it went off and came back. Locked = could not get in.")
			head := append([]any{"Room", "Outlet"}, anys(months)...)
			f.SetSheetRow(sheet, "A5", ptr(append(head, "Last yearly test", "Remarks")))
		}
		if o.floor != floor {
			floor, row = o.floor, row+1
			f.SetCellValue(sheet, fmt.Sprintf("A%d", row), o.floor+" floor")
		}
		row++
		f.SetCellValue(sheet, fmt.Sprintf("A%d", row), o.room)
		f.SetCellValue(sheet, fmt.Sprintf("B%d", row), o.place)
		for m := range months {
			cell, _ := excelize.CoordinatesToCellName(3+m, row)
			day := 1 + w.r.IntN(28)
			var v any
			switch w.r.IntN(20) {
			case 0, 1, 2, 3, 4, 5:
				v = "OK"
			case 6, 7:
				v = "ok"
			case 8, 9:
				v = "JB"
			case 10, 11:
				v = "x"
			case 12, 13:
				v = day
			case 14:
				v = fmt.Sprintf("%d/%d JB", m+1, day)
			case 15, 16:
				f.SetCellStyle(sheet, cell, cell, dated)
				v = time.Date(2026, time.Month(m+1), day, 0, 0, 0, 0, time.UTC)
			case 17:
				v = "locked"
			case 18:
				v = "✓"
			default:
				continue
			}
			f.SetCellValue(sheet, cell, v)
			if d, ok := v.(time.Time); ok {
				f.SetCellValue(sheet, cell, d)
				f.SetCellStyle(sheet, cell, cell, dated)
			}
		}
		cell, _ := excelize.CoordinatesToCellName(3+len(months), row)
		f.SetCellValue(sheet, cell, time.Date(2025, time.Month(1+w.r.IntN(12)), 1+w.r.IntN(28), 0, 0, 0, 0, time.UTC))
		f.SetCellStyle(sheet, cell, cell, dated)
	}
	// What goes wrong in such sheets: an outlet nobody knows, a slip of the month, a word nobody can read.
	f.SetSheetRow(sheet, fmt.Sprintf("A%d", row+1), &[]any{"Canteen", "By the old oven", "OK"})
	f.SetCellValue("Mill House", "D8", "4/14")
	f.SetCellValue("Dye Works", "E9", "see Ann")
	f.SetCellValue("Dye Works", "F9", "FAIL")
	var out bytes.Buffer
	if err := f.Write(&out); err != nil {
		w.t.Fatal(err)
	}
	return out.Bytes()
}

// instrument is what a tester of the crew's wrote to its card.
func (w *sampler) instrument() []byte {
	var out bytes.Buffer
	out.WriteString("Analyser 2;;;;;;;;;;;\r\nSerial;TW-2207;;;;;;;;;;\r\n\r\nNo;Date;Time;Label;Condition;Found;U [V];Wiring;I test [mA];t [ms];R ground [Ω];Button;Reset;Restored;Remark\r\n")
	comma := func(f float64, digits int) string {
		return strings.Replace(fmt.Sprintf("%.*f", digits, f), ".", ",", 1)
	}
	n := 0
	for i, o := range w.outlets {
		if i%4 == 3 {
			continue
		}
		n++
		at := time.Date(2025, time.October, 6+n/30, 8, 0, 0, 0, time.UTC).Add(time.Duration(n%30) * 11 * time.Minute)
		ma, ms, ground, wiring, tag := comma(6.8+0.2*w.r.Float64(), 2), comma(24+140*w.r.Float64(), 1), comma(0.1+0.3*w.r.Float64(), 2), "correct", o.tag
		remark := ""
		switch n {
		case 20:
			ms, remark = "0,025", "read off by hand"
		case 41:
			ground = "<0,1"
		case 60:
			ms = ">10000"
		case 77:
			ground = "OL"
		case 90:
			tag = "ZZZ-ZZZ-Z"
		case 120:
			ms = "no trip"
		case 150:
			tag = strings.ToLower(strings.ReplaceAll(o.tag, "-", ""))
		case 171:
			ground = "-0,2"
		}
		fmt.Fprintf(&out, "%d;%s;%s;%s;sound;on;%s;%s;%s;%s;%s;yes;yes;yes;%s\r\n", n, at.Format("02.01.2006"), at.Format("15:04:05"), tag, comma(117+6*w.r.Float64(), 1), wiring, ma, ms, ground, remark)
	}
	return out.Bytes()
}

func anys(list []string) (out []any) {
	for _, s := range list {
		out = append(out, s)
	}
	return out
}

func ptr[T any](v T) *T { return &v }

func TestSample_MonthlySheetAnchorsDates(t *testing.T) {
	h := newHouse(t)
	h.register(string(sampleFile(t, "register.csv")))
	raw := sampleFile(t, "monthly.xlsx")
	dry := h.bringRaw(raw, Ask{Past: true, Site: "BIRCH-9", DryRun: true})
	if len(h.entries("BIRCH-9")) != 0 {
		t.Fatal("a preview wrote entries")
	}
	r := h.bringRaw(raw, Ask{Past: true, Site: "BIRCH-9"})
	if r.Taken != dry.Taken || r.Taken < 2000 || r.Rows < 255 {
		t.Errorf("taken %d of %d rows, foreseen %d", r.Taken, r.Rows, dry.Taken)
	}
	if r.Parked != 1 || r.LeftOut != 2 || r.Results[forms.Fail] != 1 || r.Results[forms.NotTested] < 50 {
		t.Errorf("parked %d, left out %d, results %v", r.Parked, r.LeftOut, r.Results)
	}
	if !strings.Contains(r.Rest, "By the old oven") || !strings.Contains(r.Rest, "see Ann") || !strings.Contains(r.Rest, "4/14") {
		t.Errorf("rows that are not in: %s", r.Rest)
	}
	all := h.entries("BIRCH-9")
	if len(all) != r.Taken {
		t.Errorf("the store holds %d entries, %d were taken", len(all), r.Taken)
	}
	for _, e := range all {
		if !e.Imported || e.Source != Spreadsheet || e.ReadBy != "" || len(e.Body.Readings) != 0 {
			t.Fatalf("an entry of an older list must be imported, with nothing read: %+v", e)
		}
	}
	h.anchored(t)
	// Corrected, the rows that are not in come in from their own file, year and floor and building with them.
	mended := strings.NewReplacer("4/14", "2/14", "see Ann", "OK").Replace(r.Rest)
	if back := h.bring(mended, Ask{Past: true, Site: "BIRCH-9"}); back.Taken != 2 || back.Parked != 1 || back.LeftOut != 0 {
		t.Errorf("corrected rows: %+v\n%s", back.Outcomes, r.Rest)
	}
	all = h.entries("BIRCH-9")
	again := h.bringRaw(raw, Ask{Past: true, Site: "BIRCH-9"})
	if again.Taken != 0 || again.There != r.Taken || len(h.entries("BIRCH-9")) != len(all) {
		t.Errorf("the same file again: %d taken, %d there", again.Taken, again.There)
	}
}

// anchored holds that dates count from what was taken in: nothing is overdue that the list says was done.
func (h *house) anchored(t *testing.T) {
	t.Helper()
	today := forms.DayOf(h.now)
	h.must(h.View(everything, func(v *store.View) error {
		met := map[string]int{}
		for row, err := range v.Due(store.DueAsk{On: today, Until: forms.NoDay}) {
			if err != nil {
				return err
			}
			if row.Last != forms.NoDay {
				met[row.Task]++
				if row.Last != row.Device.Last[row.Task].Day && row.Device.Last[row.Task].Result != forms.NotTested {
					t.Errorf("%s of %s: counted from %s, last entry %s", row.Task, row.Device.ID, row.Last, row.Device.Last[row.Task].Day)
				}
			}
		}
		if met[forms.TaskButton] < 250 || met[forms.TaskInstrument] != 255 {
			t.Errorf("dates that have an anchor: %v", met)
		}
		return nil
	}))
}

func TestSample_InstrumentFile(t *testing.T) {
	h := newHouse(t)
	h.register(string(sampleFile(t, "register.csv")))
	raw := sampleFile(t, "instrument.csv")
	ask := Ask{Source: InstrumentFile, ReadBy: "crew 1", Instrument: "TW-2207", DryRun: true}
	// 06.10.2025 is two days: the file is not taken in before a person says which.
	if r := h.bringRaw(raw, ask); r.LeftOut < 150 || !strings.Contains(r.Outcomes[0].Text, "day or the month") {
		t.Errorf("left out %d: %+v", r.LeftOut, r.Outcomes[0])
	}
	ask.DryRun, ask.Dates = false, intake.DMY
	r := h.bringRaw(raw, ask)
	if r.Rows < 190 || r.Taken != r.Rows-4 || r.Parked != 1 || r.Doubted != 1 || r.LeftOut != 2 {
		t.Fatalf("rows %d, taken %d, parked %d, doubted %d, left out %d: %+v", r.Rows, r.Taken, r.Parked, r.Doubted, r.LeftOut, r.Outcomes)
	}
	if r.Results[forms.Fail] != 1 || r.Results[forms.ConditionalFail] != 1 || r.Results[forms.Pass] != r.Taken-2 {
		t.Errorf("results %v", r.Results)
	}
	for _, e := range h.entries("BIRCH-9") {
		if e.Imported || e.Source != InstrumentFile || e.ReadBy == "" || e.Body.Given.Instrument == "" || e.Task != forms.TaskInstrument {
			t.Fatalf("entry %+v", e)
		}
	}
	if again := h.bringRaw(raw, ask); again.Taken != 0 || again.There != r.Taken {
		t.Errorf("the same file again: %d taken, %d there", again.Taken, again.There)
	}

	// The rows that are not in come back as a file of their own; corrected, they come in.
	mended := strings.NewReplacer("0,025", "25", "OL", ">1999", "-0,2", "0,2").Replace(r.Rest)
	back := h.bring(mended, ask)
	if back.Taken != 3 || back.Parked != 1 {
		t.Errorf("corrected rows: taken %d, parked %d: %+v\n%s", back.Taken, back.Parked, back.Outcomes, r.Rest)
	}
	past := h.bringRaw(raw, Ask{Past: true, Source: InstrumentFile, Dates: intake.DMY})
	if past.Taken != r.Taken {
		t.Errorf("as past results: taken %d, want %d", past.Taken, r.Taken)
	}
}

// What was brought in stands apart in the workbook: in the entries, in their readings, and behind every date and last
// test that counts from it.
func TestPast_StandsApartInTheWorkbook(t *testing.T) {
	h := smallHouse(t)
	h.bring("Tag,Last button test,Last annual test\n"+sinkTag+",2026-11-03,2026-03-05\n", Ask{Past: true})
	h.bring("Tag,Date,Test,Condition,Trip time (ms),Test current\n"+sinkTag+",2025-03-05,Instrument,sound,25,6.8\n", Ask{Past: true})
	h.bring("Tag,Date,Button,Reset,Power off,Restored\n"+sinkTag+",2026-11-20,y,y,y,y\n", Ask{ReadBy: "Crew 1"})
	var out bytes.Buffer
	h.must(export.WorkbookOf(&out, h.Store, everything, export.WorkbookAsk{From: forms.NoDay, To: forms.NoDay, Now: h.now}))
	f, err := excelize.OpenReader(&out)
	h.must(err)
	defer f.Close()
	marked := func(sheet, column, must string) map[string]string {
		rows, err := f.GetRows(sheet)
		h.must(err)
		got := map[string]string{}
		for _, cells := range rows[1:] {
			row := map[string]string{}
			for i, cell := range cells {
				row[rows[0][i]] = cell
			}
			if row["Tag"] != "" {
				got[row[must]] = row[column]
			}
		}
		return got
	}
	apart := "imported: not witnessed by Tripwell"
	if got := marked("Entries", "Imported", "Test day"); got["2026-11-03"] != apart || got["2026-03-05"] != apart || got["2025-03-05"] != apart || got["2026-11-20"] != "" {
		t.Errorf("entries %v", got)
	}
	if got := marked("Readings", "Status", "Test day"); got["2025-03-05"] != "imported" {
		t.Errorf("readings %v", got)
	}
	if got := marked("Due", "Imported", "Test"); got["Instrument test"] != apart || got["Button test"] != "" {
		t.Errorf("dates %v", got)
	}
	if got := marked("Register", "Imported", "Site code"); got["ELM-4"] != "Instrument test" {
		t.Errorf("register %v", got)
	}
}
