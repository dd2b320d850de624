package export

import (
	"bytes"
	"context"
	"encoding/csv"
	"encoding/json"
	"errors"
	"os"
	"os/exec"
	"path/filepath"
	"slices"
	"strconv"
	"strings"
	"testing"
	"time"

	"github.com/xuri/excelize/v2"

	"tripwell/static"
	"tripwell/store"
)

// hostileTexts are what other programs might run, cut or take for something else.
var hostileTexts = []string{
	`=1+1`, `=HYPERLINK("http://evil.example","x")`, `+1`, `-1+1`, `@SUM(A1)`, "\tcmd", "'=1+1", `  =1+1`, `a,b;"c"`, "two\nlines", `_x0041_`, `<b>&amp;</b>`, "字😀", "0012", "1e5", "2026-01-02", "TRUE", "null",
}

// hostileSource is a workbook whose devices carry one hostile text each in their make.
func hostileSource(t testing.TB) WorkbookSource {
	src := handSource(t, false)
	var base DeviceLine
	for d := range src.Devices {
		base = d
	}
	var lines []DeviceLine
	for _, text := range hostileTexts {
		line := base
		line.Device.Make = text
		lines = append(lines, line)
	}
	src.Devices = seq(lines...)
	return src
}

func tableText(t testing.TB, src WorkbookSource, sheet, format string) []byte {
	t.Helper()
	var out bytes.Buffer
	if err := Table(&out, src, sheet, format); err != nil {
		t.Fatal(err)
	}
	return out.Bytes()
}

// TestTable_SameCellsAsTheWorkbook holds every cell of every table against the workbook's.
func TestTable_SameCellsAsTheWorkbook(t *testing.T) {
	f := opened(t, hostileSource(t))
	for _, sheet := range TableNames() {
		rows, err := csv.NewReader(bytes.NewReader(bytes.TrimPrefix(tableText(t, hostileSource(t), sheet, "csv"), []byte("\uFEFF")))).ReadAll()
		if err != nil {
			t.Fatalf("%s: %v", sheet, err)
		}
		var objects []map[string]any
		for line := range bytes.Lines(tableText(t, hostileSource(t), sheet, "jsonl")) {
			var o map[string]any
			if err := json.Unmarshal(line, &o); err != nil {
				t.Fatalf("%s: %v in %s", sheet, err, line)
			}
			objects = append(objects, o)
		}
		name := sheetName(t, sheet)
		want, err := f.GetRows(name)
		if err != nil {
			t.Fatal(err)
		}
		if len(rows) != len(want) || len(objects) != len(want)-1 {
			t.Fatalf("%s: %d rows of CSV and %d of JSON, want %d with a heading", sheet, len(rows), len(objects), len(want))
		}
		for i, row := range rows {
			for j, cell := range row {
				shown := ""
				if j < len(want[i]) {
					shown = strings.TrimLeft(want[i][j], "●▲◆○◌ ") // the verdict's shape is part of the number format
				}
				if got := unguarded(cell); i > 0 && !sameCell(got, shown) || i == 0 && got != shown {
					t.Errorf("%s, row %d, %s: CSV %q, workbook %q", sheet, i, rows[0][j], got, shown)
				}
			}
			if i > 0 && len(objects[i-1]) != len(rows[0]) {
				t.Errorf("%s, row %d: %d members, want %d", sheet, i, len(objects[i-1]), len(rows[0]))
			}
		}
	}
}

// unguarded takes away the apostrophe that leads what would be a formula.
func unguarded(cell string) string {
	if bare, led := strings.CutPrefix(cell, "'"); led && guarded(bare) != bare {
		return bare
	}
	return cell
}

func sameCell(a, b string) bool {
	x, errX := strconv.ParseFloat(a, 64)
	y, errY := strconv.ParseFloat(b, 64)
	return a == b || errX == nil && errY == nil && x == y || strings.TrimSpace(a) == strings.TrimSpace(b)
}

func TestTable_NoCellIsAFormula(t *testing.T) {
	rows, err := csv.NewReader(bytes.NewReader(tableText(t, hostileSource(t), "register", "csv"))).ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	col := 0
	for i, head := range rows[0] {
		if head == "Make" {
			col = i
		}
	}
	for i, text := range hostileTexts {
		cell := rows[i+1][col]
		// OWASP, CSV injection: a cell must not begin with = + - @ tab or carriage return.
		if strings.ContainsAny(strings.TrimLeft(cell, " ")[:1], "=+-@\t\r") {
			t.Errorf("the cell %q begins a formula", cell)
		}
		if got := unguarded(cell); got != text {
			t.Errorf("got %q back, want %q", got, text)
		}
	}
	raw := tableText(t, hostileSource(t), "register", "csv")
	if n := bytes.Count(raw, []byte("\r\n")); n != len(hostileTexts)+1 {
		t.Errorf("%d lines end in CR LF, want %d (RFC 4180, 2)", n, len(hostileTexts)+1)
	}
}

