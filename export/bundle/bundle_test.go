package bundle

import (
	"bytes"
	"context"
	"encoding/hex"
	"encoding/json"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"
	"time"

	"github.com/xuri/excelize/v2"

	"tripwell/export"
	"tripwell/forms"
	"tripwell/store"
	"tripwell/store/proof"
	"tripwell/store/record"
)

func TestBundle_ProvesItself(t *testing.T) {
	h := newHouse(t)
	h.work(60)
	b := h.bundle()
	r := verify(t, b, Check{Key: h.key()})
	if len(r.Findings) > 0 {
		t.Fatalf("a bundle as it was made: %s", r.text())
	}
	notes := strings.Join(r.Notes, "\n")
	for _, want := range []string{"1 records were refused", "of installation " + h.phone + " the numbers 61 to 62 never came"} {
		if !strings.Contains(notes, want) {
			t.Errorf("the notes do not say %q:\n%s", want, notes)
		}
	}
	if !strings.Contains(strings.Join(r.Checked, "\n"), "cells of the workbook") {
		t.Errorf("the cells were not compared: %v", r.Checked)
	}
	if r := verify(t, b, Check{}); len(r.Findings) > 0 || !strings.Contains(strings.Join(r.Notes, "\n"), proof.Fingerprint(h.key())) {
		t.Errorf("without a key: %s %v", r.text(), r.Notes)
	}
	files := unpack(t, b)
	for name := range files {
		if strings.HasSuffix(name, ".jsonl") != strings.HasPrefix(name, "records/") {
			t.Errorf("%s: record bytes, and nothing else, are JSON Lines", name)
		}
	}
	// The workbook made from the records alone is the one the store gives.
	var want bytes.Buffer
	must(t, export.WorkbookOf(&want, h.Store, everything, export.WorkbookAsk{From: forms.NoDay, To: forms.NoDay, Organisation: "Kiln Lane Buildings"}))
	sameRows(t, want.Bytes(), files[workbookFile], "Cover")
}

// sameRows compares two workbooks but for one sheet.
func sameRows(t *testing.T, a, b []byte, but string) {
	t.Helper()
	x, err := excelize.OpenReader(bytes.NewReader(a))
	must(t, err)
	y, err := excelize.OpenReader(bytes.NewReader(b))
	must(t, err)
	for _, sheet := range x.GetSheetList() {
		if sheet == but {
			continue
		}
		p, err := x.GetRows(sheet)
		must(t, err)
		q, err := y.GetRows(sheet)
		must(t, err)
		if !slices.EqualFunc(p, q, slices.Equal) {
			t.Errorf("sheet %s of the bundle is not that of the store", sheet)
		}
	}
}

func TestBundle_ScopeIsAllItHolds(t *testing.T) {
	h := newHouse(t)
	h.work(12)
	other := h.newID("other site")
	_, err := h.Append(context.Background(), store.Draft{Kind: "site.registered", Log: other, Subject: other, By: h.manager.ID, Body: map[string]any{"set": map[string]any{"code": "ELM-9", "name": "Elm Row", "zone": "America/Denver"}}})
	must(t, err)
	var out bytes.Buffer
	must(t, Write(context.Background(), &out, h.Store, store.Scope{Person: h.crew.ID, Role: "auditor", Sites: []string{h.site.ID}}, Ask{From: forms.NoDay, To: forms.NoDay}))
	for name, b := range unpack(t, out.Bytes()) {
		if name != grantsFile && (bytes.Contains(b, []byte(other)) || bytes.Contains(b, []byte("Elm Row"))) {
			t.Errorf("%s speaks of a site outside the scope", name)
		}
	}
	if r := verify(t, out.Bytes(), Check{Key: h.key()}); len(r.Findings) > 0 {
		t.Errorf("a part of the store: %s", r.text())
	}
	if err := Write(context.Background(), &out, h.Store, store.Scope{Role: "auditor", Sites: []string{h.site.ID}}, Ask{Site: other}); err == nil {
		t.Error("a bundle of a site outside the scope was written")
	}
}

