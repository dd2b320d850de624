package register

import (
	"bytes"
	"flag"
	"fmt"
	"math/rand/v2"
	"os"
	"strings"
	"testing"
	"time"

	"github.com/xuri/excelize/v2"
	"golang.org/x/text/encoding/charmap"

	"tripwell/export/intake"
)

var writeSamples = flag.Bool("write-samples", false, "write testdata/register-messy.* anew")

const (
	messyXLSX = "../../testdata/register-messy.xlsx"
	messyCSV  = "../../testdata/register-messy.csv"
)

// messyMapping is what a manager has to say of the samples: one heading and one word that nothing could know, which way
// round the dates are, and the zone of the new sites.
var messyMapping = Mapping{Columns: map[string]string{"Which one": "place"}, Kinds: map[string]string{"Thing with button": "gfci-receptacle"}, Dates: intake.MDY, Zone: "America/Chicago"}

// building is one worksheet of the sample.
type building struct {
	name   string
	head   []string
	rooms  map[string][]string // by floor
	floors []string
}

var buildings = []building{
	{"Ash House", []string{"Bldg", "Flr", "Rm", "Which one", "Type", "Pnl", "Ckt #", "Brkr", "Wire", "Amps", "Brand", "Install date", "Gnd", "Remarks"},
		map[string][]string{"Basement": {"Laundry", "Boiler room", "Workshop"}, "Ground": {"Kitchen", "Scullery", "Café", "Washroom"}, "First": {"Bath 1", "Bath 2", "Pantry"}}, []string{"Basement", "Ground", "First"}},
	{"Birch Hall", []string{"Floor", "Room", "Which one", "Kind of device", "Panel/Ckt", "Breaker (A)", "Rating", "Manufacturer", "Model No.", "Installed on", "Grounded", "Notes"},
		map[string][]string{"Ground": {"Hall", "Servery", "Bar", "Stage left", "Stage right"}, "Gallery": {"Gallery", "Control desk"}}, []string{"Ground", "Gallery"}},
	{"Pump House", []string{"Room", "Which one", "Device", "Board", "Circuit", "MCB (A)", "IΔn", "Installed", "Comments"},
		map[string][]string{"": {"Pump room", "Chemical store", "Yard"}}, []string{""}},
}

// messySheet types a building's outlets the way different hands do, n of them.
func messySheet(r *rand.Rand, b building, n int) [][]any {
	kinds := []string{"GFCI", "gfi outlet", "GFCI receptacle", "Duplex", "Receptacle behind a GFCI", "GFCI", "Thing with button"}
	if b.name == "Pump House" {
		kinds = []string{"RCD", "FI", "rcbo"}
	}
	pick := func(list ...string) string { return list[r.IntN(len(list))] }
	day := func() any {
		d := time.Date(2014+r.IntN(12), time.Month(1+r.IntN(12)), 1+r.IntN(28), 0, 0, 0, 0, time.UTC)
		switch r.IntN(6) {
		case 0:
			return d.Format("1/2/06")
		case 1:
			return d.Format("2 Jan 2006")
		case 2:
			return d.Format("2006-01-02")
		case 3:
			return pick("", "-", "n/a")
		}
		return d
	}
	amps := func() any {
		return []any{"20A", 20, "20 A", 15, "15 amp", "20"}[r.IntN(6)]
	}
	// What is said of a circuit agrees from row to row, however it is written.
	breaker := func(i int) any {
		n := []int{20, 15}[i/3%2]
		return []any{n, fmt.Sprintf("%dA", n), fmt.Sprintf("%d A", n), fmt.Sprintf("%d amp", n)}[r.IntN(4)]
	}
	var rows [][]any
	for i := 0; i < n; i++ {
		floor := b.floors[i*len(b.floors)/n]
		rooms := b.rooms[floor]
		room := rooms[r.IntN(len(rooms))]
		spot := fmt.Sprintf("%s %d", pick("By the door", "Left of sink", "Under window", "Counter, left", "North wall", "Beside the\nfreezer"), i+1)
		circuit := fmt.Sprint(1 + i/3)
		if i%17 == 0 {
			circuit = fmt.Sprintf("%d/%d", 1+i/3, 3+i/3)
		}
		var row []any
		switch b.name {
		case "Ash House":
			row = []any{"Main", floor, room, spot, pick(kinds...), "LP-1", circuit, breaker(i), []string{"12 AWG", "14 AWG"}[i/3%2], amps(), pick("Make A", "Make B", ""), day(), pick("Y", "y", "✓", "yes", ""), pick("", "", "loose, check", "\"old\" plate")}
		case "Birch Hall":
			row = []any{floor, room, spot, pick(kinds...), "BH / " + circuit, breaker(i), amps(), pick("Make C", "Make A"), pick("C-20", ""), day(), pick("Y", "x", "OK"), ""}
		default:
			row = []any{room, spot, pick(kinds...), "DB-1", circuit + "." + fmt.Sprint(i), []any{16, "16A", "20 A"}[r.IntN(3)], pick("30", "30 mA", "0.03 A", "30mA"), day(), ""}
		}
		rows = append(rows, row)
		if i%41 == 40 {
			rows = append(rows, []any{})
		}
	}
	return rows
}

