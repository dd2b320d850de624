package export

import (
	"cmp"
	"fmt"
	"maps"
	"slices"
	"strconv"
	"strings"
	"time"

	"tripwell/forms"
	"tripwell/store"
)

// DefectLine is a defect with its site.
type DefectLine struct {
	Site store.Site
	store.Defect
}

// PlanLine is a revision of a plan; SiteCode is "" for the organisation's.
type PlanLine struct {
	SiteCode string
	store.Revision
}

// MonthLine counts what became of the dates that count in one month at one site.
type MonthLine struct {
	SiteCode string
	Month    forms.Day // its first day
	forms.Count
}

// GapLine is a gap in protection with its site; ByText names the protector meant.
type GapLine struct {
	Site store.Site
	store.ProtectionGap
	ByText string
}

// RefusalLine is a record in quarantine; SiteCode is "" for the organisation's logs.
type RefusalLine struct {
	SiteCode string
	store.Refusal
}

// SampleLine says how large a fair sample of a site's devices is; Site is zero for all sites together.
type SampleLine struct {
	Site    store.Site
	Devices int
}

// sampleShares are the shares of wrong devices for which sample sizes are given, at sampleConfidence.
var sampleShares = []float64{0.01, 0.02, 0.05, 0.10}

const sampleConfidence = 0.95

var correctionColumns = []column{
	{"site_code", 10, textCell}, {"tag", 12, textCell}, {"place", 36, textCell}, {"task", 16, textCell}, {"test_day", 12, dayCell}, {"what", 14, textCell},
	{"changed_at", 20, timeCell}, {"received", 20, timeCell}, {"zone", 18, textCell}, {"by", 18, textCell}, {"reason", 40, textCell}, {"counts", 10, textCell},
	{"result_before", 16, verdictCell}, {"result", 16, verdictCell}, {"entry_id", 38, textCell}, {"record_id", 38, textCell},
}

// correctionRows writes a row for everything that was said of an entry afterwards, whether it counts or not.
func (b *book) correctionRows(s *sheet, e EntryLine) error {
	for i, c := range e.Corrections {
		if c.Sealed != nil {
			c.Reason = b.say("sheet.sealed_why", "at", c.Sealed.At.In(e.Zone).Format("2006-01-02 15:04"), "by", b.person(c.Sealed.By), "why", c.Sealed.Reason)
		}
		before := ""
		if i < len(e.Replaced) {
			before = e.Replaced[i].Verdict.Result
		}
		if err := b.correctionRow(s, e, c, "corrected", before); err != nil {
			return err
		}
	}
	if e.Sealed != nil {
		b.mention(e.Sealed.By)
		seal := store.Correction{Record: e.Sealed.Record, By: e.Sealed.By, At: e.Sealed.At, Received: e.Sealed.At, Reason: e.Sealed.Reason, InForce: true}
		if err := b.correctionRow(s, e, seal, "sealed", ""); err != nil {
			return err
		}
	}
	if e.Withdrawn != nil {
		return b.correctionRow(s, e, *e.Withdrawn, "withdrawn", e.Verdict.Result)
	}
	return nil
}

func (b *book) correctionRow(s *sheet, e EntryLine, c store.Correction, what, before string) error {
	b.mention(c.By)
	counts := b.say("sheet.no")
	if c.InForce {
		counts = b.say("sheet.yes")
	}
	return s.row().text(e.Site.Code).text(TagText(e.DeviceRow.Tag)).text(PlaceText(e.DeviceRow.Place)).text(b.word("task", e.Task)).day(e.Day).text(b.say("sheet."+what)).
		time(c.At, e.Zone).time(c.Received, e.Zone).text(e.Site.Zone).text(b.person(c.By)).text(c.Reason).text(counts).
		verdict(before).verdict(e.Verdict.Result).text(e.ID).text(c.Record).end()
}

var importedColumns = []column{
	{"site_code", 10, textCell}, {"tag", 12, textCell}, {"place", 36, textCell}, {"task", 16, textCell}, {"test_day", 12, dayCell}, {"result", 16, verdictCell},
	{"source", 16, textCell}, {"by", 18, textCell}, {"received", 20, timeCell}, {"zone", 18, textCell}, {"note", 40, textCell}, {"entry_id", 38, textCell},
}

// importedRow lists a test that was brought in: nothing here witnessed it.
func (b *book) importedRow(s *sheet, e EntryLine) error {
	return s.row().text(e.Site.Code).text(TagText(e.DeviceRow.Tag)).text(PlaceText(e.DeviceRow.Place)).text(b.word("task", e.Task)).day(e.Day).verdict(e.Verdict.Result).
		text(b.word("sheet.source", e.Source)).text(cmp.Or(e.ByName, b.person(e.By))).time(e.Received, e.Zone).text(e.Site.Zone).text(e.Note).text(e.ID).end()
}

