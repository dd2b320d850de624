package intake

import (
	"archive/zip"
	"bytes"
	"errors"
	"fmt"
	"strings"
	"testing"
	"time"

	"github.com/xuri/excelize/v2"

	"tripwell/forms"
)

func open(t *testing.T, raw []byte, max Caps) *Book {
	t.Helper()
	b, err := Open("sheet", bytes.NewReader(raw), max)
	if err != nil {
		t.Fatal(err)
	}
	return b
}

// texts gives the cells of a sheet as rows of text.
func texts(s Sheet) [][]string {
	var out [][]string
	for _, row := range s.Rows {
		var cells []string
		for _, c := range row {
			cells = append(cells, c.Text)
		}
		out = append(out, cells)
	}
	return out
}

func TestOpen_TextFiles(t *testing.T) {
	utf16 := func(s string, big, mark bool) string {
		var b bytes.Buffer
		if mark {
			s = "\uFEFF" + s
		}
		for _, r := range s {
			if big {
				b.Write([]byte{byte(r >> 8), byte(r)})
			} else {
				b.Write([]byte{byte(r), byte(r >> 8)})
			}
		}
		return b.String()
	}
	for _, c := range []struct{ name, raw, told, want string }{
		{"comma", "a,b\n1,2\n", "UTF-8", "[[a b] [1 2]]"},
		{"byte order mark", "\xEF\xBB\xBFa;b\n1;2", "semicolon", "[[a b] [1 2]]"},
		{"tab", "a\tb\n1\t2", "a tab", "[[a b] [1 2]]"},
		{"more commas inside cells than separators", "a;b\n\"1,2,3\";4,5\n\"1,2,3\";4,6", "semicolon", "[[a b] [1,2,3 4,5] [1,2,3 4,6]]"},
		{"sep= line", "sep=;\na;b,c", "UTF-8", "[[a b,c]]"},
		// Windows-1252: 0xE9 is é, 0x80 the euro sign (Unicode consortium, mapping table CP1252).
		{"Windows-1252", "caf\xE9;\x80\n1;2", "Windows-1252", "[[café €] [1 2]]"},
		{"UTF-16 little", utf16("é;b\n1;2", false, true), "UTF-16", "[[é b] [1 2]]"},
		{"UTF-16 big", utf16("é;b\n1;2", true, true), "UTF-16", "[[é b] [1 2]]"},
		{"UTF-16 without mark", utf16("abc;b\n1;2", false, false), "UTF-16", "[[abc b] [1 2]]"},
		{"line breaks inside a cell", "a,b\n\"x\ny\",2\nlast,3", "comma", "[[a b] [x\ny 2] [last 3]]"},
		{"blank lines keep their places", "a,b\n\n\n1,2", "comma", "[[a b] [] [] [1 2]]"},
		{"a mark of inches", "a,b\n2\" box,1\nc,2", "comma", "[[a b] [2\" box 1] [c 2]]"},
		{"a quotation mark never closed", "a,b\n\"x,1\nc,2\nd,3", "comma", "[[a b] [x,1] [c 2] [d 3]]"},
		{"old Mac line ends inside", "a,b\r\n1,2\r\n", "comma", "[[a b] [1 2]]"},
	} {
		t.Run(c.name, func(t *testing.T) {
			b := open(t, []byte(c.raw), Caps{})
			if got := fmt.Sprint(texts(b.Sheets[0])); got != c.want {
				t.Errorf("got %q, want %q", got, c.want)
			}
			if told := strings.Join(b.Told, " "); !strings.Contains(told, c.told) {
				t.Errorf("told %q, want something of %s", told, c.told)
			}
		})
	}
}

func TestOpen_DecimalComma(t *testing.T) {
	b := open(t, []byte("a;b\n0,3;1,5\n20;x"), Caps{})
	if !b.DecimalComma || *b.Sheets[0].Rows[1][0].Number != 0.3 || *b.Sheets[0].Rows[2][0].Number != 20 {
		t.Errorf("decimal comma %v, cells %v", b.DecimalComma, b.Sheets[0].Rows)
	}
	if c := open(t, []byte("a,b\n014,0.3"), Caps{}).Sheets[0].Rows[1]; c[0].Number != nil || *c[1].Number != 0.3 {
		t.Errorf("014 is a name, 0.3 a number: %v", c)
	}
}

// madeBook is an XLSX made by another writer than the reader under test.
func madeBook(t *testing.T, make func(f *excelize.File)) []byte {
	t.Helper()
	f := excelize.NewFile()
	defer f.Close()
	make(f)
	var out bytes.Buffer
	if err := f.Write(&out); err != nil {
		t.Fatal(err)
	}
	return out.Bytes()
}