// messyBook is the sample workbook: three buildings, a page of notes, a hidden list; titles, totals, merged cells, and
// ten rows that cannot be taken.
func messyBook(t testing.TB) *excelize.File {
	t.Helper()
	r := rand.New(rand.NewPCG(20261201, 7))
	f := excelize.NewFile()
	check := func(err error) {
		t.Helper()
		if err != nil {
			t.Fatal(err)
		}
	}
	bold, err := f.NewStyle(&excelize.Style{Font: &excelize.Font{Bold: true, Size: 14}})
	check(err)
	date, err := f.NewStyle(&excelize.Style{NumFmt: 14})
	check(err)
	for i, b := range buildings {
		if i == 0 {
			check(f.SetSheetName("Sheet1", b.name))
		} else {
			_, err := f.NewSheet(b.name)
			check(err)
		}
		put := func(row int, cells []any) {
			for c, v := range cells {
				if v == "" {
					continue
				}
				at, err := excelize.CoordinatesToCellName(c+1, row)
				check(err)
				check(f.SetCellValue(b.name, at, v))
				if _, ok := v.(time.Time); ok {
					check(f.SetCellStyle(b.name, at, at, date))
				}
			}
		}
		put(1, []any{strings.ToUpper(b.name) + " – OUTLETS"})
		check(f.MergeCell(b.name, "A1", "H1"))
		check(f.SetCellStyle(b.name, "A1", "A1", bold))
		put(2, []any{"Walked by Crew 2, typed up afterwards", "", "", "Rev. 4"})
		head := make([]any, len(b.head))
		for c, h := range b.head {
			head[c] = h
		}
		put(4, head)
		row, first := 5, 5
		for _, cells := range messySheet(r, b, []int{220, 150, 60}[i]) {
			put(row, cells)
			row++
		}
		if i == 0 {
			// The building is typed once and merged beside the first rows; one rating is a formula.
			for n := first + 1; n < first+30; n++ {
				check(f.SetCellValue(b.name, fmt.Sprintf("A%d", n), nil))
			}
			check(f.MergeCell(b.name, fmt.Sprintf("A%d", first), fmt.Sprintf("A%d", first+29)))
			put(row, []any{"", "UPSTAIRS, STILL TO BE WALKED"})
			row++
			for _, bad := range [][]any{
				{"Main", "First", "Attic", "Loft hatch", "Light switch", "LP-1", "144", "20A"},
				{"Main", "First", "", "", "GFCI", "LP-1", "145", "20A"},
				{"Main", "First", "Attic", "Cistern", "GFCI", "LP-1", time.Date(2026, 10, 12, 0, 0, 0, 0, time.UTC), "20A"},
				{"Main", "First", "Attic", "Fan", "GFCI", "LP-1", "147", "twenty"},
				{"Main", "First", "Attic", "Gable", "GFCI", "", "148", "20A"},
				{"Main", "First", "Attic", "Stairhead", "GFCI", "LP-1", "149", "20A", "12", "20A", "", "31/31/2020"},
				{"Main", "First", "Attic", "Stairhead 2", "GFCI", "LP-1", "149", "20A", "12", "20A", "", "2019"},
				{"Main", "First", "Attic", "Skylight", "GFCI", "LP-1", "150", "20A", "12", "20V"},
				{"Main", "First", "Attic", "Twice", "GFCI", "LP-1", "151", "20A"},
				{"Main", "First", "attic", "twice", "GFCI", "LP-1", "151", "20A"},
			} {
				put(row, bad)
				row++
			}
		}
		row++
		put(row, []any{"Total", row - first - 1})
	}
	for _, name := range []string{"Notes", "Lists"} {
		_, err := f.NewSheet(name)
		check(err)
	}
	check(f.SetCellValue("Notes", "A1", "Keys are with the caretaker."))
	check(f.SetCellValue("Notes", "A2", "Chemical store only with a mask."))
	check(f.SetCellValue("Lists", "A1", "Type"))
	check(f.SetCellValue("Lists", "A2", "GFCI"))
	check(f.SetSheetVisible("Lists", false))
	return f
}

