package export

import (
	"bytes"
	"cmp"
	"encoding/json"
	"maps"
	"slices"

	"tripwell/forms"
	"tripwell/store"
	"tripwell/store/record"
)

var entryColumns = []column{
	{"entry_id", 38, textCell}, {"site_code", 10, textCell}, {"tag", 12, textCell}, {"place", 40, textCell}, {"kind", 20, textCell},
	{"task", 16, textCell}, {"test_day", 12, dayCell}, {"result", 18, verdictCell}, {"status", 14, textCell},
	{"trip_current", 11, numberCell}, {"test_current", 11, numberCell}, {"trip_time", 11, numberCell}, {"ground", 11, numberCell}, {"voltage", 11, numberCell}, {"retention", 11, numberCell},
	{"by", 22, textCell}, {"read_by", 18, textCell}, {"typed_by", 18, textCell}, {"at", 20, timeCell}, {"received", 20, timeCell}, {"zone", 20, textCell},
	{"instrument", 26, textCell}, {"source", 16, textCell}, {"imported", 26, textCell}, {"note", 40, textCell}, {"corrected", 44, textCell},
	{"flags", 8, countCell}, {"limit_revision", 22, textCell}, {"device_id", 38, textCell}, {"from", 38, textCell}, {"pos", 10, countCell},
}

// entryFigures are the readings that have a column of their own, in the order of the columns.
var entryFigures = []string{"trip_current_ma", "test_current_ma", "trip_time_ms", "ground_ohm", "voltage_v", "retention_g"}

var readingColumns = []column{
	{"entry_id", 38, textCell}, {"site_code", 10, textCell}, {"tag", 12, textCell}, {"place", 36, textCell}, {"task", 16, textCell},
	{"test_day", 12, dayCell}, {"reading", 26, textCell}, {"conditions", 22, textCell}, {"value", 12, numberCell}, {"value_text", 20, textCell},
	{"unit", 8, textCell}, {"verdict", 18, verdictCell}, {"limit_min", 11, numberCell}, {"limit_max", 11, numberCell}, {"limit_one_of", 22, textCell},
	{"level", 10, textCell}, {"limit_revision", 22, textCell}, {"limit_source", 44, textCell}, {"meaning", 50, textCell}, {"status", 14, textCell},
}

var flagColumns = []column{
	{"site_code", 10, textCell}, {"tag", 12, textCell}, {"place", 40, textCell}, {"task", 16, textCell}, {"test_day", 12, dayCell},
	{"flag", 50, textCell}, {"detail", 50, textCell}, {"entry_id", 38, textCell},
}

// entries writes Entries, Readings, Flags, Corrections and Imported in one pass, so that each entry is read and judged once.
func (b *book) entries() error {
	entries, err := b.sheet("entries", entryColumns)
	if err != nil {
		return err
	}
	readings, err := b.sheet("readings", readingColumns)
	if err != nil {
		return err
	}
	flags, err := b.sheet("flags", flagColumns)
	if err != nil {
		return err
	}
	corrections, err := b.sheet("corrections", correctionColumns)
	if err != nil {
		return err
	}
	imported, err := b.sheet("imported", importedColumns)
	if err != nil {
		return err
	}
	for e, err := range b.src.Entries {
		if err != nil {
			return err
		}
		b.mentionEntry(e)
		if err := b.correctionRows(corrections, e); err != nil {
			return err
		}
		if e.Imported {
			if err := b.importedRow(imported, e); err != nil {
				return err
			}
		}
		if err := b.entryRow(entries, e); err != nil {
			return err
		}
		if err := b.readingRows(readings, e); err != nil {
			return err
		}
		for _, f := range e.Flags {
			err := flags.row().text(e.Site.Code).text(TagText(e.DeviceRow.Tag)).text(PlaceText(e.DeviceRow.Place)).text(b.word("task", e.Task)).
				day(e.Day).text(b.flag(f)).text(f.Detail).text(e.ID).end()
			if err != nil {
				return err
			}
		}
	}
	for _, s := range []*sheet{entries, readings, flags, corrections, imported} {
		if err := s.close(); err != nil {
			return err
		}
	}
	return nil
}

// mentionEntry counts a test for whoever made it, and notes who else its row names.
func (b *book) mentionEntry(e EntryLine) {
	if e.By != "" {
		b.mentioned[e.By]++
	}
	b.mention(e.ReadBy)
	b.mention(e.TypedBy)
}

