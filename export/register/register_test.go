package register

import (
	"bytes"
	"errors"
	"fmt"
	"io"
	"os"
	"strings"
	"testing"

	"tripwell/export/intake"
	"tripwell/store"
)

func sampleRegister(t testing.TB) []byte {
	t.Helper()
	raw, err := os.ReadFile("../../testdata/register.csv")
	if err != nil {
		t.Fatal(err)
	}
	return raw
}

// read reads a register without a store.
func read(r io.Reader) ([]Row, []Problem, error) {
	book, err := intake.Open("test", r, intake.Caps{})
	if err != nil {
		return nil, nil, asRefusal(err)
	}
	reading, err := Read(book, Mapping{}, nil)
	if err == nil {
		err = reading.Refusal()
	}
	return reading.Rows, reading.Problems, err
}

func TestRegisterCSV_SampleIsClean(t *testing.T) {
	raw := sampleRegister(t)
	rows, problems, err := read(bytes.NewReader(raw))
	if err != nil || len(problems) > 0 {
		t.Fatalf("problems %v, error %v", problems, err)
	}
	if want := bytes.Count(raw, []byte("\n")) - 1; len(rows) != want || want < 40 {
		t.Errorf("got %d rows, want %d, at least 40", len(rows), want)
	}
	r := rows[0]
	if r.Site != "ALDER-1" || r.SiteName != "Alder Court" || r.Zone != "America/Chicago" || r.Panel != "LP-1" || r.CircuitNo != "2" ||
		r.Circuit["breaker_a"] != 20.0 || r.Place["name"] != "By the sink" || r.Device["kind"] != "gfci-receptacle" || r.Device["installed"] != "2021-04-12" {
		t.Errorf("first row: got %+v", r)
	}
}

func TestRegisterCSV_SameRowsHoweverTheSheetWasSaved(t *testing.T) {
	const plain = "site,zone,kind,place,breaker_a,panel,circuit,installed\nELM-4,Europe/Berlin,rcd,Hall,16,UV-1,3,2020-02-29\n"
	want, problems, err := read(strings.NewReader(plain))
	if err != nil || len(want) != 1 || len(problems) > 0 {
		t.Fatalf("rows %v, problems %v, error %v", want, problems, err)
	}
	for name, text := range map[string]string{
		"byte order mark": "\uFEFF" + plain,
		"semicolons":      strings.ReplaceAll(plain, ",", ";"),
		"tabs":            strings.ReplaceAll(plain, ",", "\t"),
		"line ends":       strings.ReplaceAll(plain, "\n", "\r\n"),
		"blank lines":     strings.ReplaceAll(plain, "\n", "\n,,,,,,,\n"),
		"synonyms":        "Site code,Time zone,Device kind,Location,Breaker (A),Board,Circuit no.,Installed on\nelm-4,Europe/Berlin,RCD, Hall ,16 A,UV-1,3,2020-02-29\n",
	} {
		got, problems, err := read(strings.NewReader(text))
		if err != nil || len(problems) > 0 || len(got) != 1 {
			t.Errorf("%s: rows %v, problems %v, error %v", name, got, problems, err)
			continue
		}
		got[0].Line = want[0].Line
		if fmt.Sprint(got[0]) != fmt.Sprint(want[0]) {
			t.Errorf("%s: got %+v, want %+v", name, got[0], want[0])
		}
	}
}

func TestRegisterCSV_BadRowsAreNamedAndGoodOnesStay(t *testing.T) {
	text := strings.Join([]string{
		"site,zone,kind,place,panel,circuit,breaker_a,installed,tag,serial,colour",
		"ELM-4,America/Denver,gfci-receptacle,Sink,LP-1,1,20,2021-01-31,,,",
		"ELM-4,,toaster,Counter,,,,,,,",
		",,receptacle,Hall,,,,,,,",
		"ELM-4,,receptacle,Hall,,,,03/04/2021,,,",
		"ELM-4,,receptacle,Stair,,,,2021-02-30,,,",
		"ELM-4,,receptacle,Loft,LP-1,2,twenty,,,,",
		"ELM-4,,receptacle,Attic,,3,,,,,",
		"ELM-4,,receptacle,Cellar,,,,,ZZZZZZZ,,",
		"ELM-4,,cord-set,,,,,,,,",
		"ELM-4,Mars/Olympus,receptacle,Porch,,,,,,,",
		"ELM-4,,receptacle,,,,,,,,",
		`ELM-4,,receptacle,a "bad" quote,,,,,,,`,
		"ELM-4,,receptacle,Yard,,,,,,,,,,too many",
		"ELM-4,,receptacle,Garden,,,,,,,",
	}, "\n")
	rows, problems, err := read(strings.NewReader(text))
	if err != nil {
		t.Fatal(err)
	}
	if len(rows) != 3 || rows[1].Line != 13 || rows[2].Line != 15 {
		t.Errorf("got %d good rows, want lines 2, 13 and 15", len(rows))
	}
	want := []struct {
		line          int
		column, value string
	}{
		{1, "colour", ""}, {3, "kind", "toaster"}, {4, "site", ""}, {5, "installed", "03/04/2021"}, {6, "installed", "2021-02-30"}, {7, "breaker_a", "twenty"},
		{8, "panel", ""}, {9, "tag", "ZZZZZZZ"}, {10, "serial", ""}, {11, "zone", "Mars/Olympus"}, {12, "place", ""}, {14, "N", "too many"},
	}
	for i, w := range want {
		if i >= len(problems) {
			t.Fatalf("got %d problems, want %d", len(problems), len(want))
		}
		if p := problems[i]; p.Row != w.line || p.Column != w.column || p.Value != w.value || !strings.HasSuffix(p.Text, ".") || p.Skipped != (w.line > 1) {
			t.Errorf("problem %d: got %+v, want %+v", i, p, w)
		}
	}
}