// messyText is the sample as another office saved it: Windows-1252, semicolons, a decimal comma.
func messyText(t testing.TB) []byte {
	t.Helper()
	r := rand.New(rand.NewPCG(20261201, 9))
	var b strings.Builder
	b.WriteString("Verzeichnis der Steckdosen – Café Ölmühle;;;;;;\r\n;;;;;;\r\nSite;Etage;Raum;Ort;Type;Panel;Circuit;Sensitivity;Cord length (ft);Installed;Remarks\r\n")
	for i := range 60 {
		fmt.Fprintf(&b, "OELMUEHLE;EG;%s;Platz %d;%s;UV-1;%d;%s;%s;%s;%s\r\n", []string{"Küche", "Café", "Hof"}[r.IntN(3)], i+1, []string{"RCD", "FI/LS", "Duplex"}[r.IntN(3)], 1+i, []string{"0,03 A", "30 mA", "30"}[r.IntN(3)],
			[]string{"", "6,5", "10"}[r.IntN(3)], []string{"31.12.2019", "3. März 2021", "14.02.2022", ""}[r.IntN(4)], []string{"", "\"\"\"neu\"\"\r\nbeschriften\"", "1,5 m über Boden"}[r.IntN(3)])
	}
	b.WriteString("Summe;60;;;;;\r\n")
	raw, err := charmap.Windows1252.NewEncoder().String(b.String())
	if err != nil {
		t.Fatal(err)
	}
	return []byte(raw)
}

// The committed samples are what the seeds make: compared by cell, because packing differs between releases of Go.
func TestSample_IsAsMade(t *testing.T) {
	var made bytes.Buffer
	f := messyBook(t)
	defer f.Close()
	if err := f.Write(&made); err != nil {
		t.Fatal(err)
	}
	if *writeSamples {
		for name, raw := range map[string][]byte{messyXLSX: made.Bytes(), messyCSV: messyText(t)} {
			if err := os.WriteFile(name, raw, 0o644); err != nil {
				t.Fatal(err)
			}
		}
	}
	kept, err := os.ReadFile(messyXLSX)
	if err != nil {
		t.Fatal(err)
	}
	want, err := intake.Open("made", &made, intake.Caps{})
	if err != nil {
		t.Fatal(err)
	}
	got, err := intake.Open("made", bytes.NewReader(kept), intake.Caps{})
	if err != nil {
		t.Fatal(err)
	}
	for i, sheet := range want.Sheets {
		for n, row := range sheet.Rows {
			for c, cell := range row {
				if got.Sheets[i].Rows[n][c].Text != cell.Text {
					t.Fatalf("sheet %s, row %d, column %d: %q is kept, %q is made", sheet.Name, n+1, c, got.Sheets[i].Rows[n][c].Text, cell.Text)
				}
			}
		}
	}
	if text, err := os.ReadFile(messyCSV); err != nil || !bytes.Equal(text, messyText(t)) {
		t.Errorf("%s is not what is made: %v", messyCSV, err)
	}
}

func sample(t testing.TB, name string) *intake.Book {
	t.Helper()
	raw, err := os.ReadFile(name)
	if err != nil {
		t.Fatal(err)
	}
	book, err := intake.Open(name, bytes.NewReader(raw), intake.Caps{})
	if err != nil {
		t.Fatal(err)
	}
	return book
}

