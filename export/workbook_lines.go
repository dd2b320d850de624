package export

import (
	"strings"

	"tripwell/forms"
	"tripwell/store"
)

// moreLines reads what the short sheets hold; the long ones are streamed.
func (src *WorkbookSource) moreLines(v *store.View, ask WorkbookAsk) error {
	codes := siteCodes(src.Sites)
	var err error
	if src.Instruments, err = v.Instruments(); err != nil {
		return err
	}
	src.Person = func(id string) store.Person {
		if p, ok := v.Person(id); ok {
			return p
		}
		return store.Person{ID: id}
	}
	refused, err := v.Refused()
	if err != nil {
		return err
	}
	for _, r := range refused {
		if code, ours := codes[r.Log]; ours || ask.Site == "" {
			src.Refusals = append(src.Refusals, RefusalLine{code, r})
		}
	}
	org, err := v.PlanRevisions("", "")
	if err != nil {
		return err
	}
	src.planLines("", org)
	devices := 0
	for _, site := range src.Sites {
		n, err := src.siteLines(v, site, ask)
		if err != nil {
			return err
		}
		devices += n
	}
	if len(src.Sites) > 1 {
		src.Samples = append(src.Samples, SampleLine{Devices: devices})
	}
	return nil
}

func (src *WorkbookSource) planLines(code string, list []store.Revision) {
	for _, r := range list {
		if r.Plan != nil {
			src.Plans = append(src.Plans, PlanLine{code, r})
		}
	}
}

// siteLines reads the short sheets' rows of one site; it gives how many devices are in service there.
func (src *WorkbookSource) siteLines(v *store.View, site store.Site, ask WorkbookAsk) (devices int, err error) {
	today := forms.DayOf(ask.Now.In(site.Location()))
	own, err := v.PlanRevisions(site.ID, "")
	if err != nil {
		return 0, err
	}
	src.planLines(site.Code, own)
	defects, err := v.Defects(store.DefectAsk{Site: site.ID, State: store.DefectsAll, On: today})
	if err != nil {
		return 0, err
	}
	for _, d := range defects {
		src.Defects = append(src.Defects, DefectLine{site, d})
	}
	if err := src.monthLines(v, site, ask, today); err != nil {
		return 0, err
	}
	gaps, p, err := v.ProtectionGaps(site.ID, today)
	if err != nil {
		return 0, err
	}
	for _, g := range gaps {
		by := ""
		if d, ok := p.Device(g.By); ok {
			by = strings.Join(nonEmpty(PlaceText(d.Place), TagText(d.Tag)), ", ")
		}
		src.Gaps = append(src.Gaps, GapLine{site, g, by})
	}
	for d, err := range v.Devices(site.ID) {
		if err != nil {
			return 0, err
		}
		if !d.Retired {
			devices++
		}
	}
	src.Samples = append(src.Samples, SampleLine{site, devices})
	return devices, nil
}

// complianceMonths is how many months Compliance goes back where no period is asked for.
const complianceMonths = 13

// monthLines sums what became of the dates by month.
func (src *WorkbookSource) monthLines(v *store.View, site store.Site, ask WorkbookAsk, today forms.Day) error {
	from, to := ask.From, ask.To
	if to == forms.NoDay || to > today {
		to = today
	}
	if from == forms.NoDay {
		from = forms.MonthStart(forms.MonthOf(to) - complianceMonths + 1)
	}
	if from > to {
		return nil
	}
	c, err := v.Compliance(store.ComplianceAsk{Site: site.ID, From: from, To: to, Known: forms.NoDay})
	if err != nil {
		return err
	}
	sums := map[int32]*forms.Count{}
	for _, r := range c.Rows {
		if sums[r.Month] == nil {
			sums[r.Month] = &forms.Count{}
		}
		sum := sums[r.Month]
		sum.InTime += r.InTime
		sum.Graced += r.Graced
		sum.Late += r.Late
		sum.Missed += r.Missed
		sum.NoAccess += r.NoAccess
		sum.Open += r.Open
	}
	for m := forms.MonthOf(from); m <= forms.MonthOf(to); m++ {
		if sum := sums[m]; sum != nil {
			src.Months = append(src.Months, MonthLine{site.Code, forms.MonthStart(m), *sum})
		}
	}
	return nil
}

func nonEmpty(texts ...string) (out []string) {
	for _, t := range texts {
		if t != "" {
			out = append(out, t)
		}
	}
	return out
}
