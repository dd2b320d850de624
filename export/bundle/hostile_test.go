package bundle

import (
	"archive/zip"
	"bytes"
	"context"
	"encoding/binary"
	"fmt"
	"io"
	"strings"
	"testing"
)

// fill writes one file of a zip, however large.
type fill func(w io.Writer)

// repeated writes a piece so many times between a beginning and an end.
func repeated(begin, piece string, times int, end string) fill {
	return func(w io.Writer) {
		_, _ = io.WriteString(w, begin)
		block := strings.Repeat(piece, 1000)
		for range times / 1000 {
			_, _ = io.WriteString(w, block)
		}
		_, _ = io.WriteString(w, end)
	}
}

// bombed packs files, some of which are filled.
func bombed(t *testing.T, files map[string][]byte, with map[string]fill) []byte {
	t.Helper()
	var out bytes.Buffer
	z := zip.NewWriter(&out)
	for name, b := range files {
		w, err := z.Create(name)
		must(t, err)
		if f := with[name]; f != nil {
			f(w)
		} else {
			_, err = w.Write(b)
			must(t, err)
		}
	}
	must(t, z.Close())
	return out.Bytes()
}

// sheetOf is a workbook with one sheet, written by hand.
func sheetOf(t *testing.T, sheets, shared string, rows fill) []byte {
	t.Helper()
	return bombed(t, map[string][]byte{
		"xl/workbook.xml":            []byte(`<workbook xmlns:r="r"><sheets>` + sheets + `</sheets></workbook>`),
		"xl/_rels/workbook.xml.rels": []byte(`<Relationships><Relationship Id="rId1" Target="worksheets/sheet1.xml"/></Relationships>`),
		"xl/sharedStrings.xml":       nil, "xl/worksheets/sheet1.xml": nil,
	}, map[string]fill{"xl/worksheets/sheet1.xml": rows, "xl/sharedStrings.xml": repeated("<sst>", shared, 1000, "</sst>")})
}

// TestVerify_AHostileZipCostsLittle gives the check what somebody would write who wants the auditor's laptop to stop: each is answered
// with a sentence, and takes no more memory than an honest bundle of some size does.
func TestVerify_AHostileZipCostsLittle(t *testing.T) {
	if testing.Short() {
		t.Skip("writes large files")
	}
	h := newHouse(t)
	h.work(12)
	good := unpack(t, h.bundle())
	const one = `<sheet name="Entries" r:id="rId1"/>`
	rows := func(row string, times int) fill {
		return repeated("<worksheet><sheetData>", row, times, "</sheetData></worksheet>")
	}
	numbered := func(w io.Writer) {
		_, _ = io.WriteString(w, "<worksheet><sheetData>")
		for i := range 400_000 {
			fmt.Fprintf(w, "<row><c><v>%d</v></c></row>", i)
		}
		_, _ = io.WriteString(w, "</sheetData></worksheet>")
	}
	workbook := func(b []byte) map[string]fill {
		return map[string]fill{workbookFile: func(w io.Writer) { _, _ = w.Write(b) }}
	}
	for name, c := range map[string]struct {
		with map[string]fill
		want string
	}{
		"a list of ten million lines":        {map[string]fill{stampsName(h.site.ID): repeated("", "\n", 10_000_000, "")}, "more lines than there can be records"},
		"JSON of eight million values":       {map[string]fill{refusalsFile: repeated("[", "{},", 8_000_000, "{}]")}, "holds more than 3000000 values"},
		"JSON larger than is read":           {map[string]fill{peopleFile: repeated(`["`, "a", 140_000_000, `"]`)}, "is larger than"},
		"one endless line":                   {map[string]fill{recordsName(h.site.ID): repeated("", "x", 10_000_000, "")}, "has a line of more than"},
		"a workbook that unpacks to nothing": {map[string]fill{workbookFile: repeated("PK", "\x00", 50_000_000, "")}, "too large to be true"},
		"a sheet with one row of many texts": {workbook(sheetOf(t, one, "<si/>", rows(`<c t="inlineStr"><is><t>`+strings.Repeat("x", 2000)+`</t></is></c>`, 30_000))), "more than a row can"},
		"a sheet of one tag":                 {workbook(sheetOf(t, one, "<si/>", rows(`a="b" `, 1_000_000))), "bytes"},
		"more rows than records give":        {workbook(sheetOf(t, one, "<si/>", numbered)), "more rows than its records can give"},
		"shared texts without end":           {workbook(sheetOf(t, one, strings.Repeat("<si/>", 9_000), rows("", 0))), "shared texts are larger"},
		"ten thousand sheets":                {workbook(sheetOf(t, strings.Repeat(one, 10_000), "<si/>", rows("", 0))), "more than 1000 sheets"},
		"a thousand sheets of one part":      {workbook(sheetOf(t, strings.Repeat(one, 900), "<si/>", rows("", 0))), "are the same part"},
		"entities that multiply":             {workbook(sheetOf(t, one, "<si/>", func(w io.Writer) { _, _ = io.WriteString(w, `<!DOCTYPE x [<!ENTITY a "ha">]><x>&a;</x>`) })), "markup is damaged"},
	} {
		t.Run(name, func(t *testing.T) {
			b := bombed(t, good, c.with)
			peak := watchHeap()
			r, err := Verify(context.Background(), bytes.NewReader(b), int64(len(b)), Check{})
			if most := peak(); most > 500 {
				t.Errorf("it took %.0f MB", most)
			}
			if said := fmt.Sprint(err) + r.text(); !strings.Contains(said, c.want) {
				t.Errorf("nothing says %q: %.600s", c.want, said)
			}
		})
	}
	refused := func(name string, b []byte, want string) {
		t.Helper()
		if _, err := Verify(context.Background(), bytes.NewReader(b), int64(len(b)), Check{}); err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("%s: got %v, want %q", name, err, want)
		}
	}
	for _, name := range []string{"../escaped.txt", "/etc/escaped", `..\escaped.txt`, "C:escaped", "records/../../escaped"} {
		files := map[string][]byte{name: []byte("x")}
		for n, b := range good {
			files[n] = b
		}
		refused(name, pack(t, files), "outside its folder")
	}
	var twice bytes.Buffer
	z := zip.NewWriter(&twice)
	for _, name := range []string{docFile, docFile} {
		w, err := z.Create(name)
		must(t, err)
		_, err = w.Write(good[docFile])
		must(t, err)
	}
	must(t, z.Close())
	refused("a name twice", twice.Bytes(), "twice")
	// A list of files that lies: sixteen bytes that say they are twelve gigabytes.
	liar := bombed(t, good, nil)
	at := bytes.LastIndex(liar, []byte("PK\x01\x02"))
	binary.LittleEndian.PutUint32(liar[at+24:], 0xF0000000)
	refused("a size that lies", liar, "too large to be true")
}