func TestTable_JSONKeepsTypesAndMoments(t *testing.T) {
	var first map[string]any
	for line := range bytes.Lines(tableText(t, handSource(t, false), "entries", "jsonl")) {
		if err := json.Unmarshal(line, &first); err != nil {
			t.Fatal(err)
		}
		break
	}
	for key, want := range map[string]any{"entry_id": "e1", "test_day": "2026-11-01", "trip_time": 4990.5, "trip_current": nil, "flags": 1.0, "at": "2026-11-01T01:30:00-05:00"} {
		if first[key] != want {
			t.Errorf("%s: got %v, want %v", key, first[key], want)
		}
	}
	if _, err := time.Parse(time.RFC3339, first["received"].(string)); err != nil {
		t.Error(err)
	}
}

func sheetName(t *testing.T, key string) string {
	t.Helper()
	words, err := static.ReadWords("en")
	if err != nil {
		t.Fatal(err)
	}
	return words.Say("sheet.name." + key)
}

func TestTable_Refusals(t *testing.T) {
	for _, ask := range [][2]string{{"cover", "csv"}, {"", "csv"}, {"entries", "ods"}} {
		var refused *store.Error
		if err := Table(&bytes.Buffer{}, handSource(t, false), ask[0], ask[1]); !errors.As(err, &refused) || refused.Field == "" {
			t.Errorf("%v: got %v, want a refusal", ask, err)
		}
	}
}

func TestWorkbook_SameSourceSameBytes(t *testing.T) {
	var first, second bytes.Buffer
	for _, out := range []*bytes.Buffer{&first, &second} {
		if err := Workbook(out, handSource(t, true)); err != nil {
			t.Fatal(err)
		}
	}
	if !bytes.Equal(first.Bytes(), second.Bytes()) {
		t.Error("two workbooks of the same source differ")
	}
}

// needTool gives the path of another program, or skips; in CI it must be there.
func needTool(t *testing.T, name, debian string, check ...string) {
	t.Helper()
	_, err := exec.LookPath(name)
	if err == nil && len(check) > 0 {
		err = exec.Command(name, check...).Run()
	}
	if err != nil {
		if os.Getenv("CI") == "true" {
			t.Fatalf("%s (Debian %s) is missing", name, debian)
		}
		t.Skipf("%s (Debian %s) is missing", name, debian)
	}
}

const openpyxlDump = `
import json, sys, openpyxl
book = openpyxl.load_workbook(sys.argv[1])
out = {}
for sheet in book:
    out[sheet.title] = [[("" if c.value is None else c.value.isoformat(" ") if hasattr(c.value, "isoformat") else c.value, c.data_type) for c in row] for row in sheet.iter_rows()]
json.dump(out, sys.stdout)
`

// TestWorkbook_ReadAlikeByOpenpyxl: openpyxl, which shares no code with the writer, finds the same texts and figures, and
// no formula.
func TestWorkbook_ReadAlikeByOpenpyxl(t *testing.T) {
	const python = "/usr/bin/python3" // Debian's, which has Debian's openpyxl
	needTool(t, python, "python3-openpyxl", "-c", "import openpyxl")
	file, f := workbookFile(t)
	raw, err := exec.Command(python, "-c", openpyxlDump, file).Output()
	if err != nil {
		t.Fatal(err)
	}
	var sheets map[string][][][2]any
	if err := json.Unmarshal(raw, &sheets); err != nil {
		t.Fatal(err)
	}
	cells := 0
	for _, name := range f.GetSheetList() {
		want, err := f.GetRows(name, excelize.Options{RawCellValue: true})
		if err != nil {
			t.Fatal(err)
		}
		for i, row := range sheets[name] {
			for j, cell := range row {
				shown := ""
				if i < len(want) && j < len(want[i]) {
					shown = want[i][j]
				}
				if cell[1] == "f" {
					t.Errorf("%s, row %d: %v is a formula", name, i+1, cell[0])
				}
				cells++
				switch v := cell[0].(type) {
				case float64:
					if n, err := strconv.ParseFloat(shown, 64); err != nil || n != v {
						t.Errorf("%s, row %d, column %d: openpyxl reads %v, excelize %q", name, i+1, j+1, v, shown)
					}
				case string:
					if cell[1] == "d" {
						v = serialOf(t, v)
					}
					v = strings.ReplaceAll(v, "_x005F_", "_") // openpyxl leaves the escape of ECMA-376, 22.9.2.19 as it is
					if v != shown && !(cell[1] == "d" && sameMoment(v, shown)) {
						t.Errorf("%s, row %d, column %d: openpyxl reads %q, excelize %q", name, i+1, j+1, v, shown)
					}
				}
			}
		}
	}
	if cells < 300 {
		t.Errorf("%d cells compared only", cells)
	}
}

