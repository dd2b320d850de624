package results

import (
	"bytes"
	"fmt"
	"strings"
	"testing"
	"time"

	"github.com/xuri/excelize/v2"

	"tripwell/export/intake"
	"tripwell/export/paper"
	"tripwell/forms"
	"tripwell/store"
)

// small is a site with one of everything a rule needs.
const small = `site,site_name,standard,building,floor,room,place,kind,panel,circuit,tag
ELM-4,Elm Yard,NEC,North,Ground,Kitchen,By the sink,gfci-receptacle,LP-1,1,%s
ELM-4,Elm Yard,NEC,North,Ground,Kitchen,By the door,receptacle,LP-1,2,
ELM-4,Elm Yard,NEC,South,Ground,Kitchen,By the sink,gfci-receptacle,LP-2,1,
ELM-4,Elm Yard,NEC,South,Ground,Plant,Panel,gfci-breaker,LP-2,5,
ELM-4,Elm Yard,NEC,South,Ground,Plant,Board,rcd,UV-1,3,
`

const sinkTag = "K7Q-M2P-3"

func smallHouse(t testing.TB) *house {
	h := newHouse(t)
	h.register(fmt.Sprintf(small, sinkTag))
	return h
}

func TestReadings_Rows(t *testing.T) {
	today := "2026-11-30"
	for _, c := range []struct {
		name, csv          string
		ask                Ask
		state, column, say string // what becomes of the row
		result             string
	}{
		{"one tap on paper", "Tag,Test day,All in order,Read by\nk7qm2p3,2026-11-02,yes,Crew 1", Ask{Source: Paper}, Taken, "", "", forms.Pass},
		{"an address instead of a tag", "Tag,Test day,All in order\nHTTPS://TAGS.EXAMPLE/T/K7QM2P3,2026-11-02,✓", Ask{ReadBy: "Crew 1"}, Taken, "", "", forms.Pass},
		{"by place", "Building,Room,Place,Date,Button,Reset\nSouth,Kitchen,by the SINK,2026-11-02,y,n", Ask{ReadBy: "Crew 1"}, Taken, "", "", forms.Fail},
		{"place in one cell", "Place,Date,Button,Reset,Power off,Restored\nNorth · Ground · Kitchen · By the sink,2026-11-02,y,y,y,y", Ask{ReadBy: "Crew 1"}, Taken, "", "", forms.Pass},
		{"by panel and circuit", "Panel,Circuit,Date,Button,Reset,Power off,Restored\nLP-2,5,2026-11-02,y,y,y,y", Ask{ReadBy: "Crew 1"}, Taken, "", "", forms.Pass},
		{"a place that fits two", "Site,Room,Place,Date,Button\nELM-4,Kitchen,By the sink,2026-11-02,y", Ask{ReadBy: "Crew 1"}, LeftOut, "Place", "2 devices fit", ""},
		{"a place nobody knows", "Place,Date,Button\nRoof,2026-11-02,y", Ask{ReadBy: "Crew 1"}, Parked, "Place", "No device is known", ""},
		{"a tag nobody knows", "Tag,Date,Button\n" + strangeTag() + ",2026-11-02,y", Ask{ReadBy: "Crew 1"}, Parked, "Tag", "No device is known", ""},
		{"a misread tag", "Tag,Date,Button\nK7QM2P4,2026-11-02,y", Ask{ReadBy: "Crew 1"}, Parked, "Tag", "check character", ""},
		{"a site nobody knows", "Site,Place,Date,Button\nOAK-1,By the sink,2026-11-02,y", Ask{ReadBy: "Crew 1"}, Parked, "Site", "no such site", ""},
		{"a day to come", "Tag,Date,Button\n" + sinkTag + ",2026-12-24,y", Ask{ReadBy: "Crew 1"}, LeftOut, "Date", "still to come", ""},
		{"two days in one", "Tag,Date,Button\n" + sinkTag + ",03/04/2026,y", Ask{ReadBy: "Crew 1"}, LeftOut, "Date", "day or the month", ""},
		{"the day first", "Tag,Date,Button,Reset\n" + sinkTag + ",03/04/2026,y,y", Ask{ReadBy: "Crew 1", Dates: intake.DMY}, Taken, "", "", forms.Pass},
		{"no day", "Tag,Button\n" + sinkTag + ",y", Ask{ReadBy: "Crew 1"}, LeftOut, "day", "on which day", ""},
		{"nobody read", "Tag,Date,Button\n" + sinkTag + "," + today + ",y", Ask{}, LeftOut, "read_by", "who read", ""},
		{"somebody unknown read", "Tag,Date,Button,Tester\n" + sinkTag + "," + today + ",y,Somebody", Ask{}, LeftOut, "Tester", "Nobody here", ""},
		{"locked", "Tag,Date,Not tested because,Test\n" + sinkTag + "," + today + ",locked,button", Ask{ReadBy: "Crew 1"}, Taken, "", "", forms.NotTested},
		{"seconds said in the heading", "Tag,Date,Trip time (s),Test current (mA)\n" + sinkTag + "," + today + ",0.025,6.8", Ask{ReadBy: "Crew 1"}, Taken, "", "", forms.Pass},
		{"seconds said behind the figure", "Tag,Date,Trip time (ms),Test current\n" + sinkTag + "," + today + ",0.025 s,6.8 mA", Ask{ReadBy: "Crew 1"}, Taken, "", "", forms.Pass},
		{"seconds in a column of milliseconds", "Tag,Date,Trip time (ms)\n" + sinkTag + "," + today + ",0.025", Ask{ReadBy: "Crew 1"}, Doubt, "Trip time (ms)", "0.025 s would be usual", ""},
		{"milliseconds in a column of seconds", "Tag,Date,Trip time [s]\n" + sinkTag + "," + today + ",25", Ask{ReadBy: "Crew 1"}, Doubt, "Trip time [s]", "25 ms would be usual", ""},
		{"doubted and wanted all the same", "Tag,Date,Trip time [s]\n" + sinkTag + "," + today + ",25", Ask{ReadBy: "Crew 1", Doubted: true}, Taken, "", "", forms.Incomplete},
		{"ounces in a column of grams", "Place,Kind,Site,Date,\"Ground-blade retention, upper (g)\"\nBy the door,Receptacle,ELM-4," + today + ",4", Ask{ReadBy: "Crew 1"}, Doubt, "Ground-blade retention, upper (g)", "4 oz would be usual", ""},
		{"a negative figure", "Tag,Date,Trip time (ms)\n" + sinkTag + "," + today + ",-25", Ask{ReadBy: "Crew 1"}, LeftOut, "Trip time (ms)", "negative", ""},
		{"over range without a figure", "Tag,Date,Ground resistance (ohm)\n" + sinkTag + "," + today + ",OL", Ask{ReadBy: "Crew 1"}, LeftOut, "Ground resistance (ohm)", "over its range", ""},
		{"a unit of something else", "Tag,Date,Trip time (ms)\n" + sinkTag + "," + today + ",25 V", Ask{ReadBy: "Crew 1"}, LeftOut, "Trip time (ms)", "unit", ""},
		{"a word for a figure", "Tag,Date,Trip time (ms)\n" + sinkTag + "," + today + ",fast", Ask{ReadBy: "Crew 1"}, LeftOut, "Trip time (ms)", "no figure", ""},
		{"a result alone", "Tag,Date,Result\n" + sinkTag + "," + today + ",OK", Ask{ReadBy: "Crew 1", Task: "button"}, LeftOut, "", "past results", ""},
		{"a test the device does not have", "Site,Place,Date,Test,Button\nELM-4,By the door," + today + ",Button test,y", Ask{ReadBy: "Crew 1"}, LeftOut, "Test", "no button test", ""},
		{"an instrument nobody knows", "Tag,Date,Trip time (ms),Meter\n" + sinkTag + "," + today + ",25,Old one", Ask{ReadBy: "Crew 1"}, LeftOut, "Meter", "no such instrument", ""},
		{"a mapped heading", "Ref,When,Zeit\n" + sinkTag + "," + today + ",0.025", Ask{ReadBy: "Crew 1", Columns: map[string]string{"Ref": "tag", "When": "day", "Zeit": "trip_time_ms in s"}}, Taken, "", "", forms.Incomplete},
		{"a row of totals", "Tag,Date,Trip time (ms)\nTotal,,250", Ask{ReadBy: "Crew 1"}, Silent, "", "totals", ""},
		{"a round not done yet", "Tag,Place,Test day,All in order\n" + sinkTag + ",North,,", Ask{ReadBy: "Crew 1"}, Silent, "", "no test", ""},
	} {
		t.Run(c.name, func(t *testing.T) {
			h := smallHouse(t)
			r := h.bring(c.csv, c.ask)
			o := only(t, r)
			if o.State != c.state || o.Column != c.column || !strings.Contains(o.Text, c.say) || c.result != "" && o.Result != c.result {
				t.Errorf("got %+v", o)
			}
			if held := c.state == LeftOut || c.state == Doubt || c.state == Parked; held != (r.Rest != "") || held && !strings.Contains(r.Rest, c.say) {
				t.Errorf("rows that are not in: %q", r.Rest)
			}
			made := h.entries("ELM-4")
			if len(made) != r.Taken || (r.Taken == 1) != (c.state == Taken) {
				t.Fatalf("%d entries, %d taken", len(made), r.Taken)
			}
			if r.Taken == 0 {
				return
			}
			if e := made[0]; e.Imported || e.ReadBy == "" || e.Day.String() != o.Day || e.Verdict.Result != o.Result {
				t.Errorf("entry %+v, foreseen %+v", e, o)
			}
			if again := h.bring(c.csv, c.ask); again.Taken != 0 || again.There != 1 {
				t.Errorf("the same file again: %+v", again)
			}
		})
	}
}

