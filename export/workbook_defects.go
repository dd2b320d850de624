package export

import (
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
