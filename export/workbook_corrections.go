package export

import (
	"cmp"

	"tripwell/store"
)

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
