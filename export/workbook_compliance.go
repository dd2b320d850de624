package export

import (
	"fmt"
	"maps"
	"slices"
	"strconv"

	"tripwell/forms"
)

// MonthLine counts what became of the dates that count in one month at one site.
type MonthLine struct {
	SiteCode string
	Month    forms.Day // its first day
	forms.Count
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