// TestVerify_NamesWhatWasDone tampers in every way the records could be bent, and looks for the sentence that names it.
func TestVerify_NamesWhatWasDone(t *testing.T) {
	h := newHouse(t)
	h.work(40)
	b := h.bundle()
	records, stamps := recordsName(h.site.ID), stampsName(h.site.ID)
	victim := h.entries[22]
	at := func(all [][]byte) int {
		return slices.IndexFunc(all, func(l []byte) bool { return bytes.Contains(l, []byte(`{"id":"`+victim)) })
	}
	place := 0
	_ = lines(func(all [][]byte) [][]byte { place = at(all) + 1; return all })(unpack(t, b)[records])
	cases := []struct {
		name, file string
		change     func(old []byte) []byte
		want       []string
	}{
		{"a byte", records, lines(func(all [][]byte) [][]byte {
			all[at(all)] = bytes.Replace(all[at(all)], []byte(`"button_trips":"yes"`), []byte(`"button_trips":"noo"`), 1)
			return all
		}), []string{"has been changed", victim}},
		{"a dropped record", records, lines(func(all [][]byte) [][]byte { return slices.Delete(all, at(all), at(all)+1) }), []string{"is missing"}},
		{"a record dropped with its stamp and leaf", "", nil, []string{"records give another root"}},
		{"two records swapped", records, lines(func(all [][]byte) [][]byte {
			i := at(all)
			all[i], all[i+1] = all[i+1], all[i]
			return all
		}), []string{"has been changed"}},
		{"a re-dated record", records, lines(func(all [][]byte) [][]byte {
			all[at(all)] = bytes.Replace(all[at(all)], []byte(`"at":"2026-10-`), []byte(`"at":"2026-09-`), 1)
			return all
		}), []string{"has been changed", victim}},
		{"a stamp re-dated", stamps, lines(func(all [][]byte) [][]byte {
			all[place-1] = bytes.Replace(all[place-1], []byte(`"received":"2026-10-`), []byte(`"received":"2026-09-`), 1)
			return all
		}), []string{"or its stamp has been changed", victim}},
		{"the end cut off", records, lines(func(all [][]byte) [][]byte { return all[:len(all)-3] }), []string{"is missing"}},
		{"a record put in", records, lines(func(all [][]byte) [][]byte {
			copied := bytes.Replace(bytes.Clone(all[at(all)]), []byte(victim), []byte(h.newID("forged")), 1)
			return append(all, copied)
		}), []string{"was put in later"}},
		{"a record twice", records, lines(func(all [][]byte) [][]byte { return append(all, all[at(all)]) }), []string{"stands twice"}},
		{"a hidden refusal", refusalsFile, func([]byte) []byte { return []byte("[]") }, []string{"leaves it out"}},
		{"a refusal with other bytes", refusalsFile, func(old []byte) []byte {
			var list []refusal
			must(t, json.Unmarshal(old, &list))
			list[0].Bytes = []byte("{}")
			out, err := json.Marshal(list)
			must(t, err)
			return out
		}, []string{"are not those that were refused"}},
		{"another grant", grantsFile, func(old []byte) []byte {
			return bytes.Replace(old, []byte(`\"role\":\"crew\"`), []byte(`\"role\":\"manager\"`), 1)
		}, []string{"is not the one that stands there"}},
		{"a head that says something else", headFile, func(old []byte) []byte { return bytes.Replace(old, []byte("2026-"), []byte("2025-"), 1) }, []string{"not signed by this key"}},
		{"a name", peopleFile, func(old []byte) []byte { return bytes.Replace(old, []byte("Crew 1"), []byte("Crew 2"), 1) }, []string{peopleFile, "The workbook says “Crew 1”; the records say “Crew 2”"}},
		{"a licence", peopleFile, func(old []byte) []byte { return bytes.Replace(old, []byte("EL-2207"), []byte("EL-9999"), 1) }, []string{peopleFile, "The workbook says “EL-2207, journeyman”; the records say “EL-9999, journeyman”"}},
		{"what somebody may do", peopleFile, func(old []byte) []byte { return bytes.Replace(old, []byte(`"measure"`), []byte(`"nothing known"`), 1) }, []string{peopleFile, "press the TEST button, test with an instrument"}},
		{"a file missing", peopleFile, func([]byte) []byte { return nil }, []string{"is missing"}},
		{"the leaf hashes", treeName(h.site.ID), func(old []byte) []byte { return bytes.ToUpper(old)[:65*10] }, []string{"The records themselves are whole"}},
	}
	for _, c := range cases {
		t.Run(c.name, func(t *testing.T) {
			var bent []byte
			if c.change != nil {
				bent = altered(t, b, c.file, c.change)
			} else {
				files := unpack(t, b)
				for _, name := range []string{records, stamps, treeName(h.site.ID)} {
					files[name] = lines(func(all [][]byte) [][]byte { return slices.Delete(all, place-1, place) })(files[name])
				}
				bent = pack(t, files)
			}
			got := verify(t, bent, Check{Key: h.key()}).text()
			for _, want := range c.want {
				if !strings.Contains(got, want) {
					t.Errorf("nothing says %q:\n%s", want, got)
				}
			}
		})
	}
	t.Run("a site left out of all sites", func(t *testing.T) {
		files := unpack(t, b)
		var doc Doc
		must(t, json.Unmarshal(files[docFile], &doc))
		doc.Sites, doc.Logs = nil, slices.DeleteFunc(doc.Logs, func(l Line) bool { return l.Log == h.site.ID })
		for _, name := range []string{records, stamps, treeName(h.site.ID)} {
			delete(files, name)
			doc.Files = slices.DeleteFunc(doc.Files, func(f File) bool { return f.Name == name })
		}
		var err error
		files[docFile], err = json.Marshal(doc)
		must(t, err)
		if got := verify(t, pack(t, files), Check{}).text(); !strings.Contains(got, "says it holds all sites, but the head covers") {
			t.Errorf("got %s", got)
		}
	})
	t.Run("a log named twice", func(t *testing.T) {
		bent := altered(t, b, docFile, func(old []byte) []byte {
			var doc Doc
			must(t, json.Unmarshal(old, &doc))
			doc.Logs = append(doc.Logs, doc.Logs[0])
			out, err := json.Marshal(doc)
			must(t, err)
			return out
		})
		if got := verify(t, bent, Check{}).text(); !strings.Contains(got, "twice") {
			t.Errorf("got %s", got)
		}
	})
	t.Run("a file put in", func(t *testing.T) {
		files := unpack(t, b)
		files["records/other.jsonl"] = []byte("{}\n")
		if got := verify(t, pack(t, files), Check{}).text(); !strings.Contains(got, "put it in later") {
			t.Errorf("got %s", got)
		}
	})
	t.Run("no bundle", func(t *testing.T) {
		for name, b := range map[string][]byte{"nothing": nil, "text": []byte("hello"), "a workbook": unpack(t, b)[workbookFile], "half": b[:len(b)/2]} {
			if _, err := Verify(context.Background(), bytes.NewReader(b), int64(len(b)), Check{}); err == nil {
				t.Errorf("%s was taken for a bundle", name)
			}
		}
	})
}