var defectColumns = []column{
	{"site_code", 10, textCell}, {"tag", 12, textCell}, {"place", 36, textCell}, {"kind", 22, textCell}, {"cause", 30, textCell}, {"severity", 12, textCell},
	{"state", 26, textCell}, {"opened", 20, timeCell}, {"fails", 8, countCell}, {"made_safe", 20, timeCell}, {"made_safe_how", 26, textCell}, {"assigned", 18, textCell},
	{"repaired", 20, timeCell}, {"repair_text", 26, textCell}, {"closed", 20, timeCell}, {"closed_how", 20, textCell}, {"fix_due", 12, dayCell}, {"parts", 30, textCell},
	{"zone", 18, textCell}, {"note", 40, textCell}, {"first_entry", 38, textCell}, {"device_id", 38, textCell}, {"defect_id", 38, textCell},
}

// defects writes every defect, the open ones first.
func (b *book) defects() error {
	s, err := b.sheet("defects", defectColumns)
	if err != nil {
		return err
	}
	for _, d := range b.src.Defects {
		if err := b.defectRow(s, d); err != nil {
			return err
		}
	}
	return s.close()
}

func (b *book) defectRow(s *sheet, d DefectLine) error {
	zone := d.Site.Location()
	act := func(a *forms.DefectAct) time.Time {
		if a == nil {
			return time.Time{}
		}
		return time.UnixMilli(a.At)
	}
	text := func(a *forms.DefectAct) string {
		if a == nil {
			return ""
		}
		return a.Text
	}
	assigned := text(d.Assigned)
	if assigned != "" {
		assigned = b.person(assigned)
	}
	how := ""
	if d.Closed != nil && d.How != "" {
		how = b.say("sheet.closed." + d.How)
	}
	return s.row().text(d.Site.Code).text(TagText(d.Device.Tag)).text(PlaceText(d.Device.Place)).text(b.word("kind", d.Device.Kind)).text(b.cause(&d.Defect)).
		text(b.say("office.defect.severity."+d.Severity)).text(b.say("office.defect.state."+d.State)).time(d.OpenedAt(), zone).count(int64(d.Fails)).
		time(act(d.Safe), zone).text(text(d.Safe)).text(assigned).time(act(d.Repaired), zone).text(text(d.Repaired)).time(act(d.Closed), zone).text(how).
		day(dueDay(d.Due)).text(strings.Join(d.Parts, ", ")).text(d.Site.Zone).text(d.Text).text(d.First).text(d.Device.ID).text(d.ID).end()
}

// dueDay is a day that may never have been set.
func dueDay(d forms.Day) forms.Day {
	if d == 0 {
		return forms.NoDay
	}
	return d
}

// cause says what a defect is about.
func (b *book) cause(d *store.Defect) string {
	if task := forms.TaskOfCause(d.Cause); task != "" {
		return b.say("office.defect.cause_task", "task", b.word("task", task))
	}
	if key := "office.defect.cause." + d.Cause; b.words.Has(key) {
		return b.say(key)
	}
	return b.readingName(d.Cause)
}

var instrumentColumns = []column{
	{"instrument_name", 24, textCell}, {"serial", 16, textCell}, {"accuracy", 60, textCell}, {"ramp", 26, textCell}, {"calibration_due", 14, dayCell}, {"status", 14, textCell},
	{"instrument_id", 38, textCell},
}

func (b *book) instruments() error {
	s, err := b.sheet("instruments", instrumentColumns)
	if err != nil {
		return err
	}
	for _, i := range b.src.Instruments {
		var accuracy []string
		for _, code := range sortedKeys(i.Accuracy) {
			a := i.Accuracy[code]
			accuracy = append(accuracy, b.say("sheet.accuracy", "reading", b.readingName(code), "percent", figureText(a.Percent), "plus", figureText(a.Plus), "unit", b.unit(code)))
		}
		ramp := ""
		switch {
		case i.Ramp == nil:
		case i.Ramp.StepMA > 0 && i.Ramp.DwellMS > 0:
			ramp = b.say("sheet.ramp", "step", figureText(i.Ramp.StepMA), "dwell", figureText(i.Ramp.DwellMS))
		default:
			ramp = b.say("sheet.ramp_rate", "rate", figureText(i.Ramp.RateMAPerS))
		}
		status := "in_service"
		if i.Retired {
			status = "retired"
		}
		err := s.row().text(i.Name).text(i.Serial).text(strings.Join(accuracy, "; ")).text(ramp).day(i.CalibrationDue).text(b.say("sheet." + status)).text(i.ID).end()
		if err != nil {
			return err
		}
	}
	return s.close()
}