// strangeTag is a good tag that is bound to nothing.
func strangeTag() string { return "HQF7009" }

func TestReadings_FiguresAreKeptAsTyped(t *testing.T) {
	h := smallHouse(t)
	h.bring("Tag;Date;Time;Trip time (s);Test current (mA);Ground resistance;Trip current (mA);Typed by;Meter;Note\n"+
		sinkTag+";2026-11-02;2:35 PM;0,025;6,8;<0,1;>30;Crew 1;tw-2207;wet floor\n", Ask{ReadBy: "Crew 1"})
	e := h.entries("ELM-4")[0]
	if r := e.Body.Readings["trip_time_ms"]; r.Typed != "0,025" || r.Unit != "s" || r.Value != 25.0 {
		t.Errorf("trip time %+v", r)
	}
	if r := e.Body.Readings["ground_ohm"]; r.Below == nil || *r.Below != 0.1 {
		t.Errorf("ground %+v", r)
	}
	if r := e.Body.Readings["trip_current_ma"]; r.Above == nil || *r.Above != 30 {
		t.Errorf("trip current %+v", r)
	}
	// 14:35 in Chicago is 20:35 UTC in November.
	if got := e.At.UTC().Format(time.RFC3339); got != "2026-11-02T20:35:00Z" {
		t.Errorf("at %s", got)
	}
	if e.TypedBy == "" || e.Note != "wet floor" || e.Body.Given.Instrument == "" || e.Body.Given.CalibrationDue == nil || e.Body.Given.Kind != forms.GFCIReceptacle || e.Source != Spreadsheet {
		t.Errorf("entry %+v", e)
	}
}