// doctored is what a dishonest organisation can do, which has the key: change a record, rebuild the tree, sign anew.
func (h *house) doctored(b []byte) []byte {
	h.t.Helper()
	files := unpack(h.t, b)
	records := recordsName(h.site.ID)
	files[records] = bytes.Replace(files[records], []byte(`"button_trips":"no"`), []byte(`"button_trips":"yes"`), 1)
	var doc Doc
	must(h.t, json.Unmarshal(files[docFile], &doc))
	var head proof.Head
	must(h.t, h.View(everything, func(v *store.View) error {
		kept, err := v.KeptHeads()
		if err != nil {
			return err
		}
		head, err = v.HeadAt(kept[len(kept)-1].Seq)
		return err
	}))
	was, err := proof.Open(string(files[headFile]), h.key())
	must(h.t, err)
	head.Origin, head.Time = was.Origin, was.Time
	var edge proof.Edge
	tree := ""
	all, stamps := bytes.Split(files[records], []byte("\n")), bytes.Split(files[stampsName(h.site.ID)], []byte("\n"))
	for i := range all[:len(all)-1] {
		leaf := proof.LeafHash(record.Leaf(stamps[i], all[i]))
		edge.Append(leaf)
		tree += hex.EncodeToString(leaf[:]) + "\n"
	}
	files[treeName(h.site.ID)] = []byte(tree)
	for i, l := range head.Logs {
		if l.Log == h.site.ID {
			head.Logs[i].Root = edge.Root()
		}
	}
	private, err := os.ReadFile(filepath.Join(h.dir, "keys", "head.key"))
	must(h.t, err)
	note, err := head.Sign(strings.TrimSpace(string(private)))
	must(h.t, err)
	files[headFile] = []byte(note)
	relined := func(log string) Line {
		l, err := head.Line(log)
		must(h.t, err)
		return lineOf(l)
	}
	for i := range doc.Logs {
		doc.Logs[i] = relined(doc.Logs[i].Log)
	}
	office := relined("office")
	doc.Office = &office
	for i, f := range doc.Files {
		doc.Files[i].SHA256 = sumOf(files[f.Name])
	}
	files[docFile], err = json.Marshal(doc)
	must(h.t, err)
	return pack(h.t, files)
}

