package register

import (
	"fmt"
	"slices"
	"strings"
	"time"
	"unicode/utf8"

	"tripwell/export/intake"
	"tripwell/forms"
	"tripwell/store/record"
)

// registerCell is the most letters of one cell.
const registerCell = 2000

// Row is one device of a register. Empty cells are left out of the maps: they state nothing.
type Row struct {
	Sheet                             string
	Line                              int // as a spreadsheet numbers it
	Site                              string
	SiteName, Zone, Standard, Address string
	Tag                               string // in its stored form
	Panel, CircuitNo                  string
	Place, Circuit, Device            map[string]any // by field of the record
}

// Problem says what is wrong with one cell and what to do. Skipped tells that the row was left out for it.
type Problem struct {
	intake.Problem
	Skipped bool `json:"skipped"`
}

// zoneNames remembers which time zone names are good: a sheet repeats one on every row, and looking it up reads a file.
type zoneNames map[string]bool

func (z zoneNames) good(name string) bool {
	good, known := z[name]
	if !known {
		_, err := time.LoadLocation(name)
		good = err == nil && name != "Local"
		z[name] = good
	}
	return good
}

// rowReader reads the rows of one sheet.
type rowReader struct {
	*reader
	columns []*Column // nil: not read
	site    string    // of rows that name none
	above   []string  // texts of the row above, for ditto marks
}

// read makes a row of cells, with what is wrong in it. gone tells a device that is no longer in use.
func (r *rowReader) read(sheet string, line int, cells []intake.Cell) (row Row, problems []Problem, gone bool) {
	row = Row{Sheet: sheet, Line: line, Site: r.site, Place: map[string]any{}, Circuit: map[string]any{}, Device: map[string]any{}}
	wrong := func(column, value, text string) {
		problems = append(problems, Problem{intake.Problem{Sheet: sheet, Row: line, Column: column, Value: cut(value), Text: text}, true})
	}
	for i, cell := range cells {
		if i >= len(r.columns) {
			if cell.Text != "" && r.beyond {
				wrong(intake.ColumnLetters(i), cell.Text, "The row has more cells than there are headings. Put quotation marks around cells that hold the separator, or give the column a heading.")
				break
			}
			continue
		}
		c := r.columns[i]
		cell.Text = printable(cell.Text)
		if len(cell.Text) > 1 && cell.Text[0] == '\'' && strings.ContainsRune("=+-@", rune(cell.Text[1])) {
			cell.Text = cell.Text[1:] // put there so that no spreadsheet runs it
		}
		if isDitto(cell.Text) && i < len(r.above) {
			cell = intake.Cell{Text: r.above[i]}
		}
		if c == nil || isNothing(cell.Text) {
			continue
		}
		if c.Name == statusColumn {
			gone = gone || isGone(cell.Text)
			continue
		}
		if utf8.RuneCountInString(cell.Text) > registerCell {
			wrong(c.Name, cell.Text, fmt.Sprintf("The cell holds more than %d letters. Shorten it.", registerCell))
			continue
		}
		if text := r.take(&row, c, cell); text != "" {
			wrong(c.Name, cell.Text, text)
		}
	}
	if fieldText(row.Device, "kind") == "" && r.mapping.Kind != "" && len(problems) == 0 {
		row.Device["kind"] = r.mapping.Kind
	}
	if len(problems) == 0 {
		row.check(wrong)
	}
	return row, problems, gone
}

// isDitto tells the marks by which people repeat the cell above.
func isDitto(s string) bool {
	return s == `"` || s == "''" || s == "\u3003" || s == "\u201d" || strings.EqualFold(s, "ditto") || strings.EqualFold(s, "do.")
}

// isNothing tells the marks people write into a cell of which they know nothing.
func isNothing(s string) bool {
	switch strings.ToLower(s) {
	case "", "-", "--", "–", "—", "?", "??", "n/a", "n.a.", "na", "tbd", "unknown", "unk", "not known":
		return true
	}
	return false
}

// isGone reads a status: the words by which registers keep devices that are no longer there.
func isGone(s string) bool {
	switch intake.Label(s) {
	case "retired", "removed", "decommissioned", "out_of_service", "disused", "scrapped", "no", "n", "false", "replaced", "demolished":
		return true
	}
	return false
}