func workbookFile(t *testing.T) (string, *excelize.File) {
	t.Helper()
	var out bytes.Buffer
	if err := Workbook(&out, hostileSource(t)); err != nil {
		t.Fatal(err)
	}
	file := filepath.Join(t.TempDir(), "book.xlsx")
	if err := os.WriteFile(file, out.Bytes(), 0o600); err != nil {
		t.Fatal(err)
	}
	f, err := excelize.OpenReader(&out)
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { f.Close() })
	return file, f
}

// serialOf turns a date read by openpyxl back into days since 1899-12-30 (ECMA-376, 1900 date system).
func serialOf(t *testing.T, text string) string {
	t.Helper()
	at, err := time.Parse(time.DateTime, text)
	if err != nil {
		t.Fatalf("date %q: %v", text, err)
	}
	return strconv.FormatFloat(at.Sub(time.Date(1899, time.December, 30, 0, 0, 0, 0, time.UTC)).Hours()/24, 'f', -1, 64)
}

func sameMoment(a, b string) bool {
	x, errX := strconv.ParseFloat(a, 64)
	y, errY := strconv.ParseFloat(b, 64)
	return errX == nil && errY == nil && x-y < 1e-6 && y-x < 1e-6
}

// TestWorkbook_ReadAlikeByLibreOffice: LibreOffice reads every cell of every sheet as the same text or figure, and none as
// a formula. It writes what it read into a workbook of its own, in which the cells are looked up.
func TestWorkbook_ReadAlikeByLibreOffice(t *testing.T) {
	if testing.Short() {
		t.Skip("an office suite is started")
	}
	needTool(t, "soffice", "libreoffice-calc-nogui")
	file, f := workbookFile(t)
	dir := filepath.Dir(file)
	again := filepath.Join(dir, "again")
	ctx, cancel := context.WithTimeout(t.Context(), 3*time.Minute)
	defer cancel()
	cmd := exec.CommandContext(ctx, "soffice", "-env:UserInstallation=file://"+dir+"/profile", "--headless", "--convert-to", "xlsx:Calc MS Excel 2007 XML", "--outdir", again, file)
	if out, err := cmd.CombinedOutput(); err != nil {
		t.Fatalf("soffice: %v\n%s", err, out)
	}
	office, err := excelize.OpenFile(filepath.Join(again, filepath.Base(file)))
	if err != nil {
		t.Fatal(err)
	}
	defer office.Close()
	if got, want := office.GetSheetList(), f.GetSheetList(); !slices.Equal(got, want) {
		t.Fatalf("LibreOffice finds the sheets %q, want %q", got, want)
	}
	cells := 0
	for _, name := range f.GetSheetList() {
		want, got := rawCells(t, f, name), rawCells(t, office, name)
		for at := range got {
			if _, known := want[at]; !known {
				t.Errorf("%s, %s: LibreOffice finds %q in an empty cell", name, at, got[at])
			}
		}
		for at, shown := range want {
			cells++
			if got[at] != shown && !sameMoment(got[at], shown) {
				t.Errorf("%s, %s: LibreOffice reads %q, excelize %q", name, at, got[at], shown)
			}
			if formula, err := office.GetCellFormula(name, at); err != nil || formula != "" {
				t.Errorf("%s, %s: LibreOffice reads the formula %q (%v)", name, at, formula, err)
			}
		}
	}
	if cells < 300 {
		t.Errorf("%d cells compared only", cells)
	}
}

// rawCells gives the values of a sheet's cells that are not empty, by their names.
func rawCells(t *testing.T, f *excelize.File, sheet string) map[string]string {
	t.Helper()
	rows, err := f.GetRows(sheet, excelize.Options{RawCellValue: true})
	if err != nil {
		t.Fatal(err)
	}
	cells := map[string]string{}
	for i, row := range rows {
		for j, value := range row {
			if value == "" {
				continue
			}
			name, err := excelize.CoordinatesToCellName(j+1, i+1)
			if err != nil {
				t.Fatal(err)
			}
			cells[name] = value
		}
	}
	return cells
}