func TestVerify_AnEarlierHeadStillStands(t *testing.T) {
	h := newHouse(t)
	h.work(20)
	first := h.bundle()
	head := unpack(t, first)[headFile]
	for range 5 {
		h.press(3, "yes")
	}
	second := h.bundle()
	for name, earlier := range map[string][]byte{"the head": head, "the bundle": first, "its own head": unpack(t, second)[headFile], "the head with other line ends": bytes.ReplaceAll(head, []byte("\n"), []byte("\r\n"))} {
		r := verify(t, second, Check{Key: h.key(), Earlier: earlier})
		if len(r.Findings) > 0 {
			t.Errorf("held against %s: %s", name, r.text())
		}
		if !strings.Contains(strings.Join(r.Checked, "\n"), "earlier head") && !strings.Contains(strings.Join(r.Checked, "\n"), "was signed over") {
			t.Errorf("held against %s: nothing says so: %v", name, r.Checked)
		}
	}
	doctored := h.doctored(second)
	if r := verify(t, doctored, Check{Key: h.key()}); strings.Contains(r.text(), "has been changed") {
		t.Fatalf("the doctored bundle is no honest forgery: %s", r.text())
	}
	for name, earlier := range map[string][]byte{"the head": head, "the bundle": first} {
		if got := verify(t, doctored, Check{Key: h.key(), Earlier: earlier}).text(); !strings.Contains(got, "history was rewritten") {
			t.Errorf("a doctored copy against %s: %s", name, got)
		}
	}
	if got := verify(t, first, Check{Key: h.key(), Earlier: second}).text(); !strings.Contains(got, "now it holds") {
		t.Errorf("an older bundle against a newer one: %s", got)
	}
	_, public, err := proof.NewKey(strings.NewReader(strings.Repeat("tripwell", 20)), "tripwell/x/y")
	must(t, err)
	if got := verify(t, second, Check{Key: public}).text(); !strings.Contains(got, "another key") {
		t.Errorf("another key: %s", got)
	}
	stranger := newHouse(t)
	stranger.work(2)
	if got := verify(t, second, Check{Key: h.key(), Earlier: unpack(t, stranger.bundle())[headFile]}).text(); !strings.Contains(got, "not signed by the key") {
		t.Errorf("a head of somebody else: %s", got)
	}
}

func TestVerify_EveryCell(t *testing.T) {
	h := newHouse(t)
	h.work(40)
	b := h.bundle()
	bent := func(change func(f *excelize.File)) []byte {
		return altered(t, b, workbookFile, func(old []byte) []byte {
			f, err := excelize.OpenReader(bytes.NewReader(old))
			must(t, err)
			change(f)
			var out bytes.Buffer
			must(t, f.Write(&out))
			return out.Bytes()
		})
	}
	if r := verify(t, bent(func(*excelize.File) {}), Check{}); len(r.Findings) > 0 || !strings.Contains(strings.Join(r.Notes, "\n"), "saved again") {
		t.Errorf("saved again by another program: %s %v", r.text(), r.Notes)
	}
	if r := verify(t, bent(func(f *excelize.File) { sortSheet(t, f, "Entries", 7) }), Check{}); len(r.Findings) > 0 {
		t.Errorf("sorted and filtered: %s", r.text())
	}
	cases := map[string]struct {
		change func(f *excelize.File)
		want   []string
	}{
		"a verdict": {func(f *excelize.File) {
			rows, err := f.GetRows("Entries", excelize.Options{RawCellValue: true})
			must(t, err)
			for i, row := range rows {
				for j, v := range row {
					if v == "Fail" {
						name, err := excelize.CoordinatesToCellName(j+1, i+1)
						must(t, err)
						must(t, f.SetCellStr("Entries", name, "Pass"))
						return
					}
				}
			}
			t.Fatal("no entry failed")
		}, []string{"sheet Entries, cell ", "The workbook says “Pass”; the records say “Fail”"}},
		"a day":                {func(f *excelize.File) { must(t, f.SetCellInt("Entries", "G10", 46000)) }, []string{"sheet Entries, cell G10", "“46000”"}},
		"a row taken out":      {func(f *excelize.File) { must(t, f.RemoveRow("Readings", 12)) }, []string{"A row is missing that the records give"}},
		"a row put in":         {func(f *excelize.File) { must(t, f.SetSheetRow("Flags", "A5000", &[]any{"X", "Y"})) }, []string{"row 5000", "No record gives this row"}},
		"a remark":             {func(f *excelize.File) { must(t, f.SetCellStr("Register", "AZ5", "fine")) }, []string{"cell AZ5", "“fine”; the records say nothing"}},
		"a formula":            {func(f *excelize.File) { must(t, f.SetCellFormula("Entries", "A9", "A8")) }, []string{"cell A9", "a formula"}},
		"a sheet put in":       {func(f *excelize.File) { _, err := f.NewSheet("Summary"); must(t, err) }, []string{`"Summary"`, "put it in"}},
		"a sheet taken out":    {func(f *excelize.File) { must(t, f.DeleteSheet("Flags")) }, []string{"sheet Flags", "A row is missing"}},
		"the cover":            {func(f *excelize.File) { must(t, f.SetCellStr("Cover", "B3", "All sites of the world")) }, []string{"sheet Cover, cell B3"}},
		"a number made a text": {func(f *excelize.File) { must(t, f.SetCellStr("Entries", "G10", "2026-01-01")) }, []string{"cell G10"}},
	}
	for name, c := range cases {
		t.Run(name, func(t *testing.T) {
			got := verify(t, bent(c.change), Check{}).text()
			for _, want := range c.want {
				if !strings.Contains(got, want) {
					t.Errorf("nothing says %q:\n%s", want, got)
				}
			}
		})
	}
	if got := verify(t, altered(t, b, workbookFile, func([]byte) []byte { return []byte("PK no workbook") }), Check{}).text(); !strings.Contains(got, "cannot be read") {
		t.Errorf("no workbook: %s", got)
	}
}

