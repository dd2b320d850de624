package paper

import (
	"bytes"
	"context"
	"errors"
	"fmt"
	"image"
	_ "image/png"
	"os"
	"os/exec"
	"path/filepath"
	"slices"
	"strings"
	"testing"
	"time"

	"github.com/makiuchi-d/gozxing"
	zxqr "github.com/makiuchi-d/gozxing/multi/qrcode"
	"github.com/xuri/excelize/v2"

	"tripwell/export/register"
	"tripwell/forms"
	"tripwell/store"
	"tripwell/store/record"
)

var everything = store.Scope{Role: "owner", All: true}

const sample = `site,site_name,zone,floor,room,place,order,kind,panel,circuit,rating_a,make
ELM-4,Elm & Oak <Street> 4,America/Denver,Ground,Pantry,=1+1,2,gfci-receptacle,LP-1,2,20,Make A
ELM-4,,,Ground,Pantry,By the door,1,receptacle,LP-1,4,20,Make A
ELM-4,,,First,Switch room,In the board,1,rcd,UV-1,3,,Make B
`

// open makes a store with three devices, all with tags.
func open(t *testing.T) *store.Store {
	t.Helper()
	s, err := store.Open(t.TempDir(), store.Options{Now: func() time.Time { return time.Date(2026, 11, 30, 15, 0, 0, 0, time.UTC) }, Create: true, URL: "https://tripwell.example"})
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { s.Close() })
	report, err := register.Import(context.Background(), s, "sample.csv", strings.NewReader(sample), register.Options{By: s.ID(), NewTags: true}, nil)
	if err != nil || report.Added != 3 {
		t.Fatalf("import: %+v, %v", report, err)
	}
	return s
}

func round(t *testing.T, s *store.Store, ask RoundAsk) (r Round) {
	t.Helper()
	ask.Site, ask.URL, ask.Demo = "ELM-4", s.URL(), true
	if ask.Until == 0 {
		ask.Until = forms.NoDay
	}
	err := s.View(everything, func(v *store.View) (err error) {
		r, err = RoundOf(v, forms.Date(2026, time.November, 30), ask)
		return err
	})
	if err != nil {
		t.Fatal(err)
	}
	return r
}

func TestRound_WalkingOrderAndWhatIsAsked(t *testing.T) {
	s := open(t)
	r := round(t, s, RoundAsk{})
	var got []string
	for _, stop := range r.Stops {
		got = append(got, stop.Device.Place.Name+" "+stop.Task)
	}
	want := "[In the board button In the board instrument By the door receptacle =1+1 button =1+1 instrument]"
	if fmt.Sprint(got) != want {
		t.Errorf("got %v, want %s", got, want)
	}
	has := func(stop Stop, reading string) bool {
		for _, c := range stop.Columns {
			if c.Reading == reading {
				return true
			}
		}
		return false
	}
	if !has(r.Stops[4], "trip_time_ms") || has(r.Stops[2], "trip_time_ms") || has(r.Stops[4], "marking_present") {
		t.Error("the trip time is asked of a GFCI only, and the no-ground marking only where no ground is permitted")
	}
	if one := round(t, s, RoundAsk{Task: forms.TaskReceptacle}); len(one.Stops) != 1 {
		t.Errorf("receptacle tests: got %d, want 1", len(one.Stops))
	}
	for name, ask := range map[string]RoundAsk{
		"unknown task": {Site: "ELM-4", Task: "paint", Until: forms.NoDay}, "unknown site": {Site: "OAK-1", Until: forms.NoDay},
		"nothing due": {Site: "ELM-4", Until: forms.Date(2020, time.January, 1)},
	} {
		err := s.View(everything, func(v *store.View) error {
			_, err := RoundOf(v, forms.Date(2026, time.November, 30), ask)
			return err
		})
		var refused *store.Error
		if !errors.As(err, &refused) || refused.Text == "" {
			t.Errorf("%s: got %v, want a refusal", name, err)
		}
	}
}

