package results

import (
	"bytes"
	"context"
	"encoding/csv"
	"strings"
	"testing"

	"pgregory.net/rapid"

	"tripwell/export/intake"
	"tripwell/store"
)

// accounted holds that every row below the headings is in, there already, or named with a reason, and that the counts say
// the same as the rows.
func accounted(t interface {
	Errorf(format string, args ...any)
}, book *intake.Book, r Report) {
	named := map[string]map[int]bool{}
	counts := map[string]int{}
	for _, o := range r.Outcomes {
		if named[o.Sheet] == nil {
			named[o.Sheet] = map[int]bool{}
		}
		named[o.Sheet][o.Row] = true
		counts[o.State]++
		if o.State != Taken && o.State != There && o.Text == "" {
			t.Errorf("%s row %d is %q without a reason", o.Sheet, o.Row, o.State)
		}
	}
	if counts[LeftOut] != r.LeftOut || counts[Doubt] != r.Doubted || counts[Parked] != r.Parked || counts[Silent] != r.Silent || counts[""] != 0 {
		t.Errorf("counts %v, report %+v", counts, r)
	}
	total := 0
	for _, n := range r.Results {
		total += n
	}
	if total != r.Taken || r.Taken > counts[Taken] || (r.Held() > 0) != (r.Rest != "") && r.Rows > 0 {
		t.Errorf("taken %d, by result %v, rest %q", r.Taken, r.Results, r.Rest)
	}
	rows := 0
	for _, byRow := range named {
		rows += len(byRow)
	}
	if r.Rows > 0 && rows < r.Rows {
		t.Errorf("%d of %d rows are named", rows, r.Rows)
	}
}

var (
	someHeads = []string{"Tag", "Site", "Building", "Room", "Place", "Date", "Time", "Test", "Trip time (s)", "Trip time (ms)", "Trip time, 5 × rated 0° (ms)", "Test current", "Ground resistance",
		"Button", "Reset", "All in order", "Result", "Not tested because", "Read by", "Typed by", "Instrument", "Note", "Multiple", "Phase", "Mar 2026", "Apr", "Last button test", "Nonsense", "sheet", ""}
	someCells = []string{"", "-", "K7QM2P3", "k7q-m2p-3", "HQF7009", "ELM-4", "North", "South", "Kitchen", "By the sink", "Panel", "2026-11-02", "02.11.2026", "03/04/2026", "2031-01-01", "1871-01-01",
		"25", "0.025", "0,025", "<0.1", ">1999", "OL", "no trip", "-3", "1e9", "yes", "no", "x", "✓", "OK", "fail", "locked", "Crew 1", "JB", "Analyser 2", "button", "=1+1", "'x", "Total", "14", "5", "180", "\x00\xff", strings.Repeat("long ", 3000)}
)

func TestImport_EveryRowIsAccountedFor(t *testing.T) {
	h := smallHouse(t)
	rapid.Check(t, func(t *rapid.T) {
		heads := rapid.SliceOfN(rapid.SampledFrom(someHeads), 1, 12).Draw(t, "heads")
		var text bytes.Buffer
		w := csv.NewWriter(&text)
		w.Write(heads)
		for range rapid.IntRange(0, 8).Draw(t, "rows") {
			w.Write(rapid.SliceOfN(rapid.SampledFrom(someCells), len(heads), len(heads)).Draw(t, "row"))
		}
		w.Flush()
		ask := Ask{Past: rapid.Bool().Draw(t, "past"), Doubted: rapid.Bool().Draw(t, "doubted"), Task: rapid.SampledFrom([]string{"", "button", "instrument", "receptacle"}).Draw(t, "task"),
			Dates: rapid.SampledFrom([]intake.Order{"", intake.DMY, intake.MDY}).Draw(t, "dates"), ReadBy: rapid.SampledFrom([]string{"", "Crew 1"}).Draw(t, "read_by"),
			Site: rapid.SampledFrom([]string{"", "ELM-4"}).Draw(t, "site")}
		book, err := intake.Open("x.csv", bytes.NewReader(text.Bytes()), intake.Caps{})
		if err != nil {
			return
		}
		first, err := Import(context.Background(), h.Store, h.ID(), book, ask, nil)
		if err != nil {
			if _, told := err.(*store.Error); !told {
				t.Fatalf("%v\n%s", err, text.String())
			}
			return
		}
		accounted(t, book, first)
		again, err := Import(context.Background(), h.Store, h.ID(), book, ask, nil)
		if err != nil || again.Taken != 0 || again.Rows != first.Rows || again.Held() != first.Held() {
			t.Fatalf("a second time: %+v, first %+v, error %v\n%s", again, first, err, text.String())
		}
		accounted(t, book, again)
	})
}

func FuzzImport(f *testing.F) {
	f.Add([]byte("Tag,Date,Trip time (s),Read by\nK7QM2P3,2026-11-02,0.025,Crew 1\n"), false)
	f.Add([]byte("Log 2026\nRoom;Outlet;Jan;Feb\nKitchen;By the sink;OK;3/14 JB\n"), true)
	f.Add([]byte("Tag,Last button test,Result\nK7QM2P3,Mar 2026,OK\n"), true)
	f.Add(sampleFile(f, "instrument.csv"), true)
	f.Add(sampleFile(f, "monthly.xlsx"), true)
	h := smallHouse(f)
	f.Fuzz(func(t *testing.T, raw []byte, past bool) {
		book, err := intake.Open("x", bytes.NewReader(raw), intake.Caps{Rows: 2000, Cells: 50_000, Unpacked: 4 << 20})
		if err != nil {
			return
		}
		r, err := Import(context.Background(), h.Store, h.ID(), book, Ask{Past: past, DryRun: true, Dates: intake.DMY, ReadBy: "Crew 1"}, nil)
		if err != nil {
			if _, told := err.(*store.Error); !told {
				t.Fatal(err)
			}
			return
		}
		accounted(t, book, r)
	})
}
