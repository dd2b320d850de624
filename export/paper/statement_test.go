package paper

import (
	"bytes"
	"fmt"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"tripwell/forms"
	"tripwell/store"
)

// pagesOf gives the pages of a PDF as text.
func pagesOf(t *testing.T, pdf []byte) []string {
	t.Helper()
	path := filepath.Join(t.TempDir(), "statement.pdf")
	if err := os.WriteFile(path, pdf, 0o600); err != nil {
		t.Fatal(err)
	}
	out, err := exec.Command("pdftotext", "-layout", path, "-").Output()
	if err != nil {
		t.Fatal(err)
	}
	return strings.Split(strings.TrimSuffix(string(out), "\f"), "\f")
}

// statement is a made-up one with n of everything.
func statement(n int) Statement {
	site := store.Site{ID: "01900000-0000-7000-8000-000000000001", Code: "KILN-LANE", Name: "Kiln Lane Day Clinic", Address: strings.Repeat("12 Kiln Lane, ", 1+n/8), Zone: "America/Denver"}
	s := Statement{
		Ask: StatementAsk{Now: time.Date(2026, 12, 1, 9, 0, 0, 0, time.UTC), Organisation: "Kiln Lane Buildings", Store: "01900000-0000-7000-8000-00000000000a", Epoch: 1, Demo: true,
			Head:  "tripwell/01900000-0000-7000-8000-00000000000b/01900000-0000-7000-8000-00000000000a/1\n7\nq6Q2ikyf3hDZ3MwZ0g4nFQ0qE3bJ0bV4o8cQ0mY2o1Q=\n2026-12-01T08:59:00.000Z\n\n— tripwell/01900000-0000-7000-8000-00000000000b/01900000-0000-7000-8000-00000000000a q6Q2ikyf3hDZ3MwZ0g4nFQ0qE3bJ0bV4o8cQ0mY2o1Qq6Q2ikyf3hDZ3MwZ0g4nFQ0qE3bJ0bV4o8cQ0mY2o1Q==\n",
			Print: "0f1e2d3c 4b5a6978 8796a5b4 c3d2e1f0 0f1e2d3c 4b5a6978 8796a5b4 c3d2e1f0"},
		Site: site, From: forms.Date(2025, 12, 1), To: forms.Date(2026, 11, 30), Devices: 40 * n, Retired: n, Tests: 480 * n, Came: n, Corrected: n, Withdrawn: n, Imported: n, People: n,
		Log: store.LogHead{Log: site.ID, Size: int64(1000 * n), Root: "q6Q2ikyf3hDZ3MwZ0g4nFQ0qE3bJ0bV4o8cQ0mY2o1Q="}, Results: map[string]int{},
	}
	if n == 0 {
		s.Ask.Head, s.Ask.NoHead, s.Ask.Print = "", "the book is older than what was signed", ""
		return s
	}
	for _, k := range forms.Kinds() {
		s.Kinds = append(s.Kinds, KindCount{k, n})
	}
	for _, r := range []string{forms.Pass, forms.Watch, forms.ConditionalPass, forms.ConditionalFail, forms.Fail, forms.Incomplete, forms.NotTested, forms.NotJudged} {
		s.Results[r] = 1000 * n
	}
	for _, task := range forms.Tasks() {
		s.Tasks = append(s.Tasks, TaskCount{task, forms.Count{InTime: 11111 * n, Graced: n, Late: n, Missed: n, NoAccess: n, Open: n}})
	}
	for i := range 12 + n {
		s.Months = append(s.Months, MonthCount{forms.MonthStart(forms.MonthOf(s.To) - int32(11+n-i)), forms.Count{InTime: 100, Late: 1}})
	}
	for i := range 3 * n {
		d := store.Defect{Device: store.DeviceRow{Kind: forms.Kinds()[0], Tag: "K7QM2P3"}}
		d.Device.Place.Name, d.Device.Place.Building, d.Device.Place.Room = strings.Repeat("Left of the sink ", 1+n/4), "Main house", fmt.Sprint("Room ", i)
		d.Severity, d.State, d.Opened = []string{"unsafe", "repair", "nuisance"}[i%3], "open", time.Date(2026, 9, 1, 0, 0, 0, 0, time.UTC).UnixMilli()
		s.Defects = append(s.Defects, d)
	}
	for _, why := range []string{"live", "failed", "removed", "ground", "none", "untested", "overdue", "marking", "loop"} {
		s.Gaps = append(s.Gaps, GapCount{why, n})
	}
	for i := range n {
		u := UsedInstrument{Instrument: store.Instrument{Name: "Trip tester " + strings.Repeat("with a long name ", n/6), Serial: fmt.Sprint(i), CalibrationDue: forms.Date(2027, 3, 1)}, Tests: 400, Past: i}
		if i == 1 {
			u.CalibrationDue = forms.NoDay
		}
		s.Instruments = append(s.Instruments, u)
	}
	return s
}