func TestReadings_ChangedRowIsNamedNotLost(t *testing.T) {
	h := smallHouse(t)
	sheet := "Tag,Date,Trip time (ms),Test current\n" + sinkTag + ",2026-11-02,25,6.8\n"
	h.bring(sheet, Ask{ReadBy: "Crew 1"})
	if o := only(t, h.bring(strings.Replace(sheet, "25", "35", 1), Ask{ReadBy: "Crew 1"})); o.State != LeftOut || !strings.Contains(o.Text, "other values") {
		t.Errorf("got %+v", o)
	}
	r := h.bring(sheet+sinkTag+",2026-11-02,35,6.8\n"+sinkTag+",2026-11-02,25,6.8\n", Ask{ReadBy: "Crew 1"})
	if r.Taken != 0 || r.There != 2 || r.LeftOut != 1 {
		t.Errorf("two results of one test: %+v", r.Outcomes)
	}
	if got := len(h.entries("ELM-4")); got != 1 {
		t.Errorf("%d entries, want 1", got)
	}
}

// An instrument writes each condition of an RCD's test as a row of its own: they are one test.
func TestReadings_ConditionsInRowsAreOneTest(t *testing.T) {
	h := smallHouse(t)
	sheet := "Panel,Circuit,Date,Time,Multiple,Phase,Trip time (ms)\n"
	for i, c := range []string{"0.5,0,no trip", "0.5,180,no trip", "1,0,24", "1,180,31", "5,0,12", "5,180,14"} {
		sheet += fmt.Sprintf("UV-1,3,2026-11-02,09:%02d,%s\n", i, c)
	}
	r := h.bring(sheet, Ask{ReadBy: "Crew 1", Source: InstrumentFile})
	if r.Taken != 1 || len(r.Outcomes) != 6 {
		t.Fatalf("got %+v", r.Outcomes)
	}
	e := h.entries("ELM-4")[0]
	if len(e.Body.Series) < 6 || e.Body.Series[3].At["phase_deg"] != 180.0 || len(e.Body.Readings) != 0 {
		t.Errorf("series %+v, readings %+v", e.Body.Series, e.Body.Readings)
	}
	if again := h.bring(sheet, Ask{ReadBy: "Crew 1", Source: InstrumentFile}); again.Taken != 0 || again.There != 1 {
		t.Errorf("again: %+v", again.Outcomes)
	}
}

