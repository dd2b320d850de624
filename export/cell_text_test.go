package export

import (
	"slices"
	"strings"
	"testing"

	"github.com/xuri/excelize/v2"

	"tripwell/store"
)

// hostile texts, by what they try.
var hostile = map[string]string{
	"formula": "=1+1", "command": "=cmd|' /C calc'!A0", "plus": "+1+1", "minus": "-2+3", "at": "@SUM(A1)", "tab first": "\t=1+1", "CR first": "\r=1+1",
	"line feed first": "\n=1", "emoji": "😀 outlet", "right to left": "\u202Eשקע\u202C", "markup": "</t><f>1+1</f>&amp;", "escape": "_x0041_=1", "spaces": "  two  ",
	"lines": "a\r\nb",
}

func TestWorkbook_HostileTextStaysText(t *testing.T) {
	names := sortedKeys(hostile)
	src := handSource(t, false)
	var lines []EntryLine
	for base := range src.Entries {
		for _, name := range names {
			e := base
			e.ID, e.Note, e.ByName = name, hostile[name], hostile[name]
			e.DeviceRow.Place = store.Place{Name: hostile[name]}
			lines = append(lines, e)
		}
		break
	}
	src.Entries, src.Organisation = seq(lines...), "=2+2"
	f := opened(t, src)
	rows, err := f.GetRows("Entries")
	if err != nil {
		t.Fatal(err)
	}
	note := slices.Index(rows[0], "Note") + 1
	for i, name := range names {
		cell, _ := excelize.CoordinatesToCellName(note, i+2)
		got, _ := f.GetCellValue("Entries", cell)
		if want := hostile[name]; got != want {
			t.Errorf("%s: got %q, want %q", name, got, want)
		}
		if formula, _ := f.GetCellFormula("Entries", cell); formula != "" {
			t.Errorf("%s: the cell runs %q", name, formula)
		}
		if kind, _ := f.GetCellType("Entries", cell); kind != excelize.CellTypeInlineString {
			t.Errorf("%s: the cell is of type %v, want text", name, kind)
		}
		id, _ := f.GetCellStyle("Entries", cell)
		// 49 is the number format "@", text (ECMA-376 part 1, 18.8.30).
		if st, err := f.GetStyle(id); err != nil || st.NumFmt != 49 {
			t.Errorf("%s: the cell's format is not text: %+v, %v", name, st, err)
		}
	}
}

func TestCellText_BoundsAndControls(t *testing.T) {
	long := strings.Repeat("a", 40_000)
	for name, c := range map[string]struct{ in, want string }{
		"plain":          {"By the sink", "By the sink"},
		"control":        {"a\x00b\x1b[31m", "a\uFFFDb\uFFFD[31m"},
		"broken UTF-8":   {"a\xffb", "a\uFFFDb"},
		"escape":         {"_x000D_", "_x005F_x000D_"},
		"almost escape":  {"_x00_", "_x00_"},
		"just fits":      {long[:cellUnits], long[:cellUnits]},
		"one too many":   {long[:cellUnits+1], long[:cellUnits-units(cutMark)] + cutMark},
		"surrogate pair": {strings.Repeat("😀", 20_000), strings.Repeat("😀", (cellUnits-units(cutMark))/2) + cutMark},
	} {
		got := cellText(c.in)
		if got != c.want {
			t.Errorf("%s: got %d units ending %q, want %d", name, units(got), got[max(0, len(got)-40):], units(c.want))
		}
		if units(got) > cellUnits {
			t.Errorf("%s: %d units in a cell of %d", name, units(got), cellUnits)
		}
	}
	src := handSource(t, false)
	for e := range src.Entries {
		e.Note = long
		src.Entries = seq(e)
		break
	}
	got := table(t, opened(t, src), "Entries", 1)[0]["Note"]
	if !strings.HasSuffix(got, cutMark) || units(got) != cellUnits {
		t.Errorf("long note opened again: %d units, mark %v", units(got), strings.HasSuffix(got, cutMark))
	}
}
