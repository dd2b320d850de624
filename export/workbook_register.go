package export

import (
	"cmp"
	"strings"

	"tripwell/forms"
	"tripwell/store"
)

var registerColumns = []column{
	{"site_code", 10, textCell}, {"site", 22, textCell}, {"building", 16, textCell}, {"floor", 12, textCell}, {"room", 18, textCell},
	{"spot", 24, textCell}, {"tag", 12, textCell}, {"kind", 22, textCell}, {"panel", 9, textCell}, {"circuit", 9, textCell},
	{"make", 14, textCell}, {"model", 14, textCell}, {"rating_a", 10, numberCell}, {"rated_residual_ma", 12, numberCell}, {"installed", 12, dayCell},
	{"status", 14, textCell}, {"last_button", 12, dayCell}, {"result_button", 16, verdictCell}, {"last_instrument", 12, dayCell},
	{"result_instrument", 16, verdictCell}, {"last_receptacle", 12, dayCell}, {"result_receptacle", 16, verdictCell},
	{"next_date", 12, dayCell}, {"next_task", 16, textCell}, {"device_id", 38, textCell},
	// The rest makes the sheet a register that can be taken in again.
	{"zone", 18, textCell}, {"standard", 10, textCell}, {"address", 24, textCell}, {"order", 8, numberCell}, {"critical_load", 18, textCell}, {"whom_to_tell", 18, textCell}, {"test_from", 10, textCell}, {"test_until", 10, textCell},
	{"breaker_a", 10, numberCell}, {"poles", 8, numberCell}, {"circuit_v", 10, numberCell}, {"conductor", 12, textCell}, {"supply", 10, textCell}, {"circuit_standard", 10, textCell},
	{"serial", 14, textCell}, {"nominal_v", 10, numberCell}, {"delayed", 10, textCell}, {"waveform", 14, textCell}, {"equipment_ground", 16, textCell}, {"faces", 8, numberCell},
	{"own_limit_set", 18, textCell}, {"gauge", 10, textCell}, {"length_m", 10, numberCell},
	{"no_neutral", 10, textCell}, {"earthing", 10, textCell}, {"distribution", 12, textCell}, {"special_location", 12, textCell}, {"double_insulated", 12, textCell},
	{"new_construction", 12, textCell}, {"quiet_ground", 10, textCell}, {"supply_edition", 12, textCell}, {"locking", 10, textCell},
	{"kept_at", 18, textCell}, {"note", 40, textCell}, {"now_at", 12, textCell}, {"hangs_on", 26, textCell}, {"usual_place", 14, textCell},
	{"imported", 30, textCell},
}

// register writes one row a device, in walking order.
func (b *book) register() error {
	s, err := b.sheet("register", registerColumns)
	if err != nil {
		return err
	}
	for line, err := range b.src.Devices {
		if err != nil {
			return err
		}
		if err := b.registerRow(s, line); err != nil {
			return err
		}
	}
	return s.close()
}

func (b *book) registerRow(s *sheet, line DeviceLine) error {
	d := line.Device
	status := "in_service"
	if d.Retired {
		status = "retired"
	}
	next := nextDue(d.Due)
	s.row().text(line.Site.Code).text(line.Site.Name).text(d.Place.Building).text(d.Place.Floor).text(d.Place.Room).
		text(d.Place.Name).text(TagText(d.Tag)).text(b.word("kind", d.Kind)).text(d.Panel).text(d.Circuit).
		text(d.Make).text(d.Model).rating(d.RatingA).rating(d.RatedResidualMA).day(d.Installed).
		text(b.say("sheet." + status))
	for _, task := range []string{"button", "instrument", "receptacle"} {
		last, ok := d.Last[task]
		if !ok {
			last.Day = forms.NoDay
		}
		s.day(last.Day).verdict(last.Result)
	}
	s.day(next.Due).text(b.word("task", next.Task)).text(d.ID)
	b.registerFields(s, line)
	var unseen []string
	for _, task := range line.Imported {
		unseen = append(unseen, b.word("task", task))
	}
	return s.text(strings.Join(unseen, ", ")).end()
}