func TestSample_MessyWorkbookIsUnderstood(t *testing.T) {
	got, err := Read(sample(t, messyXLSX), messyMapping, nil)
	if err != nil {
		t.Fatal(err)
	}
	if err := got.Refusal(); err != nil {
		t.Fatal(err)
	}
	for i, want := range []struct {
		header, rows, left int
		site, skipped      string
	}{{4, 230, 2, "ASH-HOUSE", ""}, {4, 150, 1, "BIRCH-HALL", ""}, {4, 60, 1, "PUMP-HOUSE", ""}, {0, 0, 0, "", "no-header"}, {0, 0, 0, "", "hidden"}} {
		g := got.Tables[i]
		if g.Header != want.header && want.skipped != "hidden" || g.Rows != want.rows || len(g.LeftOut) != want.left || g.Skipped != want.skipped || want.site != "" && g.Site != want.site {
			t.Errorf("sheet %s: got %+v, want %+v", g.Sheet, g, want)
		}
	}
	var skippedRows []string
	for _, p := range got.Problems {
		if p.Skipped {
			skippedRows = append(skippedRows, fmt.Sprintf("%s %q", p.Column, p.Value))
		}
	}
	want := `[kind "Light switch" place "" circuit "2026-10-12" breaker_a "twenty" panel "" installed "31/31/2020" installed "2019" rating_a "20V"]`
	if fmt.Sprint(skippedRows) != want {
		t.Errorf("problems\n%v, want\n%s", skippedRows, want)
	}
	plan := planRows(noneKnown("org"), "me", got.Rows, Ask{Zone: "America/Chicago"})
	if plan.Added != 431 || len(plan.NewSites) != 3 || plan.NewSites[0].Name != "Ash House" || len(plan.Problems) != 1 {
		t.Errorf("%d would be added, sites %+v, problems %v", plan.Added, plan.NewSites, plan.Problems)
	}
	for _, row := range got.Rows {
		if row.Sheet == "Ash House" && row.Place["building"] != "Main" {
			t.Fatalf("row %d has building %v: the merged cell is not spread", row.Line, row.Place["building"])
		}
		if row.Sheet == "Pump House" && row.Device["rated_residual_ma"] != 30.0 {
			t.Fatalf("row %d has rated residual current %v, want 30 mA", row.Line, row.Device["rated_residual_ma"])
		}
		if row.Sheet == "Birch Hall" && (row.Panel != "BH" || row.CircuitNo == "") {
			t.Fatalf("row %d has panel %q and circuit %q", row.Line, row.Panel, row.CircuitNo)
		}
	}
}

func TestSample_MessyTextIsUnderstood(t *testing.T) {
	book := sample(t, messyCSV)
	if told := strings.Join(book.Told, " "); !strings.Contains(told, "Windows-1252") || !strings.Contains(told, "semicolon") || !strings.Contains(told, "decimal comma") {
		t.Errorf("told %s", told)
	}
	got, err := Read(book, Mapping{Zone: "Europe/Berlin", Kinds: map[string]string{"FI/LS": "rcbo"}}, nil)
	if err != nil {
		t.Fatal(err)
	}
	if len(got.Rows) != 60 || got.Tables[0].Header != 3 || len(got.Tables[0].LeftOut) != 1 {
		t.Fatalf("%d rows, %+v, %v", len(got.Rows), got.Tables[0], got.Problems)
	}
	for _, row := range got.Rows {
		if mA := row.Device["rated_residual_ma"]; mA != 30.0 {
			t.Fatalf("row %d: %v mA", row.Line, mA)
		}
		// 6.5 ft × 0.3048 m/ft (NIST SP 811, appendix B.8) = 1.9812 m.
		if m := row.Device["length_m"]; m != nil && m != 1.9812 && m != 3.048 {
			t.Fatalf("row %d: %v m", row.Line, m)
		}
		if room := row.Place["room"]; room != "Küche" && room != "Café" && room != "Hof" {
			t.Fatalf("row %d: room %q", row.Line, room)
		}
	}
}
