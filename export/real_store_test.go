package export

import (
	"bytes"
	"context"
	"errors"
	"os"
	"strings"
	"testing"
	"time"

	"github.com/xuri/excelize/v2"

	"tripwell/export/register"
	"tripwell/forms"
	"tripwell/store"
)

// house is a real store with a clock of its own.
type house struct {
	*store.Store
	now time.Time
}

func newHouse(t *testing.T, url string) *house {
	t.Helper()
	h := &house{now: time.Date(2026, time.November, 30, 15, 0, 0, 0, time.UTC)}
	s, err := store.Open(t.TempDir(), store.Options{Now: func() time.Time { return h.now }, Create: true, URL: url})
	if err != nil {
		t.Fatal(err)
	}
	h.Store = s
	t.Cleanup(func() {
		report, err := s.Check(context.Background(), nil)
		if err != nil || len(report.Problems) > 0 {
			t.Errorf("check after the test: %v, %v", report.Problems, err)
		}
		s.Close()
	})
	return h
}

var everything = store.Scope{Role: "owner", All: true}

func (h *house) bring(t *testing.T, csv string, newTags ...bool) register.Report {
	t.Helper()
	h.now = h.now.Add(time.Minute)
	report, err := register.Import(context.Background(), h.Store, "sample.csv", strings.NewReader(csv), register.Options{By: h.ID(), NewTags: len(newTags) > 0}, nil)
	if err != nil {
		t.Fatal(err)
	}
	return report
}

func (h *house) devices(t *testing.T, site string) (rows []store.DeviceRow) {
	t.Helper()
	err := h.View(everything, func(v *store.View) error {
		s, err := v.Site(site)
		if err != nil {
			return err
		}
		for d, err := range v.Devices(s.ID) {
			if err != nil {
				return err
			}
			rows = append(rows, d)
		}
		return nil
	})
	if err != nil {
		t.Fatal(err)
	}
	return rows
}

func TestImportRegister_SameFileImportsOnce(t *testing.T) {
	h := newHouse(t, "")
	sample := string(sampleRegister(t))
	first := h.bring(t, sample)
	if first.Added != 41 || first.Sites != 1 || len(first.Problems) > 0 || first.Rows != 41 {
		t.Fatalf("first import: %+v", first)
	}
	if again := h.bring(t, sample); again.Unchanged != 41 || again.Records != 0 || again.Added+again.Changed > 0 || len(again.Problems) > 0 {
		t.Errorf("second import: %+v", again)
	}
	rows := h.devices(t, "ALDER-1")
	if len(rows) != 41 {
		t.Fatalf("got %d devices, want 41", len(rows))
	}
	for _, d := range rows {
		if d.Place.Name == "By the sink" && (d.Panel != "LP-1" || d.Circuit != "2" || d.Make != "Make A" || d.RatingA != 20 || d.Installed != forms.Date(2021, time.April, 12)) {
			t.Errorf("device by the sink: %+v", d)
		}
	}
}

func TestImportRegister_ChangedRowsBecomeFieldChanges(t *testing.T) {
	h := newHouse(t, "")
	const head = "site,zone,room,place,kind,panel,circuit,breaker_a,make,installed\n"
	h.bring(t, head+"ELM-4,America/Denver,Kitchen,By the sink,gfci-receptacle,LP-1,2,20,Make A,2021-04-12\nELM-4,,Kitchen,Island,receptacle,LP-1,4,15,Make A,\n")
	report := h.bring(t, head+"ELM-4,,Kitchen,By the sink,gfci-receptacle,LP-1,2,20,Make B,2024-05-01\nELM-4,,KITCHEN,Island,receptacle,LP-1,4,20,Make A,\n")
	if report.Changed != 2 || report.Unchanged != 0 || report.Added != 0 {
		t.Errorf("got %+v, want both rows changed", report)
	}
	if again := h.bring(t, head+"ELM-4,,Kitchen,Island,receptacle,LP-1,4,20,Make A,\n"); again.Changed != 1 {
		t.Errorf("a room written otherwise is a change of its name: %+v", again)
	}
	d := h.devices(t, "elm-4")
	if len(d) != 2 || d[0].Make != "Make B" && d[1].Make != "Make B" {
		t.Errorf("got %+v", d)
	}
}

func TestImportRegister_TagsAndLabels(t *testing.T) {
	h := newHouse(t, "https://demo.tripwell.example")
	report := h.bring(t, string(sampleRegister(t)), true)
	if report.Tags != 41 {
		t.Fatalf("got %d tags, want 41", report.Tags)
	}
	if again := h.bring(t, string(sampleRegister(t)), true); again.Tags != 0 || again.Records != 0 {
		t.Errorf("tags given twice: %+v", again)
	}
	labels, err := LabelsOf(h.Store, everything, "ALDER-1")
	if err != nil || len(labels) != 41 {
		t.Fatalf("got %d labels, %v; want 41", len(labels), err)
	}
	for _, l := range labels {
		if l.Address != "HTTPS://DEMO.TRIPWELL.EXAMPLE/T/"+l.Tag || l.Spot == "" || l.Demo {
			t.Errorf("label %+v", l)
		}
	}
	var refused *store.Error
	one := h.devices(t, "ALDER-1")[0]
	if some, err := LabelsOf(h.Store, everything, "", one.ID); err != nil || len(some) != 1 || some[0].Tag != one.Tag {
		t.Errorf("label of one device: %+v, %v", some, err)
	}
	if _, err := LabelsOf(newHouse(t, "").Store, everything, ""); !errors.As(err, &refused) || !strings.Contains(refused.Text, "--url") {
		t.Errorf("without an address: %v", err)
	}
}