var planColumns = []column{
	{"site_code", 10, textCell}, {"plan", 30, textCell}, {"revision", 9, countCell}, {"in_force", 12, dayCell}, {"task", 16, textCell}, {"kinds", 40, textCell}, {"every", 10, textCell},
	{"duty", 24, textCell}, {"grace", 10, textCell}, {"lead", 10, textCell}, {"by", 18, textCell}, {"made_at", 20, timeCell}, {"reason", 40, textCell}, {"plan_source", 50, textCell},
	{"source_status", 20, textCell}, {"record_id", 38, textCell},
}

// plans writes every revision of every plan.
func (b *book) plans() error {
	s, err := b.sheet("plans", planColumns)
	if err != nil {
		return err
	}
	for _, line := range b.src.Plans {
		p := line.Plan
		var kinds []string
		for _, k := range p.Kinds {
			kinds = append(kinds, b.word("kind", k))
		}
		at := line.At
		if line.By == "" {
			at = time.Time{} // it came with the program
		} else {
			b.mention(line.By)
		}
		err := s.row().text(line.SiteCode).text(cmp.Or(p.Name, b.word("plan", p.ID))).count(int64(p.Revision)).day(p.InForce).text(b.word("task", p.Task)).text(strings.Join(kinds, ", ")).
			text(p.Every).text(b.say("plans.duty."+p.Duty)).text(p.Grace).text(p.Lead).text(b.byOrShipped(line.By)).time(at, time.UTC).text(line.Reason).text(p.Source).text(p.Status).text(line.Record).end()
		if err != nil {
			return err
		}
	}
	return s.close()
}

func (b *book) byOrShipped(by string) string {
	if by == "" {
		return b.say("plans.shipped")
	}
	return b.person(by)
}

var complianceColumns = []column{
	{"month", 12, textCell}, {"site_code", 10, textCell}, {"dates", 10, countCell}, {"in_time", 10, countCell}, {"graced", 10, countCell}, {"late", 10, countCell},
	{"missed", 10, countCell}, {"no_access", 10, countCell}, {"open", 10, countCell}, {"in_time_percent", 12, numberCell},
}

// compliance writes what became of the dates of each month at each site, then the months of all sites together, which the chart
// draws.
func (b *book) compliance() error {
	s, err := b.sheet("compliance", complianceColumns)
	if err != nil {
		return err
	}
	sums := map[forms.Day]forms.Count{}
	for _, m := range b.src.Months {
		sum := sums[m.Month]
		sum.InTime += m.InTime
		sum.Graced += m.Graced
		sum.Late += m.Late
		sum.Missed += m.Missed
		sum.NoAccess += m.NoAccess
		sum.Open += m.Open
		sums[m.Month] = sum
		if err := b.monthRow(s, m.Month, m.SiteCode, m.Count); err != nil {
			return err
		}
	}
	if len(b.src.Sites) > 1 {
		for _, month := range slices.Sorted(maps.Keys(sums)) {
			if err := b.monthRow(s, month, b.say("sheet.all_sites"), sums[month]); err != nil {
				return err
			}
		}
	}
	b.monthsFrom, b.monthsTo = s.last-len(sums)+1, s.last
	return s.close()
}

func (b *book) monthRow(s *sheet, month forms.Day, site string, c forms.Count) error {
	done := c.InTime + c.Graced + c.Late + c.Missed + c.NoAccess
	s.row().text(month.Time().Format("2006-01")).text(site).count(int64(done + c.Open)).count(int64(c.InTime)).count(int64(c.Graced)).count(int64(c.Late)).
		count(int64(c.Missed)).count(int64(c.NoAccess)).count(int64(c.Open))
	if done == 0 {
		return s.skip().end()
	}
	percent, err := strconv.ParseFloat(strconv.FormatFloat(100*float64(c.InTime+c.Graced)/float64(done), 'f', 1, 64), 64)
	if err != nil {
		return fmt.Errorf("share of %s: %w", month, err)
	}
	return s.figure(percent).end()
}

var gapColumns = []column{
	{"site_code", 10, textCell}, {"tag", 12, textCell}, {"place", 36, textCell}, {"kind", 22, textCell}, {"gap", 40, textCell}, {"protector", 36, textCell}, {"marking", 40, textCell},
	{"device_id", 38, textCell},
}