// TestStatement_IsTwoPages prints statements of nothing, of a small house and of a campus, on both papers.
func TestStatement_IsTwoPages(t *testing.T) {
	if _, err := exec.LookPath("pdftotext"); err != nil {
		if os.Getenv("CI") == "true" {
			t.Fatal("pdftotext (poppler-utils) is not installed")
		}
		t.Skip("pdftotext (poppler-utils) is not installed")
	}
	for _, n := range []int{0, 1, 3, 25} {
		for _, size := range sizes {
			t.Run(fmt.Sprint(n, size.Name), func(t *testing.T) {
				var out bytes.Buffer
				if err := PrintStatement(&out, statement(n), size); err != nil {
					t.Fatal(err)
				}
				pages := pagesOf(t, out.Bytes())
				if len(pages) != 2 {
					t.Fatalf("got %d pages, want 2", len(pages))
				}
				for i, wants := range [][]string{
					{"Statement of tests", "KILN-LANE", "2025-12-01 to 2026-11-30", "What was due, and what became of it", "Tests made", "DEMO", "Page 1 of 2"},
					{"second page", "Open defects", "Protection to look at", "Instruments used", "It does not prove that a reading was true", "For the organisation", "Seen by", "Signature", "Page 2 of 2"},
				} {
					for _, want := range wants {
						if !strings.Contains(pages[i], want) {
							t.Errorf("page %d does not say %q:\n%s", i+1, want, pages[i])
						}
					}
				}
				if n == 25 {
					for _, want := range []string{"and 63 more: sheet Defects", "and 19 more: sheet Instruments", "after theirs had ended"} {
						if !strings.Contains(pages[1], want) {
							t.Errorf("the second page does not say %q:\n%s", want, pages[1])
						}
					}
				}
				// Nothing lies over the foot of a page, or over the signature lines.
				for i, page := range pages {
					lines := strings.Split(strings.TrimSpace(page), "\n")
					if last := lines[len(lines)-1]; !strings.Contains(last, fmt.Sprintf("Page %d of 2", i+1)) {
						t.Errorf("page %d ends with %q, not with its foot", i+1, last)
					}
				}
			})
		}
	}
}

// TestStatement_CountsWhatTheStoreHolds reads one from a real store, and the head back from the printed page.
func TestStatement_CountsWhatTheStoreHolds(t *testing.T) {
	s := open(t)
	head, err := s.SignedHead()
	if err != nil {
		t.Fatal(err)
	}
	ask := StatementAsk{Site: "ELM-4", From: forms.NoDay, To: forms.NoDay, Now: s.Now(), Store: s.ID(), Epoch: 1, Head: head, Print: "0f1e"}
	var got Statement
	if err := s.View(everything, func(v *store.View) error { got, err = StatementOf(v, ask); return err }); err != nil {
		t.Fatal(err)
	}
	if got.Devices != 3 || len(got.Kinds) != 3 || got.Tests != 0 || got.From != forms.Date(2025, time.December, 1) || got.To != forms.Date(2026, time.November, 30) || len(got.Months) != 12 || got.Log.Size == 0 {
		t.Errorf("got %+v", got)
	}
	var out bytes.Buffer
	if err := PrintStatement(&out, got, sizes[0]); err != nil {
		t.Fatal(err)
	}
	_, pages := look(t, out.Bytes())
	if read := codes(t, pages[0]); len(read) != 1 || read[0] != strings.TrimSpace(head) {
		t.Errorf("the code on the page says %q, want the head %q", read, head)
	}
	ask.From = forms.Date(2027, time.January, 1)
	if err := s.View(everything, func(v *store.View) error { _, err := StatementOf(v, ask); return err }); err == nil || !strings.Contains(err.Error(), "begins after today") {
		t.Errorf("a period to come: got %v", err)
	}
}
