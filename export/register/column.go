package register

import "tripwell/export/intake"

// statusColumn tells which rows are of devices no longer in use; nothing else is read from it.
const statusColumn = "status"

// fieldType says how a cell of the register is read.
type fieldType int

const (
	plainText fieldType = iota
	figure              // a number, with or without its unit
	dayText             // 2026-12-31
	yesNo
)

// Column is a column of a register: what it is called, what it may be called, and where it goes.
type Column struct {
	Name     string
	of       string // site | place | circuit | device, or "" for what identifies the row
	field    string // field of the record; Name where empty
	reads    fieldType
	unit     string // the figure is kept in: "20 A", "25 ft" where it is kept in m
	cells    string // unit of cells that state none, where the heading states another than unit
	synonyms []string
}

// Columns lists the columns a register may have. Names are matched in any letter case; spaces and hyphens count as _.
var Columns = []Column{
	{Name: "site", synonyms: []string{"site_code", "site_id", "property_code", "location_code", "building_code", "site_no"}},
	{Name: "site_name", synonyms: []string{"name_of_site", "property", "property_name", "facility", "campus"}},
	{Name: "zone", synonyms: []string{"time_zone", "timezone", "tz"}},
	{Name: "standard", synonyms: []string{"rules"}},
	{Name: "address", synonyms: []string{"site_address"}},
	{Name: "building", of: "place", synonyms: []string{"bldg", "block", "building_name", "bldg_name", "wing", "tower"}},
	{Name: "floor", of: "place", synonyms: []string{"level", "storey", "story", "fl", "flr", "floor_level", "etage", "planta"}},
	{Name: "room", of: "place", synonyms: []string{"room_name", "space", "room_no", "room_number", "rm", "area", "room_area", "raum", "sala"}},
	{Name: "place", of: "place", field: "name", synonyms: []string{"spot", "location", "position", "where", "where_exactly", "device_location", "outlet_location", "exact_location", "location_description", "description_of_location", "ort", "ubicación"}},
	{Name: "order", of: "place", reads: figure, synonyms: []string{"walking_order", "sequence", "walk_order", "walking", "route", "seq"}},
	{Name: "critical_load", of: "place", synonyms: []string{"critical", "critical_loads", "what_it_feeds", "feeds"}},
	{Name: "whom_to_tell", of: "place", synonyms: []string{"tell", "inform", "tell_before_testing", "whom_to_tell_before_test", "contact_before_test"}},
	{Name: "test_from", of: "place", synonyms: []string{"test_not_before"}},
	{Name: "test_until", of: "place", synonyms: []string{"test_not_after"}},
	{Name: "kind", of: "device", synonyms: []string{"device", "device_kind", "type", "device_type", "outlet_type", "receptacle_type", "kind_of_device", "device_type_name", "type_of_device", "what"}},
	{Name: "tag", synonyms: []string{"label", "tag_code", "tag_no", "label_code", "sticker"}},
	{Name: statusColumn, synonyms: []string{"state", "in_service", "status_of_device"}},
	{Name: "panel", synonyms: []string{"board", "panelboard", "distribution_board", "panel_name", "panel_no", "pnl", "db", "distribution", "panel_id"}},
	{Name: "circuit", synonyms: []string{"circuit_no", "circuit_number", "circuits", "ckt", "breaker_no", "breaker_number", "cct", "cct_no", "circ", "circuit_id", "circuit_s", "ckt_no", "ckt_#", "circuit_#", "stromkreis"}},
	{Name: "panel_circuit", synonyms: []string{"panel_ckt", "panel_circuit_no", "fed_from", "panel_cct", "panel_and_circuit"}},
	{Name: "breaker_a", of: "circuit", reads: figure, unit: "A", synonyms: []string{"breaker", "breaker_rating", "breaker_amps", "overcurrent_a", "breaker_size", "breaker_amp", "brkr", "bkr_size", "cb_size", "ocpd", "ocpd_a", "breaker_size_a", "mcb_a"}},
	{Name: "poles", of: "circuit", reads: figure, synonyms: []string{"pole", "no_of_poles"}},
	{Name: "voltage_v", of: "circuit", reads: figure, unit: "V", synonyms: []string{"circuit_voltage", "circuit_v"}},
	{Name: "conductor", of: "circuit", synonyms: []string{"wire", "wire_size", "conductor_size", "awg", "conductor_awg", "cable", "cable_size", "conductor_mm"}},
	{Name: "supply", of: "circuit", synonyms: []string{"supply_system"}},
	{Name: "circuit_standard", of: "circuit", field: "standard"},
	{Name: "make", of: "device", synonyms: []string{"manufacturer", "maker", "brand", "mfr", "mfg", "manufactured_by"}},
	{Name: "model", of: "device", synonyms: []string{"model_no", "model_number", "part_number", "model_#", "type_no", "cat_no", "catalog_no", "catalogue_no", "part_no"}},
	{Name: "serial", of: "device", synonyms: []string{"serial_no", "serial_number", "serial_#", "sn", "s_n", "ser_no"}},
	{Name: "rating_a", of: "device", reads: figure, unit: "A", synonyms: []string{"rating", "amps", "rated_current_a", "rated_current", "amp_rating", "rated_a", "amperage", "amp", "outlet_rating", "receptacle_rating", "device_rating", "rating_amps"}},
	{Name: "nominal_v", of: "device", reads: figure, unit: "V", synonyms: []string{"nominal_voltage", "volts", "voltage", "rated_voltage", "volt", "v"}},
	{Name: "rated_residual_ma", of: "device", reads: figure, unit: "mA", synonyms: []string{"rated_residual_current", "residual_ma", "rated_residual", "sensitivity_ma", "rated_residual_current_ma", "idn", "iδn", "δin", "trip_rating", "trip_rating_ma", "ma", "sensitivity"}},
	{Name: "delayed", of: "device", reads: yesNo, synonyms: []string{"time_delayed", "selective", "s_type", "time_delay"}},
	{Name: "waveform", of: "device", synonyms: []string{"rcd_type"}},
	{Name: "equipment_ground", of: "device", synonyms: []string{"ground", "equipment_grounding", "earth", "grounded", "grd", "gnd", "ground_present", "egc", "equipment_ground_present"}},
	{Name: "faces", of: "device", reads: figure, synonyms: []string{"no_of_faces", "outlets"}},
	{Name: "limit_set", of: "device", synonyms: []string{"limits", "limit_set_id"}},
	{Name: "installed", of: "device", reads: dayText, synonyms: []string{"installed_on", "install_date", "date_installed", "installation_date", "install", "inst_date", "installed_date", "in_service_since", "year_installed", "commissioned"}},
	{Name: "gauge", of: "device", synonyms: []string{"cord_gauge", "cord_size"}},
	{Name: "length_m", of: "device", reads: figure, unit: "m", synonyms: []string{"length", "cord_length_m", "cord_length"}},
	{Name: "no_neutral", of: "device", reads: yesNo, synonyms: []string{"without_neutral"}},
	{Name: "earthing", of: "device", synonyms: []string{"earthing_system", "system_earthing"}},
	{Name: "distribution_circuit", field: "distribution", of: "device", reads: yesNo},
	{Name: "special_location", of: "device", reads: yesNo},
	{Name: "double_insulated", of: "device", reads: yesNo, synonyms: []string{"double_insulation"}},
	{Name: "new_construction", of: "device", reads: yesNo},
	{Name: "quiet_ground", of: "device", reads: yesNo},
	{Name: "supply_edition", of: "device", synonyms: []string{"supply_voltage_edition"}},
	{Name: "locking", of: "device", reads: yesNo, synonyms: []string{"locking_outlet", "locking_receptacle", "twist_lock"}},
	{Name: "kept_at", of: "device", field: "where", synonyms: []string{"kept_in", "stored_in", "depot"}},
	{Name: "now_at", of: "device", field: "at_site", synonyms: []string{"now_at_site", "lent_to"}},
	{Name: "hangs_on", of: "device", field: "fed_by", synonyms: []string{"protected_by", "load_side_of", "fed_by_device", "downstream_of"}},
	{Name: "usual_place", of: "place", field: "usual", synonyms: []string{"kind_of_place", "place_type", "room_type"}},
	{Name: "note", of: "device", synonyms: []string{"notes", "remark", "remarks", "comment", "comments", "condition_notes", "other", "bemerkung", "observaciones"}},
}

// columnNamed finds a column by its heading.
func columnNamed(heading string) (Column, bool) {
	heading = intake.Label(heading)
	for _, c := range Columns {
		if c.Name == heading {
			return c, true
		}
		for _, s := range c.synonyms {
			if s == heading {
				return c, true
			}
		}
	}
	return Column{}, false
}

// notRead are headings that say nothing about a register: numbering, what the workbook computes, and what a file of
// rows to correct adds.
var notRead = func() map[string]bool {
	m := map[string]bool{}
	for _, h := range []string{"no", "nr", "#", "№", "item", "item_no", "row", "sheet", "what_to_correct", "device_id", "imported", "next_date", "next_test", "last_button_test", "button_result", "last_instrument_test",
		"instrument_result", "last_receptacle_test", "receptacle_result"} {
		m[h] = true
	}
	return m
}()

func (c Column) fieldName() string {
	if c.field != "" {
		return c.field
	}
	return c.Name
}
