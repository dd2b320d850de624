package export

import (
	"bytes"
	"encoding/csv"
	"errors"
	"fmt"
	"io"
	"slices"
	"strconv"
	"strings"
	"time"
	"unicode/utf8"

	"tripwell/forms"
	"tripwell/store"
	"tripwell/store/record"
)

// Bounds of a register file: bytes, rows, and letters of one cell.
const (
	registerBytes = 32 << 20
	registerRows  = 200_000
	registerCell  = 2000
)

// RegisterRow is one device of a register file. Empty cells are left out of the maps: they state nothing.
type RegisterRow struct {
	Line                              int // of the file, the heading being line 1
	Site                              string
	SiteName, Zone, Standard, Address string
	Tag                               string // in its stored form
	Panel, CircuitNo                  string
	Place, Circuit, Device            map[string]any // by field of the record
}

// RowProblem says what is wrong with one cell and what to do. Skipped tells that the row was left out for it.
type RowProblem struct {
	Line    int    `json:"line"`
	Column  string `json:"column,omitempty"`
	Value   string `json:"value,omitempty"`
	Text    string `json:"text"`
	Skipped bool   `json:"skipped"`
}

// ReadRegisterCSV reads a register: UTF-8 with or without a byte order mark, columns parted by comma, semicolon or tab,
// headings in the first line. Rows with a problem are left out and named; the others come back in order. The error is
// for files that are no register at all.
func ReadRegisterCSV(r io.Reader) ([]RegisterRow, []RowProblem, error) { return readRegister(r, "") }

// readRegister reads a register whose rows that name no site are of the given one; "" = every row must name its own.
func readRegister(r io.Reader, site string) ([]RegisterRow, []RowProblem, error) {
	raw, err := registerText(r)
	if err != nil {
		return nil, nil, err
	}
	c := csv.NewReader(bytes.NewReader(raw))
	c.Comma, c.FieldsPerRecord, c.ReuseRecord = separator(raw), -1, true
	head, err := c.Read()
	if err != nil {
		return nil, nil, &store.Error{Code: "invalid", Field: "file", Text: "The first line of the file cannot be read as headings. Save the sheet as CSV (UTF-8) with the headings in its first line."}
	}
	columns, problems, err := readHeadings(head, site != "")
	if err != nil {
		return nil, problems, err
	}
	var rows []RegisterRow
	zones := zoneNames{}
	for {
		cells, err := c.Read()
		if errors.Is(err, io.EOF) {
			return rows, problems, nil
		}
		var bad *csv.ParseError
		switch {
		case errors.As(err, &bad):
			problems = append(problems, RowProblem{Line: bad.StartLine, Text: "This row cannot be read: a quotation mark is not closed or stands inside a cell. Write two of them for one, or remove it.", Skipped: true})
			continue
		case err != nil:
			return rows, problems, fmt.Errorf("read register: %w", err)
		case len(rows)+len(problems) >= registerRows:
			return rows, problems, &store.Error{Code: "too_large", Field: "file", Text: fmt.Sprintf("The file has more than %d rows. Import it in parts, one site a file.", registerRows)}
		}
		line, _ := c.FieldPos(0)
		if blankRow(cells) {
			continue
		}
		row, bads := readRow(line, site, columns, cells, zones)
		problems = append(problems, bads...)
		if len(bads) == 0 {
			rows = append(rows, row)
		}
	}
}

func registerText(r io.Reader) ([]byte, error) {
	raw, err := io.ReadAll(io.LimitReader(r, registerBytes+1))
	switch {
	case err != nil:
		return nil, fmt.Errorf("read register: %w", err)
	case len(raw) > registerBytes:
		return nil, &store.Error{Code: "too_large", Field: "file", Text: fmt.Sprintf("The file is larger than %d MiB. Import it in parts, one site a file.", registerBytes>>20)}
	}
	raw = bytes.TrimPrefix(raw, []byte("\xEF\xBB\xBF"))
	switch {
	case len(bytes.TrimSpace(raw)) == 0:
		return nil, &store.Error{Code: "invalid", Field: "file", Text: "The file is empty. The first line must hold the headings, at least site and kind."}
	case !utf8.Valid(raw) || bytes.IndexByte(raw, 0) >= 0:
		return nil, &store.Error{Code: "invalid", Field: "file", Text: "The file is not UTF-8 text. In the spreadsheet choose \"Save as\" and the type CSV (UTF-8)."}
	}
	return raw, nil
}