// TestWorkbook_OfARealStore: an entry outside its limit, corrected since, stands in the workbook of the store.
func TestWorkbook_OfARealStore(t *testing.T) {
	h := newHouse(t, "")
	h.bring(t, "site,site_name,zone,room,place,kind,panel,circuit\nELM-4,Elm Street 4,America/Denver,Kitchen,By the sink,gfci-receptacle,LP-1,2\n")
	dev := h.devices(t, "ELM-4")[0]
	readings := func(ms float64) map[string]any {
		yes := map[string]any{"value": "yes"}
		return map[string]any{
			"condition": map[string]any{"value": "sound"}, "found": map[string]any{"value": "on"}, "ground_continuous": yes, "button_trips": yes, "button_resets": yes, "restored": yes,
			"trip_current_ma": map[string]any{"value": 5.1, "unit": "mA"}, "test_current_ma": map[string]any{"value": 6.5, "unit": "mA"}, "trip_time_ms": map[string]any{"value": ms, "unit": "ms"},
		}
	}
	h.now = h.now.Add(time.Hour)
	receipts, err := h.Append(context.Background(), store.Draft{Kind: "entry.made", Log: dev.Site, Subject: dev.ID, By: h.ID(), Body: map[string]any{
		"form": "gfci-receptacle/instrument", "given": map[string]any{"kind": "gfci-receptacle"}, "readings": readings(5200), "source": "office", "note": "=1+1"}})
	if err != nil {
		t.Fatal(err)
	}
	entry := receipts[0].ID
	h.now = h.now.Add(time.Hour)
	if _, err := h.Append(context.Background(), store.Draft{Kind: "entry.corrected", Log: dev.Site, Subject: entry, By: h.ID(), Body: map[string]any{
		"entry": entry, "readings": readings(24), "reason": "read the wrong row"}}); err != nil {
		t.Fatal(err)
	}
	var out bytes.Buffer
	if err := WorkbookOf(&out, h.Store, everything, WorkbookAsk{From: forms.NoDay, To: forms.NoDay}); err != nil {
		t.Fatal(err)
	}
	f, err := excelize.OpenReader(bytes.NewReader(out.Bytes()))
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	entries := table(t, f, "Entries", 1)
	if len(entries) != 1 {
		t.Fatalf("got %d entries, want 1", len(entries))
	}
	// 2026-11-30 is serial day 46356; 16:01 UTC is 09:01 in Denver.
	wantCells(t, "entry", entries[0], map[string]string{"Entry id": entry, "Test day": "46356", "Trip time (ms)": "24", "Status": "corrected", "Note": "=1+1", "Time zone": "America/Denver"})
	// UL 943, T = (20/I)^1.43 s at 6.5 mA: 4.9889 s.
	var slow, fine map[string]string
	for _, r := range table(t, f, "Readings", 1) {
		switch {
		case r["Value"] == "5200":
			slow = r
		case r["Value"] == "24":
			fine = r
		}
	}
	if !strings.HasPrefix(slow["Limit, at most"], "4988.8") && !strings.HasPrefix(slow["Limit, at most"], "4988.9") {
		t.Errorf("limit at 6.5 mA: got %q, want 4988.9", slow["Limit, at most"])
	}
	wantCells(t, "replaced reading", slow, map[string]string{"Status": "replaced", "Verdict": "Fail", "Unit": "ms"})
	wantCells(t, "reading in force", fine, map[string]string{"Status": "corrected", "Verdict": "Pass"})
	if limits := table(t, f, "Limits", 1); len(limits) < 10 {
		t.Errorf("got %d limits", len(limits))
	}
	if due := table(t, f, "Due", 1); len(due) == 0 {
		t.Error("no dates for a device that is due")
	}
	cover, err := f.GetRows("Cover")
	if err != nil {
		t.Fatal(err)
	}
	all := ""
	for _, r := range cover {
		all += strings.Join(r, "\t") + "\n"
	}
	for _, want := range []string{h.ID(), "us-class-a r1", "tripwell/" + h.Org() + "/" + h.ID() + "/1", "Elm Street 4", "ELM-4 ("} {
		if !strings.Contains(all, want) {
			t.Errorf("the cover does not say %q:\n%s", want, all)
		}
	}
}

func TestWorkbook_AnotherSiteStaysOut(t *testing.T) {
	h := newHouse(t, "")
	h.bring(t, "site,zone,place,kind\nELM-4,UTC,Hall,receptacle\nOAK-1,UTC,Hall,receptacle\n")
	mine := h.devices(t, "ELM-4")[0].Site
	var out bytes.Buffer
	if err := WorkbookOf(&out, h.Store, store.Scope{Role: "auditor", Sites: []string{mine}}, WorkbookAsk{From: forms.NoDay, To: forms.NoDay}); err != nil {
		t.Fatal(err)
	}
	f, err := excelize.OpenReader(bytes.NewReader(out.Bytes()))
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	for _, name := range f.GetSheetList() {
		rows, err := f.GetRows(name)
		if err != nil {
			t.Fatal(err)
		}
		for _, r := range rows {
			if strings.Contains(strings.Join(r, " "), "OAK-1") {
				t.Errorf("%s names a site outside the scope: %v", name, r)
			}
		}
	}
	var refused *store.Error
	err = WorkbookOf(&out, h.Store, store.Scope{Role: "auditor", Sites: []string{mine}}, WorkbookAsk{Site: "OAK-1"})
	if !errors.As(err, &refused) || refused.Code != "not_found" {
		t.Errorf("a workbook of another site: %v, want not_found", err)
	}
}

func sampleRegister(t testing.TB) []byte {
	t.Helper()
	raw, err := os.ReadFile("../testdata/register.csv")
	if err != nil {
		t.Fatal(err)
	}
	return raw
}