// flag says a flag in words, with what it is about filled in.
func (b *book) flag(f store.Flag) string {
	if key := "flag." + f.Code; b.words.Has(key) {
		return b.say(key, "detail", f.Detail)
	}
	return f.Code
}

// status of an entry's readings: in force, corrected, withdrawn.
func (e EntryLine) status() string {
	switch {
	case e.Sealed != nil:
		return "sealed"
	case e.Withdrawn != nil:
		return "withdrawn"
	case len(e.Corrections) > 0:
		return "corrected"
	}
	return "in_force"
}

func (b *book) entryRow(s *sheet, e EntryLine) error {
	if e.LimitSet != "" {
		b.used[limitRevision(e.LimitSet, e.LimitRev)] = true
	}
	imported := ""
	if e.Imported {
		imported = b.say("sheet.imported")
	}
	s.row().text(e.ID).text(e.Site.Code).text(TagText(e.DeviceRow.Tag)).text(PlaceText(e.DeviceRow.Place)).text(b.word("kind", e.kind())).
		text(b.word("task", e.Task)).day(e.Day).verdict(e.Verdict.Result).text(b.say("sheet." + e.status()))
	for _, code := range entryFigures {
		b.figureCell(s, code, e.Body.Readings)
	}
	return s.text(cmp.Or(e.ByName, b.person(e.By))).text(e.ReadName).text(e.TypedName).time(e.At, e.Zone).time(e.Received, e.Zone).text(e.Site.Zone).
		text(e.Instrument).text(b.word("sheet.source", e.Source)).text(imported).text(e.Note).text(b.correction(e)).
		count(int64(len(e.Flags))).text(limitRevision(e.LimitSet, e.LimitRev)).text(e.Device).text(e.From).count(e.Pos).end()
}

func (e EntryLine) kind() string {
	if e.Body.Given.Kind != "" {
		return e.Body.Given.Kind
	}
	return e.DeviceRow.Kind
}

// figureCell writes a reading as a number, or as the bound that it is.
func (b *book) figureCell(s *sheet, code string, readings map[string]forms.Reading) {
	r, ok := readings[code]
	switch v := r.Value.(type) {
	case float64:
		s.figure(v)
	default:
		if !ok {
			s.skip()
			return
		}
		number, text := b.reading(code, r)
		if number != nil {
			s.figure(*number)
			return
		}
		s.text(text)
	}
}

// reading says what was read, from the reading itself.
func (b *book) reading(code string, r forms.Reading) (*float64, string) {
	if v, ok := r.Value.(float64); ok {
		return &v, ""
	}
	if v, ok := r.Value.(string); ok {
		return nil, b.option(code, v)
	}
	raw, err := json.Marshal(r)
	if err != nil || bytes.Equal(raw, []byte("{}")) {
		return nil, ""
	}
	return b.value(code, raw)
}

// correction says in one cell who changed the entry, when and why; all corrections are named, the one in force last.
func (b *book) correction(e EntryLine) string {
	text := ""
	add := func(key, by, reason string, at string) {
		if text != "" {
			text += "\n"
		}
		text += b.say(key, "at", at, "by", by, "why", reason)
	}
	for _, c := range e.Corrections {
		if c.Sealed != nil {
			add("sheet.sealed_why", b.person(c.Sealed.By), c.Sealed.Reason, c.Sealed.At.In(e.Zone).Format("2006-01-02 15:04"))
			continue
		}
		key := "sheet.correction_replaced"
		if c.InForce {
			key = "sheet.correction_in_force"
		}
		add(key, b.person(c.By), c.Reason, c.At.In(e.Zone).Format("2006-01-02 15:04"))
	}
	if c := e.Sealed; c != nil {
		add("sheet.sealed_why", b.person(c.By), c.Reason, c.At.In(e.Zone).Format("2006-01-02 15:04"))
	}
	if c := e.Withdrawn; c != nil {
		add("sheet.withdrawn_why", b.person(c.By), c.Reason, c.At.In(e.Zone).Format("2006-01-02 15:04"))
	}
	return text
}

