package register

import (
	"encoding/json"
	"fmt"
	"maps"
	"slices"
	"strings"

	"tripwell/export/intake"
	"tripwell/forms"
	"tripwell/store"
)

// Mapping is what a person says about a file beyond what it says itself. It is kept as JSON, and serves the next file
// of the same shape. Headings are compared as intake.Label brings them to plain form.
type Mapping struct {
	Columns  map[string]string `json:"columns,omitempty"`  // heading → name of a column, "" = not read; a column without heading is [C]
	Kinds    map[string]string `json:"kinds,omitempty"`    // word of the file → kind of device
	Kind     string            `json:"kind,omitempty"`     // of rows that name none
	Dates    intake.Order      `json:"dates,omitempty"`    // dmy or mdy; "" = ask where it matters
	Site     string            `json:"site,omitempty"`     // code of the site of rows that name none
	Zone     string            `json:"zone,omitempty"`     // of new sites whose rows name none
	Standard string            `json:"standard,omitempty"` // of new sites whose rows name none
	Sheets   []SheetMapping    `json:"sheets,omitempty"`
}

// SheetMapping is what a person says about one sheet.
type SheetMapping struct {
	Name   string `json:"name"`
	Site   string `json:"site,omitempty"`   // code of the site of its rows that name none
	Header int    `json:"header,omitempty"` // row of the headings, from 1; 0 = find it
	Skip   bool   `json:"skip,omitempty"`
}

// mappingBytes bounds the JSON of a mapping.
const mappingBytes = 256 << 10

// ParseMapping reads a mapping and checks every name in it. Empty text is the empty mapping.
func ParseMapping(raw []byte) (m Mapping, err error) {
	if len(raw) > mappingBytes {
		return m, &store.Error{Code: "too_large", Field: "map", Text: "The file of columns is too large to be one. Choose the file that was saved here."}
	}
	if len(raw) > 0 {
		if err := json.Unmarshal(raw, &m); err != nil {
			return m, &store.Error{Code: "invalid", Field: "map", Text: "The file of columns cannot be read. It is JSON, such as {\"columns\":{\"Where\":\"place\"}}."}
		}
	}
	return m, m.Check()
}

// Check refuses names that nothing here has.
func (m Mapping) Check() error {
	wrong := func(field, text string, args ...any) error {
		return &store.Error{Code: "invalid", Field: field, Text: fmt.Sprintf(text, args...)}
	}
	for _, heading := range slices.Sorted(maps.Keys(m.Columns)) {
		if name := m.Columns[heading]; name != "" && !isColumn(name) {
			return wrong("map", "There is no column %q to put %q in. Write one of: %s.", cut(name), cut(heading), strings.Join(ColumnNames(), ", "))
		}
	}
	for _, word := range slices.Sorted(maps.Keys(m.Kinds)) {
		if kind := m.Kinds[word]; kind != "" && !slices.Contains(forms.Kinds(), kind) {
			return wrong("map", "There is no kind of device %q for %q. Write one of: %s.", cut(kind), cut(word), strings.Join(forms.Kinds(), ", "))
		}
	}
	switch {
	case m.Kind != "" && !slices.Contains(forms.Kinds(), m.Kind):
		return wrong("kind", "There is no kind of device %q. Write one of: %s.", cut(m.Kind), strings.Join(forms.Kinds(), ", "))
	case m.Dates != intake.UnknownOrder && m.Dates != intake.DMY && m.Dates != intake.MDY:
		return wrong("dates", "Dates are dmy, the day first, or mdy, the month first.")
	case m.Site != "" && !isSiteCode(strings.ToUpper(m.Site)):
		return wrong("site", "A site code has 2 to 12 letters, digits or hyphens, such as ELM-4.")
	case m.Zone != "" && !(zoneNames{}).good(m.Zone):
		return wrong("zone", "This is no time zone name. Write it as America/Chicago.")
	case m.Standard != "" && m.Standard != "NEC" && m.Standard != "IEC":
		return wrong("standard", "The standard is NEC or IEC.")
	}
	for _, s := range m.Sheets {
		if s.Site != "" && !isSiteCode(strings.ToUpper(s.Site)) {
			return wrong("site", "A site code has 2 to 12 letters, digits or hyphens, such as ELM-4. Sheet %s is given %q.", cut(s.Name), cut(s.Site))
		}
	}
	return nil
}

// ColumnNames lists the names a mapping may give.
func ColumnNames() []string {
	names := make([]string, len(Columns))
	for i, c := range Columns {
		names[i] = c.Name
	}
	return names
}

func isColumn(name string) bool {
	return slices.ContainsFunc(Columns, func(c Column) bool { return c.Name == name })
}

func (m Mapping) sheet(name string) SheetMapping {
	for _, s := range m.Sheets {
		if s.Name == name {
			return s
		}
	}
	return SheetMapping{Name: name}
}

// column finds what a heading names: what the person said, else what the heading says by itself. read is false for
// headings that are known to say nothing.
func (m Mapping) column(heading string) (c Column, read, known bool) {
	label := intake.Label(heading)
	for h, name := range m.Columns {
		if intake.Label(h) == label && (label != "" || h == heading) {
			for _, c := range Columns {
				if c.Name == name {
					return c.inUnitOf(heading), true, true
				}
			}
			return Column{}, false, true
		}
	}
	if notRead[label] || label == "" {
		return Column{}, false, label != ""
	}
	if c, ok := columnNamed(heading); ok {
		return c, true, true
	}
	if base, _, ok := headingUnit(heading); ok {
		if c, ok := columnNamed(base); ok && c.unit != "" {
			return c.inUnitOf(heading), true, true
		}
	}
	return Column{}, false, false
}

// headingUnit parts "Length (ft)" into the heading and its unit.
func headingUnit(heading string) (base, unit string, ok bool) {
	i := strings.LastIndexAny(heading, "([,/")
	if i < 0 {
		return heading, "", false
	}
	unit, ok = intake.UnitNamed(strings.Trim(heading[i+1:], " )]."))
	return heading[:i], unit, ok
}

// inUnitOf takes the unit a heading states for cells that state none.
func (c Column) inUnitOf(heading string) Column {
	if _, unit, ok := headingUnit(heading); ok && c.unit != "" {
		if _, fits := (intake.Quantity{Unit: unit}).In(c.unit); fits {
			c.cells = unit
		}
	}
	return c
}