func TestRoundPrint_SaysPlacesAndCodesRead(t *testing.T) {
	r := round(t, open(t), RoundAsk{})
	for _, name := range SizeNames() {
		size, err := SizeNamed(name)
		if err != nil {
			t.Fatal(err)
		}
		var pdf, again bytes.Buffer
		if err := Print(&pdf, r, size); err != nil {
			t.Fatal(err)
		}
		if err := Print(&again, r, size); err != nil || !bytes.Equal(pdf.Bytes(), again.Bytes()) {
			t.Errorf("%s: two prints of one round differ (%v)", name, err)
		}
		text, pages := look(t, pdf.Bytes())
		for _, want := range []string{"Elm & Oak <Street> 4", "DEMO", "By the door", "=1+1", "In the board", "LP-1 / 2", "Trip time (ms)", "TEST trips it", "Page 1 of", "Before you start", "Crew", "Not tested because", "1 Correct"} {
			if !strings.Contains(text, want) {
				t.Errorf("%s: the sheet does not say %q", name, want)
			}
		}
		if size != sizes[0] {
			continue // the same drawing
		}
		found := map[string]bool{}
		for _, page := range pages {
			for _, code := range codes(t, page) {
				found[code] = true
			}
		}
		for _, stop := range r.Stops {
			if !found[stop.Address] {
				t.Errorf("%s: the code of %s cannot be read from the page", name, stop.Address)
			}
		}
	}
}

func TestWorksheet_HeadersAreTheTablesAndHostileTextIsText(t *testing.T) {
	r := round(t, open(t), RoundAsk{})
	var out bytes.Buffer
	if err := Worksheet(&out, r); err != nil {
		t.Fatal(err)
	}
	f, err := excelize.OpenReader(&out)
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	headings, err := Headings()
	if err != nil {
		t.Fatal(err)
	}
	rows := 0
	for _, name := range f.GetSheetList() {
		all, err := f.GetRows(name)
		if err != nil {
			t.Fatal(err)
		}
		for _, header := range all[0] {
			if _, ok := headings[strings.ToLower(header)]; !ok {
				t.Errorf("%s: nobody could read the column %q back", name, header)
			}
		}
		if all[0][0] != "Tag" {
			t.Errorf("%s begins with %q, not with the tag", name, all[0][0])
		}
		for i, row := range all[1:] {
			rows++
			if len(row[0]) != 9 {
				t.Errorf("%s row %d: tag %q", name, i+2, row[0])
			}
			if formula, _ := f.GetCellFormula(name, fmt.Sprintf("B%d", i+2)); formula != "" {
				t.Errorf("%s row %d: the place is a formula %q", name, i+2, formula)
			}
		}
	}
	if rows != len(r.Stops) {
		t.Errorf("got %d rows, want %d", rows, len(r.Stops))
	}
}

func TestDeviceSheet_SaysRegisterTestsAndCorrections(t *testing.T) {
	s := open(t)
	r := round(t, s, RoundAsk{Task: forms.TaskInstrument})
	dev := r.Stops[1].Device
	yes := map[string]any{"value": "yes"}
	receipts, err := s.Append(context.Background(), store.Draft{Kind: "entry.made", Log: dev.Site, Subject: dev.ID, By: s.ID(), Body: map[string]any{
		"form": "gfci-receptacle/instrument", "given": map[string]any{"kind": "gfci-receptacle"}, "source": "office", "note": "behind the shelf",
		"readings": map[string]any{"condition": map[string]any{"value": "sound"}, "found": map[string]any{"value": "on"}, "ground_continuous": yes, "button_trips": yes,
			"test_current_ma": map[string]any{"value": 6.5, "unit": "mA"}, "trip_time_ms": map[string]any{"above": 5200, "unit": "ms"}}}})
	if err != nil {
		t.Fatal(err)
	}
	if _, err := s.Append(context.Background(), store.Draft{Kind: "entry.withdrawn", Log: dev.Site, Subject: receipts[0].ID, By: s.ID(), Body: map[string]any{"entry": receipts[0].ID, "reason": "wrong outlet"}}); err != nil {
		t.Fatal(err)
	}
	var sheet Sheet
	err = s.View(everything, func(v *store.View) (err error) {
		sheet, err = SheetOf(v, dev.ID, forms.Date(2026, time.November, 30), s.URL(), false)
		return err
	})
	if err != nil {
		t.Fatal(err)
	}
	var pdf bytes.Buffer
	if err := PrintSheet(&pdf, sheet, sizes[1]); err != nil {
		t.Fatal(err)
	}
	text, pages := look(t, pdf.Bytes())
	for _, want := range []string{"=1+1", "Make A", "20 A", ">5200 ms", "behind the shelf", "wrong outlet", "2026-11-30", "Page 1 of 1"} {
		if !strings.Contains(text, want) {
			t.Errorf("the sheet does not say %q:\n%s", want, text)
		}
	}
	if got := codes(t, pages[0]); len(got) != 1 || got[0] != sheet.Address {
		t.Errorf("codes on the sheet: %v, want %s", got, sheet.Address)
	}
}