// sortSheet turns the rows under the headings around and hides some, as somebody who sorts and filters does.
func sortSheet(t *testing.T, f *excelize.File, sheet string, hidden int) {
	t.Helper()
	rows, err := f.GetRows(sheet, excelize.Options{RawCellValue: true})
	must(t, err)
	type cell struct {
		kind excelize.CellType
		text string
	}
	at := func(row, col int) string {
		name, err := excelize.CoordinatesToCellName(col, row)
		must(t, err)
		return name
	}
	all := make([][]cell, len(rows))
	for i, row := range rows {
		for j := range row {
			kind, err := f.GetCellType(sheet, at(i+1, j+1))
			must(t, err)
			all[i] = append(all[i], cell{kind, row[j]})
		}
	}
	for i := 1; i < len(rows); i++ {
		from := all[len(rows)-i]
		for j := range max(len(rows[i]), len(from)) {
			switch {
			case j >= len(from) || from[j].text == "":
				must(t, f.SetCellValue(sheet, at(i+1, j+1), nil))
			case from[j].kind == excelize.CellTypeInlineString || from[j].kind == excelize.CellTypeSharedString:
				must(t, f.SetCellStr(sheet, at(i+1, j+1), from[j].text))
			default:
				must(t, f.SetCellDefault(sheet, at(i+1, j+1), from[j].text))
			}
		}
	}
	must(t, f.SetRowVisible(sheet, hidden, false))
}

func TestBundle_LateEntriesAreSaid(t *testing.T) {
	h := newHouse(t)
	h.press(0, "yes")
	made := h.now
	h.n++
	h.now = made.Add(20 * 24 * time.Hour)
	d := h.devices[0]
	raw, err := json.Marshal(map[string]any{"form": d.Kind + "/button", "given": map[string]any{"kind": d.Kind}, "readings": map[string]any{"found": "on", "button_trips": "yes", "button_resets": "yes"}, "source": "phone"})
	must(t, err)
	line := record.Write(record.Record{ID: h.newID("late"), Kind: "entry.made", V: 1, Log: h.site.ID, Subject: d.ID, At: made.Add(time.Hour), Clock: uint64(made.Add(time.Hour).UnixMilli()) << 16, By: h.crew.ID, From: h.phone, N: h.n, Body: raw})
	_, err = h.Push(context.Background(), store.Sender{Installation: h.phone, Sent: h.now}, []store.Incoming{{Record: line}})
	must(t, err)
	r := verify(t, h.bundle(), Check{})
	if len(r.Findings) > 0 || !strings.Contains(strings.Join(r.Notes, "\n"), "1 entries arrived more than seven days") {
		t.Errorf("got %s %v", r.text(), r.Notes)
	}
}