func must(t testing.TB, err error) {
	t.Helper()
	if err != nil {
		t.Fatal(err)
	}
}

func TestOpen_WorkbookCells(t *testing.T) {
	raw := madeBook(t, func(f *excelize.File) {
		day, err := f.NewStyle(&excelize.Style{NumFmt: 14})
		must(t, err)
		own := `d" of "mmmm yyyy`
		ownDay, err := f.NewStyle(&excelize.Style{CustomNumFmt: &own})
		must(t, err)
		amps := `0.0" days"`
		figure, err := f.NewStyle(&excelize.Style{CustomNumFmt: &amps})
		must(t, err)
		hour, err := f.NewStyle(&excelize.Style{NumFmt: 20})
		must(t, err)
		for cell, v := range map[string]any{"A1": "Title", "A3": 20, "B3": 0.1 + 0.2, "C3": true, "D3": "  text ", "E3": 46022, "F3": 46022.5, "G3": 7, "H3": 0.5, "A4": "Hall", "B4": "14/16", "B5": 4} {
			must(t, f.SetCellValue("Sheet1", cell, v))
		}
		for cell, style := range map[string]int{"E3": day, "F3": ownDay, "G3": figure, "H3": hour} {
			must(t, f.SetCellStyle("Sheet1", cell, cell, style))
		}
		must(t, f.MergeCell("Sheet1", "A1", "D1"))
		must(t, f.MergeCell("Sheet1", "A4", "A5"))
		must(t, f.SetCellRichText("Sheet1", "I3", []excelize.RichTextRun{{Text: "two "}, {Text: "runs"}}))
		_, err = f.NewSheet("Hidden")
		must(t, err)
		must(t, f.SetSheetVisible("Hidden", false))
	})
	b := open(t, raw, Caps{})
	if len(b.Sheets) != 2 || b.Sheets[0].Hidden || !b.Sheets[1].Hidden {
		t.Fatalf("sheets %+v", b.Sheets)
	}
	// 46022 days after 1899-12-30 is 2025-12-31: ECMA-376 part 1, 18.17.4.1, the 1900 date base system.
	want := "[[Title] [] [20 0.3 TRUE text 2025-12-31 2025-12-31 12:00 7 12:00 two runs] [Hall 14/16] [Hall 4]]"
	if got := fmt.Sprint(texts(b.Sheets[0])); got != want {
		t.Errorf("got  %s\nwant %s", got, want)
	}
	row := b.Sheets[0].Rows[2]
	if row[0].Number == nil || row[2].Bool == nil || row[4].Date == nil || *row[4].Date != forms.Date(2025, time.December, 31) || row[6].Number == nil || row[6].Date != nil {
		t.Errorf("types are lost: %+v", row)
	}
}

func TestOpen_FormulasCountByTheirValue(t *testing.T) {
	raw := packed(t, map[string]string{
		"xl/worksheets/sheet1.xml": `<worksheet><sheetData><row r="1"><c r="A1"><f>2+3</f><v>5</v></c><c r="B1" t="str"><f>"a"&amp;"b"</f><v>ab</v></c><c r="C1"><f>NOW()</f></c><c r="D1" t="e"><f>1/0</f><v>#DIV/0!</v></c><c r="E1" t="d"><v>2026-03-04T00:00:00</v></c></row></sheetData></worksheet>`,
	})
	b := open(t, raw, Caps{})
	if got := fmt.Sprint(texts(b.Sheets[0])); got != "[[5 ab   2026-03-04]]" {
		t.Errorf("got %s", got)
	}
	if len(b.Problems) != 2 || b.Problems[0].Column != "C" || b.Problems[1].Column != "D" || b.Problems[0].Sheet != "Hall" || b.Problems[0].Row != 1 {
		t.Errorf("problems %+v", b.Problems)
	}
}

