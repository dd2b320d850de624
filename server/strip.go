package server

import (
	"strconv"
	"strings"

	"tripwell/forms"
	"tripwell/store"
)

// strip is twelve months of a site: how many of the dates that counted in each were kept. The figures stand in its label
// for those who cannot see bars, and in a table behind its link.
type strip struct {
	Href, Label string
	Months      []string // classes: the height of the bar, and whether all, most or fewer were kept
}

// Shares of kept dates from which a month counts as kept, and as mostly kept. Common practice, no source.
const (
	allKept    = 98
	mostlyKept = 90
)

func (k ink) strip(href string, year []store.Month) strip {
	out := strip{Href: href, Months: make([]string, 0, len(year))}
	var label strings.Builder
	label.WriteString(k.say("year.strip"))
	for i, m := range year {
		if i > 0 {
			label.WriteByte(',')
		}
		label.WriteByte(' ')
		label.WriteString(k.month(m.Month))
		if percent, ok := m.Percent(); ok {
			label.WriteString(" " + strconv.Itoa(percent) + thin + "%")
		} else {
			label.WriteString(" " + dash)
		}
		out.Months = append(out.Months, barClass(m.Count))
	}
	out.Label = label.String()
	return out
}

// barClasses are made once: 2,000 sites have 24,000 bars.
var barClasses = func() (all [101]string) {
	for percent := range all {
		level := "few"
		switch {
		case percent >= allKept:
			level = "all"
		case percent >= mostlyKept:
			level = "most"
		}
		all[percent] = "b" + strconv.Itoa(percent/10) + " " + level
	}
	return all
}()

func barClass(c forms.Count) string {
	percent, ok := c.Percent()
	if !ok {
		return "b0 none"
	}
	return barClasses[percent]
}

// month writes a month: Jan 2026.
func (k ink) month(month int32) string {
	return k.list("office.day.mon", int(month%12)) + "\u00a0" + strconv.Itoa(int(month/12))
}