// take puts one cell where it belongs; the text says what is wrong with it.
func (r *rowReader) take(row *Row, c *Column, cell intake.Cell) string {
	if into := map[string]map[string]any{"place": row.Place, "circuit": row.Circuit, "device": row.Device}[c.of]; into != nil {
		v, text := r.value(c, cell)
		if text == "" {
			into[c.fieldName()] = v
		}
		return text
	}
	switch c.Name {
	case "site":
		row.Site = r.siteNamed(cell.Text)
		if row.Site == "" {
			return "A site code has 2 to 12 letters, digits or hyphens, such as ELM-4. Write the site's code here and its name under site_name."
		}
		if name := strings.ToUpper(cell.Text); name != row.Site && row.SiteName == "" {
			row.SiteName = cell.Text
		}
	case "site_name":
		row.SiteName = cell.Text
	case "zone":
		if !r.zones.good(cell.Text) {
			return "This is no time zone name. Write it as America/Chicago."
		}
		row.Zone = cell.Text
	case "standard":
		row.Standard = strings.ToUpper(cell.Text)
		if row.Standard != "NEC" && row.Standard != "IEC" {
			return "The standard is NEC or IEC."
		}
	case "address":
		row.Address = cell.Text
	case "panel":
		row.Panel = cell.Text
	case "circuit":
		return row.takeCircuit(cell)
	case "panel_circuit":
		panel, circuit, ok := partCircuit(cell.Text)
		if !ok || cell.Date != nil {
			return "This column holds a panel and a circuit, such as LP-1/14. Write both."
		}
		row.Panel, row.CircuitNo = panel, circuit
	case "tag":
		tag, ok := record.ParseTag(cell.Text)
		if !ok {
			return "This is no tag of ours: seven letters and digits of which the last checks the others. Correct it, or leave it empty and let the import give new tags."
		}
		row.Tag = tag
	}
	return ""
}

// partCircuit parts a panel from its circuit: LP-1 / 14/16, LP-1/14, LP-1 14, LP-1-14, LP-1 #14.
func partCircuit(s string) (panel, circuit string, ok bool) {
	at, width := strings.Index(s, " / "), 3
	for _, mark := range []string{"#", ":"} {
		if at < 0 {
			at, width = strings.Index(s, mark), 1
		}
	}
	if at < 0 {
		at = strings.LastIndex(s, " ")
	}
	if at < 0 {
		at = strings.Index(s, "/")
	}
	if at < 0 {
		at = strings.LastIndex(s, "-")
	}
	if at < 0 {
		return "", "", false
	}
	panel, circuit = strings.TrimSpace(s[:at]), strings.TrimSpace(s[at+width:])
	return panel, circuit, panel != "" && circuit != ""
}

// takeCircuit keeps the numbers of a circuit as they are written: 14, or 14/16 for two poles. Spreadsheets turn 10/12
// into a day; which circuit was meant then nobody can tell.
func (row *Row) takeCircuit(cell intake.Cell) string {
	if cell.Date != nil {
		d := cell.Date.Time()
		return fmt.Sprintf("The spreadsheet has turned this circuit into a date. If it was %d/%d or %d/%d, format the cell as text and write it again.", d.Month(), d.Day(), d.Day(), d.Month())
	}
	row.CircuitNo = strings.ReplaceAll(strings.ReplaceAll(cell.Text, " /", "/"), "/ ", "/")
	return ""
}

// value turns a cell into the value of a field.
func (r *rowReader) value(c *Column, cell intake.Cell) (v any, wrong string) {
	switch c.reads {
	case figure:
		return r.figure(c, cell)
	case dayText:
		if cell.Date != nil {
			return cell.Date.String(), ""
		}
		day, ambiguous, err := intake.ParseDate(cell.Text, r.mapping.Dates)
		if ambiguous {
			r.ambiguous++
		}
		if err != nil {
			return nil, err.Error()
		}
		return day.String(), ""
	case yesNo:
		if cell.Bool != nil {
			return *cell.Bool, ""
		}
		if yes, ok := intake.ParseYes(cell.Text); ok {
			return yes, ""
		}
		return nil, "Write yes or no."
	}
	if c.Name == "kind" {
		if kind, ok := r.mapping.kindNamed(cell.Text); ok {
			return kind, ""
		}
		r.unknown[cell.Text]++
		return nil, "This kind of device is not known. Write one of: " + strings.Join(forms.Kinds(), ", ") + "."
	}
	return c.words(cell.Text)
}