// look gives a PDF's text and its pages at 200 dpi, by poppler.
func look(t *testing.T, pdf []byte) (text string, pages []image.Image) {
	t.Helper()
	for _, tool := range []string{"pdftotext", "pdftoppm"} {
		if _, err := exec.LookPath(tool); err != nil {
			if os.Getenv("CI") == "true" {
				t.Fatalf("%s (poppler-utils) is missing", tool)
			}
			t.Skipf("%s (poppler-utils) is missing", tool)
		}
	}
	dir := t.TempDir()
	file := filepath.Join(dir, "sheet.pdf")
	if err := os.WriteFile(file, pdf, 0o600); err != nil {
		t.Fatal(err)
	}
	out, err := exec.Command("pdftotext", "-layout", file, "-").Output()
	if err != nil {
		t.Fatal(err)
	}
	if out, err := exec.Command("pdftoppm", "-r", "200", "-png", "-gray", file, filepath.Join(dir, "page")).CombinedOutput(); err != nil {
		t.Fatalf("pdftoppm: %v\n%s", err, out)
	}
	names, err := filepath.Glob(filepath.Join(dir, "page-*.png"))
	if err != nil {
		t.Fatal(err)
	}
	for _, name := range names {
		f, err := os.Open(name)
		if err != nil {
			t.Fatal(err)
		}
		img, _, err := image.Decode(f)
		f.Close()
		if err != nil {
			t.Fatal(err)
		}
		pages = append(pages, img)
	}
	return string(out), pages
}

func codes(t *testing.T, page image.Image) (texts []string) {
	t.Helper()
	bmp, err := gozxing.NewBinaryBitmapFromImage(page)
	if err != nil {
		t.Fatal(err)
	}
	results, err := zxqr.NewQRCodeMultiReader().DecodeMultiple(bmp, map[gozxing.DecodeHintType]any{gozxing.DecodeHintType_TRY_HARDER: true})
	if err != nil {
		return nil
	}
	for _, r := range results {
		texts = append(texts, r.GetText())
	}
	return texts
}

// A round made in the office carries a code that opens it on a phone, and says of each place when TEST may be pressed.
func TestRoundSheet_OpensItsRoundOnAPhone(t *testing.T) {
	s := open(t)
	due := round(t, s, RoundAsk{Task: forms.TaskInstrument})
	first := due.Stops[0].Device
	id := record.NamedID("round", "paper")
	for _, d := range []store.Draft{
		{Kind: "place.set", Log: first.Site, Subject: first.Place.ID, By: s.ID(), Body: map[string]any{"set": map[string]any{"test_from": "05:30", "test_until": "07:00", "whom_to_tell": "Pool technician"}}},
		{Kind: "round.made", Log: first.Site, Subject: id, By: s.ID(), Body: map[string]any{"set": map[string]any{"stops": []string{first.ID + "/instrument"}}}},
	} {
		if _, err := s.Append(context.Background(), d); err != nil {
			t.Fatal(err)
		}
	}
	r := round(t, s, RoundAsk{Round: id})
	var pdf bytes.Buffer
	if err := Print(&pdf, r, sizes[1]); err != nil {
		t.Fatal(err)
	}
	text, pages := look(t, pdf.Bytes())
	for _, want := range []string{"only between 05:30 and 07:00.", "Tell first: Pool technician.", store.RoundCode(id), "Opens this round on a phone"} {
		if !strings.Contains(text, want) {
			t.Errorf("the sheet does not say %q:\n%s", want, text)
		}
	}
	if got := codes(t, pages[0]); !slices.Contains(got, s.URL()+"/field#/round/"+r.Site.Code+"/"+id) {
		t.Errorf("codes on the sheet: %v", got)
	}
}