// separator is the mark that the first line has most of.
func separator(raw []byte) rune {
	line, _, _ := bytes.Cut(raw, []byte("\n"))
	best, most := ',', 0
	for _, c := range ",;\t" {
		if n := bytes.Count(line, []byte(string(c))); n > most {
			best, most = c, n
		}
	}
	return best
}

func blankRow(cells []string) bool {
	return !slices.ContainsFunc(cells, func(s string) bool { return strings.TrimSpace(s) != "" })
}

// readHeadings finds the columns; one that is not known is named and not read.
func readHeadings(head []string, siteGiven bool) ([]*registerColumn, []RowProblem, error) {
	columns := make([]*registerColumn, len(head))
	seen := map[string]bool{}
	var problems []RowProblem
	for i, h := range head {
		c, ok := columnNamed(h)
		switch {
		case headingText(h) == "":
		case !ok:
			problems = append(problems, RowProblem{Line: 1, Column: cut(h), Text: "This column is not known and was not read."})
		case seen[c.name]:
			return nil, problems, &store.Error{Code: "invalid", Field: "file", Text: fmt.Sprintf("Two columns both say %s. Remove or rename one of them.", c.name)}
		default:
			seen[c.name], columns[i] = true, &c
		}
	}
	for _, must := range []string{"site", "kind"} {
		if !seen[must] && !(must == "site" && siteGiven) {
			return nil, problems, &store.Error{Code: "invalid", Field: "file", Text: fmt.Sprintf("The file has no column %q. Its first line must hold the headings, at least site and kind.", must)}
		}
	}
	return columns, problems, nil
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

func readRow(line int, site string, columns []*registerColumn, cells []string, zones zoneNames) (RegisterRow, []RowProblem) {
	row := RegisterRow{Line: line, Site: site, Place: map[string]any{}, Circuit: map[string]any{}, Device: map[string]any{}}
	var problems []RowProblem
	wrong := func(column, value, text string) {
		problems = append(problems, RowProblem{Line: line, Column: column, Value: cut(value), Text: text, Skipped: true})
	}
	for i, cell := range cells {
		cell = printable(cell)
		if i >= len(columns) {
			if cell != "" {
				wrong("", cell, "The row has more cells than there are headings. Put quotation marks around cells that hold the separator.")
				break
			}
			continue
		}
		c := columns[i]
		if c == nil || cell == "" {
			continue
		}
		if utf8.RuneCountInString(cell) > registerCell {
			wrong(c.name, cell, fmt.Sprintf("The cell holds more than %d letters. Shorten it.", registerCell))
			continue
		}
		if text := row.take(c, cell, zones); text != "" {
			wrong(c.name, cell, text)
		}
	}
	if len(problems) == 0 {
		row.check(wrong)
	}
	return row, problems
}

// take puts one cell where it belongs; the text says what is wrong with it.
func (row *RegisterRow) take(c *registerColumn, cell string, zones zoneNames) string {
	if into := map[string]map[string]any{"place": row.Place, "circuit": row.Circuit, "device": row.Device}[c.of]; into != nil {
		v, text := c.read(cell)
		if text == "" {
			into[c.fieldName()] = v
		}
		return text
	}
	switch c.name {
	case "site":
		row.Site = strings.ToUpper(cell)
		if !isSiteCode(row.Site) {
			return "A site code has 2 to 12 letters, digits or hyphens, such as ELM-4. Write the site's code here and its name under site_name."
		}
	case "site_name":
		row.SiteName = cell
	case "zone":
		if !zones.good(cell) {
			return "This is no time zone name. Write it as America/Chicago."
		}
		row.Zone = cell
	case "standard":
		row.Standard = strings.ToUpper(cell)
		if row.Standard != "NEC" && row.Standard != "IEC" {
			return "The standard is NEC or IEC."
		}
	case "address":
		row.Address = cell
	case "panel":
		row.Panel = cell
	case "circuit":
		row.CircuitNo = cell
	case "tag":
		tag, ok := record.ParseTag(cell)
		if !ok {
			return "This is no tag of ours: seven letters and digits of which the last checks the others. Correct it, or leave it empty and let the import give new tags."
		}
		row.Tag = tag
	}
	return ""
}

// read turns a cell into the value of a field.
func (c *registerColumn) read(cell string) (v any, wrong string) {
	switch c.reads {
	case figure:
		f, err := strconv.ParseFloat(strings.Replace(strings.TrimSpace(trimUnit(cell, c.unit)), ",", ".", 1), 64)
		if err != nil || f != f || f < 0 || f > 1e9 {
			return nil, "This is no number. Write the figure alone, such as 20."
		}
		return f, ""
	case dayText:
		d, err := forms.ParseDay(cell)
		if err != nil || d.String() != cell {
			return nil, "This is no date. Write it as 2026-12-31."
		}
		return cell, ""
	case yesNo:
		switch strings.ToLower(cell) {
		case "yes", "y", "true", "1":
			return true, ""
		case "no", "n", "false", "0":
			return false, ""
		}
		return nil, "Write yes or no."
	}
	return c.readText(cell)
}

// readText holds the fields whose words are fixed.
func (c *registerColumn) readText(cell string) (v any, wrong string) {
	switch c.name {
	case "kind":
		if kind, ok := kindNamed(cell); ok {
			return kind, ""
		}
		return nil, "This kind of device is not known. Write one of: " + strings.Join(forms.Kinds(), ", ") + "."
	case "equipment_ground":
		switch word := headingText(cell); word {
		case "yes", "y", "true":
			return "yes", ""
		case "none_permitted", "no", "none":
			return "none-permitted", ""
		}
		return nil, "Write yes, or none-permitted where the wiring method allows an outlet without an equipment ground."
	case "supply":
		if word := strings.ToLower(cell); word == "grounded" || word == "isolated" {
			return word, ""
		}
		return nil, "Write grounded or isolated."
	}
	return cell, ""
}

// kindNamed finds a device kind by its id in any spelling: "GFCI receptacle" is gfci-receptacle.
func kindNamed(s string) (string, bool) {
	s = strings.ReplaceAll(headingText(s), "_", "-")
	return s, slices.Contains(forms.Kinds(), s)
}

func trimUnit(s, unit string) string {
	if unit != "" && len(s) > len(unit) && strings.EqualFold(s[len(s)-len(unit):], unit) {
		return s[:len(s)-len(unit)]
	}
	return s
}

// check holds what several cells of a row say together.
func (row *RegisterRow) check(wrong func(column, value, text string)) {
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
	case isPortable(kind):
		if row.Device["serial"] == nil && row.Tag == "" && row.Place["name"] == nil {
			wrong("serial", "", "A portable item needs something to know it by: fill in its serial, its tag or its place.")
		}
	case isAtPanel(kind) && row.Panel == "" && !row.placed():
		wrong("panel", "", "A breaker or RCD needs its panel, or the place where it is.")
	case !isAtPanel(kind) && !row.placed():
		wrong("place", "", "A device needs the place where it is: fill in place, or at least the room.")
	}
}

func (row *RegisterRow) placed() bool { return row.Place["name"] != nil || row.Place["room"] != nil }

// isPortable: the item carries the tag, not the place.
func isPortable(kind string) bool {
	return kind == forms.CordSet || kind == forms.PortableGFCI || kind == forms.PlugInEquipment
}

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