func (r *rowReader) figure(c *Column, cell intake.Cell) (v any, wrong string) {
	unit := c.unit
	if c.cells != "" {
		unit = c.cells
	}
	if cell.Date != nil {
		return nil, "The spreadsheet has turned this figure into a date. Format the cell as a number and write it again."
	}
	q := intake.Quantity{Unit: unit}
	if cell.Number != nil {
		q.Value = *cell.Number
	} else {
		text := cell.Text
		if c.Name == "poles" {
			text = strings.TrimRight(text, " -Pp")
		}
		var err error
		if q, err = r.figures.Parse(text, unit); err != nil {
			return nil, err.Error()
		}
	}
	if in, ok := q.In(c.unit); ok {
		q = in
	}
	if q.Bound != intake.Exact || q.Value < 0 || q.Value > 1e9 {
		return nil, "This is no plain figure. Write it alone, such as 20."
	}
	return q.Value, ""
}

// words holds the fields whose words are fixed.
func (c *Column) words(text string) (v any, wrong string) {
	switch c.Name {
	case "equipment_ground":
		if intake.Label(text) == "none_permitted" {
			return "none-permitted", ""
		}
		switch yes, ok := intake.ParseYes(text); {
		case ok && yes:
			return "yes", ""
		case ok:
			return "none-permitted", ""
		}
		return nil, "Write yes, or none-permitted where the wiring method allows an outlet without an equipment ground."
	case "supply":
		if word := strings.ToLower(text); word == "grounded" || word == "isolated" {
			return word, ""
		}
		return nil, "Write grounded or isolated."
	case "earthing", "supply_edition":
		t, _ := forms.TraitNamed(c.Name)
		if word := strings.ToLower(text); slices.Contains(t.Options, word) {
			return word, ""
		}
		return nil, "Write " + strings.Join(t.Options, " or ") + "."
	case "circuit_standard":
		if word := strings.ToUpper(text); word == "NEC" || word == "IEC" {
			return word, ""
		}
		return nil, "The standard is NEC or IEC."
	}
	return text, ""
}

// check holds what several cells of a row say together.
func (row *Row) check(wrong func(column, value, text string)) {
	kind, _ := row.Device["kind"].(string)
	switch {
	case row.Site == "":
		wrong("site", "", "Every row needs the code of its site.")
	case kind == "":
		wrong("kind", "", "Every row needs the kind of the device: one of "+strings.Join(forms.Kinds(), ", ")+".")
	case row.CircuitNo != "" && row.Panel == "":
		wrong("panel", "", "A circuit needs its panel. Fill in the panel.")
	case len(row.Circuit) > 0 && row.CircuitNo == "":
		wrong("circuit", "", "A breaker, conductor or supply belongs to a circuit. Fill in panel and circuit.")
	case forms.IsPortable(kind):
		if row.Device["serial"] == nil && row.Tag == "" && row.Place["name"] == nil && row.Device["where"] == nil {
			wrong("serial", "", "A portable item needs something to know it by: fill in its serial, its tag or its place.")
		}
	case isAtPanel(kind) && row.Panel == "" && !row.placed():
		wrong("panel", "", "A breaker or RCD needs its panel, or the place where it is.")
	case !isAtPanel(kind) && !row.placed():
		wrong("place", "", "A device needs the place where it is: fill in place, or at least the room.")
	}
}

func (row *Row) placed() bool { return row.Place["name"] != nil || row.Place["room"] != nil }

// isAtPanel: several of them share one place, told apart by their circuit.
func isAtPanel(kind string) bool {
	return kind == forms.GFCIBreaker || kind == forms.RCD || kind == forms.RCBO
}

func isSiteCode(s string) bool {
	if len(s) < 2 || len(s) > 12 {
		return false
	}
	for _, c := range []byte(s) {
		if (c < 'A' || c > 'Z') && (c < '0' || c > '9') && c != '-' {
			return false
		}
	}
	return true
}

// cut keeps a quoted value short.
func cut(s string) string {
	if r := []rune(printable(s)); len(r) > 60 {
		return string(r[:60]) + "…"
	}
	return printable(s)
}

// printable brings a text to one line without marks that cannot be seen: a register holds names, not layout.
func printable(s string) string {
	return strings.Join(strings.Fields(strings.Map(func(r rune) rune {
		switch {
		case r < 0x20 || r == 0x7F || r >= 0x80 && r < 0xA0:
			return ' '
		case r >= 0x200B && r <= 0x200F || r >= 0x202A && r <= 0x202E || r >= 0x2066 && r <= 0x2069 || r == 0xFEFF:
			return -1
		}
		return r
	}, strings.ToValidUTF8(s, string(utf8.RuneError)))), " ")
}