// registerFields writes the fields that nothing else of the row shows, as an import reads them.
func (b *book) registerFields(s *sheet, line DeviceLine) {
	field := func(fields map[string]any, names ...string) {
		for _, name := range names {
			switch v := fields[name].(type) {
			case float64:
				s.figure(v)
			case string:
				s.text(v)
			case bool:
				s.text(b.say(map[bool]string{true: "sheet.yes", false: "sheet.no"}[v]))
			default:
				s.skip()
			}
		}
	}
	p := line.Device.Place
	s.text(line.Site.Zone).text(line.Site.Standard).text(line.Site.Address).rating(p.Order).text(p.CriticalLoad).text(p.WhomToTell).text(p.TestFrom).text(p.TestUntil)
	field(line.Circuit, "breaker_a", "poles", "voltage_v", "conductor", "supply", "standard")
	field(line.Fields, "serial", "nominal_v", "delayed", "waveform", "equipment_ground", "faces", "limit_set", "gauge", "length_m",
		"no_neutral", "earthing", "distribution", "special_location", "double_insulated", "new_construction", "quiet_ground", "supply_edition", "locking", "where", "note")
	s.text(line.AtSite).text(line.Source).text(p.Usual)
}

// nextDue is the earliest date of a device; Due is NoDay where there is none.
func nextDue(due []store.Due) store.Due {
	next := store.Due{Due: forms.NoDay}
	for _, d := range due {
		if d.Due != forms.NoDay && (next.Due == forms.NoDay || d.Due < next.Due) {
			next = d
		}
	}
	return next
}

var dueColumns = []column{
	{"site_code", 10, textCell}, {"site", 22, textCell}, {"tag", 12, textCell}, {"place", 40, textCell}, {"kind", 22, textCell},
	{"task", 16, textCell}, {"due", 12, dayCell}, {"state", 16, textCell}, {"last_tested", 12, dayCell}, {"plan", 30, textCell}, {"device_id", 38, textCell},
	{"imported", 30, textCell},
}

// due writes the dates to come and those missed, as they stood on the day of the workbook.
func (b *book) due() error {
	s, err := b.sheet("due", dueColumns)
	if err != nil {
		return err
	}
	for line, err := range b.src.Due {
		if err != nil {
			return err
		}
		d := line.Device
		imported := ""
		if line.Imported {
			imported = b.say("sheet.imported")
		}
		err = s.row().text(line.Site.Code).text(line.Site.Name).text(TagText(d.Tag)).text(PlaceText(d.Place)).text(b.word("kind", d.Kind)).
			text(b.word("task", line.Task)).day(line.Due.Due).text(b.word("state", line.State)).day(line.Last).text(b.word("plan", line.Plan)).text(d.ID).text(imported).end()
		if err != nil {
			return err
		}
	}
	return s.close()
}

var limitColumns = []column{
	{"limit_set", 24, textCell}, {"revision", 9, countCell}, {"in_force", 12, dayCell}, {"limit_id", 18, textCell}, {"reading", 24, textCell},
	{"limit", 46, textCell}, {"level", 10, textCell}, {"when", 40, textCell}, {"limit_source", 60, textCell}, {"source_status", 20, textCell},
}

// limits writes every limit of every revision the store holds.
func (b *book) limits() error {
	s, err := b.sheet("limits", limitColumns)
	if err != nil {
		return err
	}
	for _, l := range b.src.Limits {
		err := s.row().text(b.word("limit_set", l.Set)).count(int64(l.Revision)).day(l.InForce).text(l.ID).text(cmp.Or(l.Name, b.readingName(l.Reading))).
			text(l.Limit).text(b.word("sheet.level", l.Level)).text(l.When).text(l.Source).text(l.Status).end()
		if err != nil {
			return err
		}
	}
	return s.close()
}
