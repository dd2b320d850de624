package server

import (
	"fmt"
	"net/http"
	"strings"
	"testing"

	"tripwell/export/results"
	"tripwell/forms"
	"tripwell/store"
)

func resultsSample() resultsPreview {
	return resultsPreview{
		Frame: frameOf("Tests made elsewhere", "sites"), Crumbs: []link{{Href: "/sites", Text: "Sites"}}, Heading: "round.csv: before it is imported", Lead: "This is how the file was read.", Note: "Columns were changed.", Action: "/results/x",
		Told: []string{"Read as UTF-8 text."}, Sums: []sum{{"#rows", "12", "tests", "to be added", ""}, {"#problems", "2", "left out", "wrong or doubtful", "fail"}}, Judged: []mark{{"pass", "11 Pass"}, {"fail", "1 Fail"}},
		Asks:    []field{{Name: "source", Label: "Where the readings come from", Options: choices("paper", "paper", "Paper", "spreadsheet", "A spreadsheet")}, {Name: "doubted", Type: "check", Label: "Take 1 doubtful test in as it stands"}},
		Columns: []columnAsk{{N: 0, Key: "t", Heading: "t", Select: field{Name: "c.0", Label: "t is read as", Value: "trip_time_ms in s", Options: choices("trip_time_ms in s", "", "Not read", "trip_time_ms in s", "Trip time in s")}}},
		Offers:  []columnsKept{{"Meter", "1 Dec 2026, Manager 1"}}, KeepAs: field{Name: "keep_as", Type: "text", Label: "Name"},
		Go: "Import 12 tests", ProblemsHead: "2 tests are not in", Problems: []heldRow{{"Main · row 9", "t", "0.025", "0.025 ms is unlikely here.", mark{"watch", "doubtful"}}}, More: "and 3 more", Rest: true,
		Tests: []foundTest{{"row 5", "Hall · By the sink", "K7Q-M2P-3", "Instrument test", "2026-11-02", "Trips too slowly.", mark{"fail", "Fail"}}},
	}
}

// deviceEntries are the entries of the rig's site.
func (r *rig) siteEntries() (all []store.Entry) {
	r.t.Helper()
	must(r.t, r.store.View(ownerScope, func(v *store.View) error {
		for e, err := range v.SiteEntries(r.site, forms.NoDay, forms.NoDay) {
			if err != nil {
				return err
			}
			all = append(all, e)
		}
		return nil
	}))
	return all
}

func TestResults_PreviewMendImportAndRowsBack(t *testing.T) {
	r := newRig(t, 3)
	b := r.signIn(r.manager)
	rows := r.devicesOf(r.site)
	day := forms.DayOf(r.store.Now()) - 3
	round := fmt.Sprintf("Place;When;t;I\n%[1]s;%[3]s;24;6,8\n%[2]s;%[3]s;0,024;6,8\nNowhere;%[3]s;24;6,8\n", placeText(rows[0].Place), placeText(rows[1].Place), day)
	res := r.uploadTo(b, "/results", "round.csv", []byte(round), "", "readings")
	if res.status != http.StatusSeeOther {
		t.Fatalf("upload: got %d %s", res.status, res.body)
	}
	at := res.header.Get("Location")
	form := typed(t, r.open(b, at).body)
	form.Set(nameOf(t, form, "c", "When"), "day")
	form.Set(nameOf(t, form, "c", "I"), "test_current_ma")
	form.Set("read_by", r.crew.ID)
	form.Set("source", results.Paper)
	form.Set("do", "import")
	r.submit(b, at, form.Encode())
	page := r.open(b, at)
	for _, want := range []string{"Nothing was imported yet", "Import 1 test", "0.024 s would be usual", "No device is known", "doubtful"} {
		if !strings.Contains(page.body, want) {
			t.Errorf("the preview lacks %q:\n%s", want, page.body)
		}
	}
	if n := len(r.siteEntries()); n != 0 {
		t.Fatalf("a preview made %d entries", n)
	}
	form = typed(t, page.body)
	form.Set("do", "import")
	r.submit(b, at, form.Encode())
	if page = r.open(b, at); !strings.Contains(page.body, "1 test imported") || !strings.Contains(page.body, "2 tests are not in") {
		t.Fatalf("after the import:\n%s", page.body)
	}
	if all := r.siteEntries(); len(all) != 1 || all[0].Source != results.Paper || all[0].ReadBy != r.crew.ID || all[0].By != r.manager.ID || all[0].Day != day || all[0].Imported {
		t.Errorf("entries %+v", all)
	}
	rest := r.open(b, at+"/rest.csv")
	if rest.status != http.StatusOK || !strings.Contains(rest.body, "Nowhere") || strings.Count(rest.body, "\n") != 3 {
		t.Errorf("rows to correct: %d %q", rest.status, rest.body)
	}
	kept := r.open(b, at+"/columns.json")
	if !strings.Contains(kept.body, `"When": "day"`) {
		t.Errorf("columns: %s", kept.body)
	}
	// The same file with the kept columns brings what it says as past results too, apart from the round.
	res = r.uploadTo(b, "/results", "round.csv", []byte(round), kept.body, "past")
	form = typed(t, r.open(b, res.header.Get("Location")).body)
	form.Set("do", "import")
	r.submit(b, res.header.Get("Location"), form.Encode())
	if all := r.siteEntries(); len(all) != 2 || !all[0].Imported && !all[1].Imported {
		t.Errorf("entries %+v", all)
	}
}

func TestResults_OnlyManagersAndBadFilesAreTold(t *testing.T) {
	r := newRig(t, 0)
	for _, p := range []store.Person{r.crew, r.auditor} {
		if res := r.open(r.signIn(p), "/results"); res.status != http.StatusForbidden {
			t.Errorf("%s: got %d, want 403", p.Role, res.status)
		}
	}
	b := r.signIn(r.manager)
	for _, c := range []struct{ name, file, what, says string }{
		{"empty", "", "readings", "empty"},
		{"a picture", "\x89PNG\r\n\x1a\n", "readings", "picture"},
		{"last days as a round", "Tag,Last button test\nK7QM2P3,2026-01-01\n", "readings", "past results"},
	} {
		if res := r.uploadTo(b, "/results", "x.csv", []byte(c.file), "", c.what); res.status != http.StatusUnprocessableEntity || !strings.Contains(res.body, c.says) {
			t.Errorf("%s: got %d, want %q on the page", c.name, res.status, c.says)
		}
	}
}
