package export

import (
	"strings"
	"unicode"
)

// fieldType says how a cell of the register is read.
type fieldType int

const (
	plainText fieldType = iota
	figure              // a number, with or without its unit
	dayText             // 2026-12-31
	yesNo
)

// registerColumn is a column of a register: what it is called, what it may be called, and where it goes.
type registerColumn struct {
	name     string
	of       string // site | place | circuit | device, or "" for what identifies the row
	field    string // field of the record; name where empty
	reads    fieldType
	unit     string // may follow the figure: "20 A"
	synonyms []string
}

// registerHead lists the columns a register may have. Names are matched in any letter case; spaces and hyphens count as _.
var registerHead = []registerColumn{
	{name: "site", synonyms: []string{"site_code"}},
	{name: "site_name", synonyms: []string{"name_of_site"}},
	{name: "zone", synonyms: []string{"time_zone", "timezone", "tz"}},
	{name: "standard", synonyms: []string{"rules"}},
	{name: "address", synonyms: []string{"site_address"}},
	{name: "building", of: "place", synonyms: []string{"bldg", "block"}},
	{name: "floor", of: "place", synonyms: []string{"level", "storey", "story"}},
	{name: "room", of: "place", synonyms: []string{"room_name", "space"}},
	{name: "place", of: "place", field: "name", synonyms: []string{"spot", "location", "position"}},
	{name: "order", of: "place", reads: figure, synonyms: []string{"walking_order", "sequence"}},
	{name: "critical_load", of: "place", synonyms: []string{"critical"}},
	{name: "kind", of: "device", synonyms: []string{"device", "device_kind", "type", "device_type"}},
	{name: "tag", synonyms: []string{"label", "tag_code"}},
	{name: "panel", synonyms: []string{"board", "panelboard", "distribution_board"}},
	{name: "circuit", synonyms: []string{"circuit_no", "circuit_number", "circuits", "ckt"}},
	{name: "breaker_a", of: "circuit", reads: figure, unit: "A", synonyms: []string{"breaker", "breaker_rating", "breaker_amps", "overcurrent_a"}},
	{name: "poles", of: "circuit", reads: figure},
	{name: "voltage_v", of: "circuit", reads: figure, unit: "V", synonyms: []string{"circuit_voltage"}},
	{name: "conductor", of: "circuit", synonyms: []string{"wire", "wire_size", "conductor_size"}},
	{name: "supply", of: "circuit"},
	{name: "make", of: "device", synonyms: []string{"manufacturer", "maker"}},
	{name: "model", of: "device", synonyms: []string{"model_no", "model_number", "part_number"}},
	{name: "serial", of: "device", synonyms: []string{"serial_no", "serial_number"}},
	{name: "rating_a", of: "device", reads: figure, unit: "A", synonyms: []string{"rating", "amps", "rated_current_a", "rated_current"}},
	{name: "nominal_v", of: "device", reads: figure, unit: "V", synonyms: []string{"nominal_voltage", "volts", "voltage"}},
	{name: "rated_residual_ma", of: "device", reads: figure, unit: "mA", synonyms: []string{"rated_residual_current", "residual_ma", "rated_residual", "sensitivity_ma"}},
	{name: "delayed", of: "device", reads: yesNo, synonyms: []string{"time_delayed"}},
	{name: "waveform", of: "device"},
	{name: "equipment_ground", of: "device", synonyms: []string{"ground", "equipment_grounding", "earth"}},
	{name: "faces", of: "device", reads: figure},
	{name: "limit_set", of: "device", synonyms: []string{"limits"}},
	{name: "installed", of: "device", reads: dayText, synonyms: []string{"installed_on", "install_date", "date_installed", "installation_date"}},
	{name: "gauge", of: "device", synonyms: []string{"cord_gauge"}},
	{name: "length_m", of: "device", reads: figure, unit: "m", synonyms: []string{"length", "cord_length_m"}},
	{name: "note", of: "device", synonyms: []string{"notes", "remark", "remarks", "comment", "comments"}},
}

// columnNamed finds a column by its heading.
func columnNamed(heading string) (registerColumn, bool) {
	heading = headingText(heading)
	for _, c := range registerHead {
		if c.name == heading {
			return c, true
		}
		for _, s := range c.synonyms {
			if s == heading {
				return c, true
			}
		}
	}
	return registerColumn{}, false
}

// headingText brings a heading to its plain form: "Breaker (A)" is breaker_a.
func headingText(s string) string {
	words := strings.FieldsFunc(strings.ToLower(s), func(r rune) bool { return !unicode.IsLetter(r) && !unicode.IsDigit(r) })
	return strings.Join(words, "_")
}

func (c registerColumn) fieldName() string {
	if c.field != "" {
		return c.field
	}
	return c.name
}