// packed makes the least XLSX there is, with parts replaced or added.
func packed(t testing.TB, parts map[string]string) []byte {
	t.Helper()
	all := map[string]string{
		"[Content_Types].xml":        `<Types><Override PartName="/xl/workbook.xml" ContentType="application/vnd.openxmlformats-officedocument.spreadsheetml.sheet.main+xml"/></Types>`,
		"_rels/.rels":                `<Relationships><Relationship Id="r1" Type="http://schemas.openxmlformats.org/officeDocument/2006/relationships/officeDocument" Target="xl/workbook.xml"/></Relationships>`,
		"xl/workbook.xml":            `<workbook xmlns:r="http://schemas.openxmlformats.org/officeDocument/2006/relationships"><sheets><sheet name="Hall" sheetId="1" r:id="rId1"/></sheets></workbook>`,
		"xl/_rels/workbook.xml.rels": `<Relationships><Relationship Id="rId1" Type="http://schemas.openxmlformats.org/officeDocument/2006/relationships/worksheet" Target="worksheets/sheet1.xml"/></Relationships>`,
		"xl/worksheets/sheet1.xml":   `<worksheet><sheetData><row r="1"><c r="A1"><v>1</v></c></row></sheetData></worksheet>`,
	}
	for name, text := range parts {
		all[name] = text
	}
	var out bytes.Buffer
	z := zip.NewWriter(&out)
	for name, text := range all {
		w, err := z.Create(name)
		must(t, err)
		_, err = w.Write([]byte(text))
		must(t, err)
	}
	must(t, z.Close())
	return out.Bytes()
}

func TestOpen_RefusesHostileFiles(t *testing.T) {
	sheet := func(rows string) map[string]string {
		return map[string]string{"xl/worksheets/sheet1.xml": "<worksheet><sheetData>" + rows + "</sheetData></worksheet>"}
	}
	many := map[string]string{}
	for i := range 40 {
		many[fmt.Sprintf("xl/media/%d", i)] = "x"
	}
	ole := "\xD0\xCF\x11\xE0\xA1\xB1\x1A\xE1" + strings.Repeat("\x00", 64)
	for _, c := range []struct {
		name string
		raw  []byte
		max  Caps
		code string
		text string
	}{
		{"too many bytes", []byte(strings.Repeat("a,b\n", 100)), Caps{Bytes: 100}, "too_large", "larger than"},
		{"too many rows", []byte(strings.Repeat("a,b\n", 100)), Caps{Rows: 99}, "too_large", "99 rows"},
		{"too many columns", []byte(strings.Repeat(",", 99) + "x"), Caps{Columns: 99}, "too_large", "99 columns"},
		{"too many cells", []byte(strings.Repeat("a,b\n", 100)), Caps{Cells: 150}, "too_large", "150 filled cells"},
		{"nothing", []byte(" \n"), Caps{}, "invalid", "empty"},
		{"locked", []byte(ole + "E\x00n\x00c\x00r\x00y\x00p\x00t\x00e\x00d\x00P\x00a\x00c\x00k\x00a\x00g\x00e\x00"), Caps{}, "invalid", "password"},
		{"old form", []byte(ole), Caps{}, "invalid", "XLS"},
		{"picture", []byte("\x89PNG\r\n\x1a\n"), Caps{}, "invalid", "picture"},
		{"program", append([]byte("\x7fELF"), make([]byte, 500)...), Caps{}, "invalid", "no text"},
		{"web page", []byte("<html><table><tr><td>1"), Caps{}, "invalid", "web page"},
		{"macros", packed(t, map[string]string{"xl/vbaProject.bin": "x"}), Caps{}, "invalid", "macros"},
		{"macros by type", packed(t, map[string]string{"[Content_Types].xml": `<Types><Override ContentType="application/vnd.ms-excel.sheet.macroEnabled.main+xml"/></Types>`}), Caps{}, "invalid", "macros"},
		{"links to other files", packed(t, map[string]string{"xl/externalLinks/externalLink1.xml": "<x/>"}), Caps{}, "invalid", "links to other files"},
		{"an archive of something else", packed(t, map[string]string{"[Content_Types].xml": "<Types/>"}), Caps{}, "invalid", "archive"},
		{"too many parts", packed(t, many), Caps{Entries: 30}, "too_large", "30 files"},
		{"packed too tightly", packed(t, map[string]string{"xl/media/zeros": strings.Repeat("\x00", 2<<20)}), Caps{}, "too_large", "300 times"},
		{"unpacks to too much", packed(t, map[string]string{"xl/media/zeros": strings.Repeat("\x00", 1<<20)}), Caps{Unpacked: 1 << 19}, "too_large", "unpacks to more"},
		{"rows that go back", packed(t, sheet(`<row r="5"><c><v>1</v></c></row><row r="2"/>`)), Caps{}, "invalid", "not in order"},
		{"a row beyond the bound", packed(t, sheet(`<row r="1048576"><c r="A1048576"><v>1</v></c></row>`)), Caps{}, "too_large", "rows"},
		{"a column beyond the bound", packed(t, sheet(`<row r="1"><c r="XFD1"><v>1</v></c></row>`)), Caps{}, "too_large", "columns"},
		{"nested too deep", packed(t, sheet(strings.Repeat("<a>", 300))), Caps{}, "invalid", "nested"},
		{"cell nested too deep", packed(t, sheet("<row><c>"+strings.Repeat("<a>", 300))), Caps{}, "invalid", "nested"},
		{"a tag of nothing but attributes", packed(t, map[string]string{"xl/worksheets/sheet1.xml": "<worksheet" + manyAttributes() + "/>"}), Caps{}, "too_large", "unpacks"},
		{"cut short", packed(t, sheet(`<row r="1"><c r="A1"><v>1`)), Caps{}, "invalid", "damaged"},
		{"entities", packed(t, map[string]string{"xl/worksheets/sheet1.xml": `<!DOCTYPE x [<!ENTITY a "aaaa"><!ENTITY b "&a;&a;">]><worksheet><sheetData><row><c><v>&b;</v></c></row></sheetData></worksheet>`}), Caps{}, "invalid", "damaged"},
	} {
		t.Run(c.name, func(t *testing.T) {
			_, err := Open("x", bytes.NewReader(c.raw), c.max)
			var refused *Error
			if !errors.As(err, &refused) || refused.Code != c.code || !strings.Contains(refused.Text, c.text) {
				t.Fatalf("got %v, want %s with %q", err, c.code, c.text)
			}
		})
	}
}