func (b *book) gaps() error {
	s, err := b.sheet("gaps", gapColumns)
	if err != nil {
		return err
	}
	for _, g := range b.src.Gaps {
		d := g.Device
		err := s.row().text(g.Site.Code).text(TagText(d.Tag)).text(PlaceText(d.Place)).text(b.word("kind", d.Kind)).text(b.say("office.protection.gap." + g.Why)).text(g.ByText).
			text(g.Marking).text(d.ID).end()
		if err != nil {
			return err
		}
	}
	return s.close()
}

var peopleColumns = []column{{"person", 24, textCell}, {"role", 14, textCell}, {"status", 14, textCell}, {"tests", 10, countCell}, {"person_id", 38, textCell}}

// people writes whom the rows of the workbook name, as the organisation states them: names are no part of the proof.
func (b *book) people() error {
	s, err := b.sheet("people", peopleColumns)
	if err != nil {
		return err
	}
	for _, id := range slices.Sorted(maps.Keys(b.mentioned)) {
		p := store.Person{ID: id}
		if b.src.Person != nil {
			p = b.src.Person(id)
		}
		role, status := "", ""
		if p.Role != "" {
			role, status = b.say("access.role_"+p.Role), b.say("sheet.active")
			if !p.Active {
				status = b.say("sheet.not_active")
			}
		}
		if err := s.row().text(p.Name).text(role).text(status).count(int64(b.mentioned[id])).text(id).end(); err != nil {
			return err
		}
	}
	return s.close()
}

// mention notes that a row names a person.
func (b *book) mention(id string) {
	if id != "" {
		b.mentioned[id] += 0
	}
}

var refusedColumns = []column{
	{"site_code", 10, textCell}, {"received", 20, timeCell}, {"why", 16, textCell}, {"meaning", 60, textCell}, {"from", 38, textCell}, {"n", 8, countCell}, {"record_id", 38, textCell}, {"sha256", 66, textCell},
}

// refused lists what could not be taken; the bytes are kept and can be asked for.
func (b *book) refused() error {
	s, err := b.sheet("refused", refusedColumns)
	if err != nil {
		return err
	}
	for _, r := range b.src.Refusals {
		err := s.row().text(r.SiteCode).time(r.Received, time.UTC).text(r.Code).text(r.Text).text(r.From).count(r.N).text(r.Record).text(r.SHA256).end()
		if err != nil {
			return err
		}
	}
	return s.close()
}

var sampleColumns = []column{
	{"site_code", 12, textCell}, {"site", 26, textCell}, {"devices", 10, countCell}, {"sample_1", 14, countCell}, {"sample_2", 14, countCell}, {"sample_5", 14, countCell}, {"sample_10", 14, countCell},
}

// sample says how many devices to see for a share that must not be missed. Which ones is drawn with the bundle and a word of the
// auditor's, and so stands in no workbook.
func (b *book) sample() error {
	s, err := b.sheet("sample", sampleColumns)
	if err != nil {
		return err
	}
	for _, l := range b.src.Samples {
		code, name := l.Site.Code, l.Site.Name
		if l.Site.ID == "" {
			code, name = "", b.say("sheet.all_sites")
		}
		s.row().text(code).text(name).count(int64(l.Devices))
		for _, share := range sampleShares {
			s.count(int64(forms.SampleSize(l.Devices, forms.SampleBad(l.Devices, share), sampleConfidence)))
		}
		if err := s.end(); err != nil {
			return err
		}
	}
	return s.close()
}

var explainedColumns = []column{{"sheet", 18, textCell}, {"column", 30, textCell}, {"meaning", 110, textCell}}

// explained says what the columns hold whose heading does not say it all.
func (b *book) explained() error {
	s, err := b.sheet("explained", explainedColumns)
	if err != nil {
		return err
	}
	for _, key := range sheetOrder {
		for _, c := range sheetColumns[key] {
			if about := "sheet.about." + c.key; b.words.Has(about) {
				if err := s.row().text(b.say("sheet.name." + key)).text(b.say("sheet.col." + c.key)).text(b.say(about)).end(); err != nil {
					return err
				}
			}
		}
	}
	return s.close()
}

// sheetColumns are the columns of the sheets by key.
var sheetColumns = map[string][]column{
	"register": registerColumns, "entries": entryColumns, "readings": readingColumns, "flags": flagColumns, "due": dueColumns, "limits": limitColumns, "corrections": correctionColumns,
	"imported": importedColumns, "defects": defectColumns, "instruments": instrumentColumns, "plans": planColumns, "compliance": complianceColumns, "gaps": gapColumns, "people": peopleColumns,
	"refused": refusedColumns, "sample": sampleColumns,
}