// A round's worksheet comes back filled in: every heading the program prints is understood, in every form.
func TestReadings_RoundSheetComesBack(t *testing.T) {
	h := smallHouse(t)
	f := excelize.NewFile()
	defer f.Close()
	lead, err := paper.Lead()
	h.must(err)
	tail, err := paper.Tail()
	h.must(err)
	row := 4
	f.SetCellValue("Sheet1", "A1", "Round of November, Elm Yard")
	heads := map[string]int{}
	put := func(header, value string) {
		if _, ok := heads[header]; !ok {
			heads[header] = len(heads) + 1
			cell, _ := excelize.CoordinatesToCellName(heads[header], 3)
			f.SetCellValue("Sheet1", cell, header)
		}
		cell, _ := excelize.CoordinatesToCellName(heads[header], row)
		f.SetCellValue("Sheet1", cell, value)
	}
	figures := map[string]string{"trip_time_ms": "24", "trip_current_ma": "5.1", "test_current_ma": "6.8", "voltage_v": "120", "ground_ohm": "0.2", "retention_g": "400"}
	fill := func(form, place, panel, task string) {
		for _, c := range append(append(lead, columnsOf(t, form)...), tail...) {
			switch c.About {
			case paper.AboutPlace:
				put(c.Header, place)
			case paper.AboutCircuit:
				put(c.Header, panel)
			case paper.AboutTask:
				put(c.Header, task)
			case paper.AboutDay:
				put(c.Header, "2026-11-05")
			case paper.AboutReadBy:
				put(c.Header, "Crew 1")
			case "":
				switch answers := c.Answers(); {
				case c.Quick != nil:
				case len(answers) > 0:
					put(c.Header, answers[0])
				case figures[c.Reading] != "":
					put(c.Header, figures[c.Reading])
				}
			}
		}
		row++
	}
	fill("gfci-receptacle/instrument", "North · Ground · Kitchen · By the sink", "LP-1 / 1", "Instrument test")
	fill("gfci-receptacle/button", "South · Ground · Kitchen · By the sink", "LP-2 / 1", "Button test")
	fill("receptacle/receptacle", "North · Ground · Kitchen · By the door", "LP-1 / 2", "Receptacle test")
	fill("rcd/instrument", "South · Ground · Plant · Board", "UV-1 / 3", "Instrument test")
	var out bytes.Buffer
	h.must(f.Write(&out))
	r := h.bringRaw(out.Bytes(), Ask{Source: Paper, Site: "ELM-4", TypedBy: "Crew 1"})
	if r.Taken != 4 || r.Results[forms.Pass] < 3 {
		t.Fatalf("taken %d, results %v: %+v", r.Taken, r.Results, r.Outcomes)
	}
	for _, heading := range r.Headings {
		if heading.Column == "" {
			t.Errorf("the heading %q is not understood", heading.Heading)
		}
	}
	for _, e := range h.entries("ELM-4") {
		// The sheet has a column for each condition of the form: six, and the one test of sets that ask for one.
		if e.Source != Paper || e.TypedBy == "" || e.Form == "rcd/instrument" && len(e.Body.Series) != 7 {
			t.Errorf("entry %+v", e)
		}
	}
	if again := h.bringRaw(out.Bytes(), Ask{Source: Paper, Site: "ELM-4", TypedBy: "Crew 1"}); again.Taken != 0 || again.There != 4 {
		t.Errorf("again: %+v", again.Outcomes)
	}
}

