package export

import (
	"cmp"
	"strings"
	"time"

	"tripwell/store"
)

// PlanLine is a revision of a plan; SiteCode is "" for the organisation's.
type PlanLine struct {
	SiteCode string
	store.Revision
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