func TestRegisterCSV_FilesThatAreNoRegister(t *testing.T) {
	for name, text := range map[string]string{
		"empty": "", "only a mark": "\uFEFF", "no site column": "kind,place\nrcd,Hall\n", "no kind column": "site,place\nELM-4,Hall\n",
		"no headings": "a,b\nc,d\n", "spreadsheet itself": "PK\x03\x04\x00\x00",
	} {
		_, _, err := read(strings.NewReader(text))
		var refused *store.Error
		if !errors.As(err, &refused) || refused.Text == "" || refused.Code == "" {
			t.Errorf("%s: got %v, want a refusal with a sentence", name, err)
		}
	}
	_, _, err := read(&endless{})
	var refused *store.Error
	if !errors.As(err, &refused) || refused.Code != "too_large" {
		t.Errorf("endless file: got %v, want too_large", err)
	}
}

// endless is a file without end.
type endless struct{}

func (*endless) Read(p []byte) (int, error) {
	for i := range p {
		p[i] = 'a'
	}
	return len(p), nil
}

func TestRegisterDrafts_IdsComeFromTheKeyAlone(t *testing.T) {
	plan := func(text string) Plan {
		rows, problems, err := read(strings.NewReader(text))
		if err != nil || len(problems) > 0 {
			t.Fatalf("problems %v, error %v", problems, err)
		}
		return planRows(noneKnown("org-1"), "me", rows, Ask{})
	}
	const head = "site,zone,building,room,place,kind,make,note\n"
	first := plan(head + "ELM-4,UTC,A,Hall,Left,receptacle,Make A,\nELM-4,,A,Hall,Right,receptacle,,\n")
	again := plan(head + "ELM-4,,a,hall,RIGHT,receptacle,,moved up\nELM-4,UTC,A,Hall,Left,receptacle,Make B,\n")
	ids := func(p Plan) map[string]bool {
		m := map[string]bool{}
		for _, r := range p.Rows {
			for _, d := range r.Drafts {
				m[d.Kind+d.ID] = true
			}
		}
		return m
	}
	a, b := ids(first), ids(again)
	if len(a) != 5 || fmt.Sprint(a) != fmt.Sprint(b) {
		t.Errorf("ids of the same rows in another order and case differ:\n%v\n%v", a, b)
	}
	for id := range a {
		if !strings.Contains(id, "-8") {
			t.Errorf("%s is no version 8 id", id)
		}
	}
}

func TestRegisterDrafts_ProblemsAcrossRows(t *testing.T) {
	const text = `site,zone,place,panel,circuit,kind,tag
NEW-1,,Hall,,,receptacle,
ELM-4,UTC,Hall,,,receptacle,
ELM-4,,hall,,,gfci-receptacle,
ELM-4,,,LP-1,1,gfci-breaker,
ELM-4,,,LP-1,2,gfci-breaker,
ELM-4,,,LP-1,2,gfci-breaker,
`
	rows, problems, err := read(strings.NewReader(text))
	if err != nil || len(problems) > 0 {
		t.Fatalf("problems %v, error %v", problems, err)
	}
	plan := planRows(noneKnown("org-1"), "me", rows, Ask{})
	if plan.Added != 3 || len(plan.NewSites) != 2 || len(plan.NeedTag) != 3 {
		t.Errorf("got %d added, %d sites, %d without tag; want 3, 1, 3", plan.Added, len(plan.NewSites), len(plan.NeedTag))
	}
	var lines []int
	for _, p := range plan.Problems {
		lines = append(lines, p.Row)
	}
	if fmt.Sprint(lines) != "[2 4 7]" {
		t.Errorf("problems on lines %v, want 2 (no zone), 4 and 7 (same place)", lines)
	}
}

func FuzzRegisterCSV(f *testing.F) {
	f.Add(sampleRegister(f))
	f.Add([]byte("site;kind\nELM-4;rcd\n\"open"))
	f.Add([]byte("\xEF\xBB\xBFsite\tkind\tzone\n\t\t\n"))
	f.Fuzz(func(t *testing.T, raw []byte) {
		rows, problems, err := read(bytes.NewReader(raw))
		if err != nil {
			return
		}
		for _, p := range problems {
			if p.Text == "" || p.Row < 1 {
				t.Errorf("a problem without line or words: %+v", p)
			}
		}
		plan := planRows(noneKnown("org-1"), "me", rows, Ask{})
		if plan.Added+len(plan.Problems) < len(rows) {
			t.Errorf("%d rows became %d devices and %d problems", len(rows), plan.Added, len(plan.Problems))
		}
	})
}