func columnsOf(t *testing.T, id string) []paper.Column {
	t.Helper()
	form, ok := forms.Shipped().Form(id)
	if !ok {
		t.Fatalf("no form %s", id)
	}
	cols, err := paper.Columns(form)
	if err != nil {
		t.Fatal(err)
	}
	return cols
}

func TestPast_LastDaysAnchorEachTask(t *testing.T) {
	h := smallHouse(t)
	sheet := "Tag,Last button test,Result,Last annual test,By\n" + sinkTag + ",2026-11-03,OK,Mar 2026,J.B.\n"
	r := h.bring(sheet, Ask{Past: true})
	if r.Taken != 2 || r.Results[forms.Pass] != 2 {
		t.Fatalf("got %+v", r)
	}
	h.must(h.View(everything, func(v *store.View) error {
		d, err := v.Device(h.entries("ELM-4")[0].Device, forms.DayOf(h.now))
		h.must(err)
		for _, due := range d.Due {
			want := map[string]string{"button": "2026-11-03", "instrument": "2026-03-01"}[due.Task]
			if due.Last.String() != want {
				t.Errorf("%s counts from %s, want %s", due.Task, due.Last, want)
			}
		}
		return nil
	}))
	for _, e := range h.entries("ELM-4") {
		if !e.Imported || len(e.Flags) > 0 || e.ReadBy != "" {
			t.Errorf("entry %+v", e)
		}
	}
	if _, err := plan(h.Store, h.ID(), &intake.Book{Sheets: []intake.Sheet{{Rows: [][]intake.Cell{{{Text: "Tag"}, {Text: "Last test"}}}}}}, Ask{}); err == nil || !strings.Contains(err.Error(), "past results") {
		t.Errorf("last days as readings: %v", err)
	}
}

func TestPast_Marks(t *testing.T) {
	p := &planner{ask: Ask{Past: true}}
	march := column{about: aboutMonth, year: 2026, month: time.March}
	for text, want := range map[string]string{
		"OK": "pass 2026-03-01", "ok.": "pass 2026-03-01", "x": "pass 2026-03-01", "✓": "pass 2026-03-01", "JB": "pass 2026-03-01", "J.B.": "pass 2026-03-01",
		"14": "pass 2026-03-14", "14th": "pass 2026-03-14", "3/14": "pass 2026-03-14", "14.3.": "pass 2026-03-14", "3/3": "pass 2026-03-03", "OK 3/14 JB": "pass 2026-03-14",
		"2026-03-14": "pass 2026-03-14", "14 Mar 2026": "pass 2026-03-14", "March 14, 2026": "pass 2026-03-14", "FAIL": "fail 2026-03-01", "✗ 14 JB": "fail 2026-03-14", "fail 14": "fail 2026-03-14",
		"locked": "not-tested 2026-03-01", "No access": "not-tested 2026-03-01", "F": "fail 2026-03-01",
		"32": "", "4/14": "", "2026-04-14": "", "see Ann": "", "n": "", "?": "", "0": "",
	} {
		m, why := p.monthMark(intake.Cell{Text: text}, march)
		got := ""
		if why == nil {
			got = m.result + " " + m.day.String()
		}
		if got != want {
			t.Errorf("%q: got %q, want %q", text, got, want)
		}
	}
}

func TestPast_MonthsWithoutAYearAreAsked(t *testing.T) {
	h := smallHouse(t)
	sheet := "Tag,Nov,Dec,Jan\n" + sinkTag + ",OK,OK,OK\n"
	if r := h.bring(sheet, Ask{Past: true}); r.LeftOut != 3 || r.Taken != 0 {
		t.Errorf("without a year: %+v", r.Outcomes)
	}
	r := h.bring("Log 2025/26,,,\n"+sheet, Ask{Past: true})
	var days []string
	for _, e := range h.entries("ELM-4") {
		days = append(days, e.Day.String())
	}
	if got := strings.Join(days, " "); r.Taken != 3 || got != "2025-11-01 2025-12-01 2026-01-01" {
		t.Errorf("days %s", got)
	}
}