// readingRows writes what is in force first, then what corrections replaced.
func (b *book) readingRows(s *sheet, e EntryLine) error {
	status := e.status()
	if e.Imported && status == "in_force" {
		status = "imported_short"
	}
	if err := b.bodyRows(s, e, e.Body, e.Verdict, status); err != nil {
		return err
	}
	for _, r := range e.Replaced {
		if err := b.bodyRows(s, e, r.Body, r.Verdict, "replaced"); err != nil {
			return err
		}
	}
	return nil
}

// bodyRows writes one row a finding, then one a reading that no limit spoke of.
func (b *book) bodyRows(s *sheet, e EntryLine, body forms.Entry, verdict forms.Verdict, status string) error {
	spoken := make(map[string]bool, len(verdict.Findings))
	for i := range verdict.Findings {
		f := &verdict.Findings[i]
		spoken[f.Reading+b.conditions(f.At)] = true
		number, text := b.value(f.Reading, f.Value)
		if f.Reason != "" {
			number, text = nil, b.word("missing", f.Reason)
		}
		if f.Value == nil && f.At == nil {
			number, text = b.reading(f.Reading, body.Readings[f.Reading])
		}
		if err := b.findingRow(s, e, f, number, text, status); err != nil {
			return err
		}
	}
	rest := func(code string, at map[string]any, r forms.Reading) error {
		if spoken[code+b.conditions(at)] {
			return nil
		}
		number, text := b.reading(code, r)
		return b.findingRow(s, e, &forms.Finding{Reading: code, At: at}, number, text, status)
	}
	for _, code := range inFormOrder(body.Readings) {
		if err := rest(code, nil, body.Readings[code]); err != nil {
			return err
		}
	}
	for _, series := range body.Series {
		for _, code := range inFormOrder(series.Readings) {
			if err := rest(code, series.At, series.Readings[code]); err != nil {
				return err
			}
		}
	}
	return nil
}

func (b *book) findingRow(s *sheet, e EntryLine, f *forms.Finding, number *float64, text, status string) error {
	s.row().text(e.ID).text(e.Site.Code).text(TagText(e.DeviceRow.Tag)).text(PlaceText(e.DeviceRow.Place)).text(b.word("task", e.Task)).
		day(e.Day).text(cmp.Or(e.OwnNames[f.Reading], b.readingName(f.Reading))).text(b.conditions(f.At)).known(number).text(text)
	unit := b.unit(f.Reading)
	if f.Unit != "" {
		unit = b.word("unit", f.Unit)
	}
	if number == nil && (text == "" || text[0] != '>' && text[0] != '<') && f.Limit == nil {
		unit = ""
	}
	s.text(unit).verdict(f.Verdict)
	if f.Limit == nil {
		s.skip().skip().skip()
	} else {
		s.known(f.Limit.Min).known(f.Limit.Max).text(b.oneOf(f.Reading, f.Limit.OneOf))
	}
	rev := ""
	if f.Limit != nil {
		rev = limitRevision(e.LimitSet, e.LimitRev)
	}
	meaning := ""
	if f.Text != "" && b.words.Has(f.Text) {
		meaning = b.say(f.Text)
	}
	return s.text(b.word("sheet.level", f.Level)).text(rev).text(f.Source).text(meaning).text(b.say("sheet." + status)).end()
}

func (b *book) oneOf(code string, values []string) string {
	text := ""
	for i, v := range values {
		if i > 0 {
			text += ", "
		}
		text += b.option(code, v)
	}
	return text
}

func (b *book) person(id string) string {
	if name := b.src.PersonName; name != nil {
		if n := name(id); n != "" {
			return n
		}
	}
	switch {
	case id == b.src.Store:
		return b.say("sheet.store_owner")
	case record.IsID(id):
		return b.say("sheet.former_member", "id", id)
	}
	return id
}

// codeOrder is the place of every reading code in the order of the form.
var codeOrder = func() map[string]int {
	order := map[string]int{}
	for i, c := range forms.Codes() {
		order[c.Code] = i + 1
	}
	return order
}()

// inFormOrder gives the codes of readings in the order forms ask them, unknown ones first by name.
func inFormOrder(readings map[string]forms.Reading) []string {
	return slices.SortedFunc(maps.Keys(readings), func(a, b string) int {
		return cmp.Or(cmp.Compare(codeOrder[a], codeOrder[b]), cmp.Compare(a, b))
	})
}

// revisions are the limit set revisions that judged an entry of the workbook, sorted.
func (b *book) revisions() []string { return slices.Sorted(maps.Keys(b.used)) }