func manyAttributes() string {
	var s strings.Builder
	for i := range 150_000 {
		fmt.Fprintf(&s, ` a%d=""`, i*7919)
	}
	return s.String()
}

// A directory that states small sizes must not make more be unpacked than is allowed.
func TestOpen_CountsWhatIsReallyUnpacked(t *testing.T) {
	raw := packed(t, map[string]string{"xl/sharedStrings.xml": "<sst>" + strings.Repeat("<si><t>some text</t></si>", 30_000) + "</sst>",
		"xl/_rels/workbook.xml.rels": `<Relationships><Relationship Id="rId1" Type="x/worksheet" Target="worksheets/sheet1.xml"/><Relationship Id="rId2" Type="x/sharedStrings" Target="sharedStrings.xml"/></Relationships>`})
	p, err := openParts(raw, &space{caps: Caps{}.withDefaults()})
	must(t, err)
	p.room.caps.Unpacked = 100_000
	err = (&workbook{parts: p}).readShared("xl/sharedStrings.xml")
	var refused *Error
	if !errors.As(err, &refused) || refused.Code != "too_large" {
		t.Errorf("got %v", err)
	}
}

func TestFindHeader_SkipsTitles(t *testing.T) {
	known := func(label string) (string, bool) {
		switch l := Label(label); l {
		case "room", "kind", "breaker_a":
			return l, true
		}
		return "", false
	}
	b := open(t, []byte("Register of outlets,,\nKind,,\nmade 2026,,\n,,\nRoom,Breaker (A),Kind\nHall,20,x\n"), Caps{})
	if row, ok := b.Sheets[0].FindHeader(known); !ok || row != 4 {
		t.Errorf("header in row %d, %v; want 4", row, ok)
	}
	if _, ok := open(t, []byte("a,b\n1,2"), Caps{}).Sheets[0].FindHeader(known); ok {
		t.Error("a table without known headings has a header")
	}
}

func FuzzOpen(f *testing.F) {
	f.Add([]byte("a,b\n1,2\n"))
	f.Add([]byte("sep=;\n\"a;b\n\"\"c;2\n"))
	f.Add([]byte("\xFF\xFEa\x00,\x00b\x00"))
	f.Add(packed(f, nil))
	f.Add(packed(f, map[string]string{"xl/worksheets/sheet1.xml": `<worksheet><sheetData><row r="2"><c r="B2" t="s" s="1"><v>0</v></c></row></sheetData><mergeCells><mergeCell ref="A1:A9"/></mergeCells></worksheet>`}))
	max := Caps{Bytes: 1 << 20, Unpacked: 1 << 20, Rows: 2000, Columns: 50, Cells: 20_000, Letters: 100}
	f.Fuzz(func(t *testing.T, raw []byte) {
		b, err := Open("x", bytes.NewReader(raw), max)
		if err != nil {
			var refused *Error
			if !errors.As(err, &refused) || refused.Text == "" {
				t.Fatalf("refused without a sentence: %v", err)
			}
			return
		}
		rows, cells := 0, 0
		for _, s := range b.Sheets {
			rows += len(s.Rows)
			for _, r := range s.Rows {
				cells += len(r)
				if len(r) > max.Columns {
					t.Fatalf("a row of %d cells", len(r))
				}
			}
			s.FindHeader(func(l string) (string, bool) { return Label(l), l != "" })
		}
		if rows > max.Rows || cells > max.Cells {
			t.Fatalf("%d rows, %d cells", rows, cells)
		}
	})
}
