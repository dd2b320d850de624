package store

import (
	"bytes"
	"cmp"
	"encoding/json"
	"slices"
	"strings"
	"time"

	"tripwell/forms"
	"tripwell/store/record"
)

// Site is a site with its merged fields.
type Site struct {
	ID, Code, Name, Zone, Address string
	Standard                      string // NEC | IEC
	Conflicts                     []Conflict
}

// Location loads the site's time zone, UTC where it is unknown.
func (s Site) Location() *time.Location { return location(s.Zone) }

// SiteSums counts one site on one day.
type SiteSums struct {
	Site     Site
	Devices  int       // not retired
	Overdue  int       // dates, not devices
	Paused   int       // dates of which a pause holds the day
	Year     []Month   // the twelve months that end with the day's, as known now
	DueSoon  int       // dates within the 31 days after the day asked for, the day included
	Failed   int       // devices with an open defect
	NextDay  forms.Day // the earliest date that is overdue, else the earliest not yet passed; NoDay for none
	NextTask string    // of that date; of several the first by name
}

func siteOf(id string, t *thing) Site {
	return Site{ID: id, Code: t.text("code"), Name: t.text("name"), Zone: t.text("zone"), Address: t.text("address"), Standard: t.text("standard")}
}

// Sites gives the registered sites of the scope, by code.
func (v *View) Sites() ([]Site, error) {
	every, err := v.everySite()
	if err != nil {
		return nil, err
	}
	out := make([]Site, 0, len(every))
	for _, sv := range byCode(every) {
		out = append(out, sv.Site)
	}
	return out, nil
}

// byCode puts sites in the order of their codes.
func byCode(sites []*siteView) []*siteView {
	sorted := slices.Clone(sites)
	slices.SortFunc(sorted, func(a, b *siteView) int {
		if c := strings.Compare(a.Code, b.Code); c != 0 {
			return c
		}
		return strings.Compare(a.ID, b.ID)
	})
	return sorted
}

// Site finds a site by its id or its code (in any letter case), with the values that lost to concurrent ones. Of two
// sites that took the same code, the one with the smaller id is found.
func (v *View) Site(idOrCode string) (Site, error) {
	sv, err := v.siteNamed(idOrCode)
	if err != nil {
		return Site{}, err
	}
	s := sv.Site
	s.Conflicts, err = v.conflicts(sv, ofSite, sv.id)
	return s, err
}

func (v *View) siteNamed(idOrCode string) (*siteView, error) {
	if record.IsID(idOrCode) {
		sv, err := v.open(idOrCode)
		if err == nil && sv.Code == "" {
			err = errNoSite
		}
		return sv, err
	}
	code := siteCode(idOrCode)
	if code == "" {
		return nil, errNoSite
	}
	var found *siteView
	prefix := append([]byte(code), 0)
	c := v.bucket(bktCode).Cursor()
	for k, _ := c.Seek(prefix); k != nil && bytes.HasPrefix(k, prefix); k, _ = c.Next() {
		sv, ok, err := v.openOrd(read32(k[len(prefix):]))
		if err != nil {
			return nil, err
		}
		if ok && (found == nil || sv.ID < found.ID) {
			found = sv
		}
	}
	if found == nil {
		return nil, errNoSite
	}
	return found, nil
}

// plainText gives a field's value as people read it; "" where it was cleared.
func plainText(v json.RawMessage) string {
	if v = present(v); len(v) == 0 {
		return ""
	}
	if v[0] == '"' {
		return jsonText(v)
	}
	var list []string
	if v[0] == '[' && json.Unmarshal(v, &list) == nil {
		return strings.Join(list, ", ")
	}
	return string(v)
}

// Month says what became of the dates that count in one month (forms.Obligation.Counts).
type Month struct {
	Month int32 // forms.MonthOf
	forms.Count
}

// SiteSums counts a site as it stands on a day.
func (v *View) SiteSums(site string, on forms.Day) (SiteSums, error) {
	sv, err := v.siteNamed(site)
	if err != nil {
		return SiteSums{}, err
	}
	return v.sumSite(sv, on)
}

// SitesSums counts every site of the scope on its own today, by code.
func (v *View) SitesSums() ([]SiteSums, error) {
	sites, err := v.sitesAsked("")
	if err != nil {
		return nil, err
	}
	out := make([]SiteSums, 0, len(sites))
	for _, sv := range byCode(sites) {
		sums, err := v.sumSite(sv, sv.today)
		if err != nil {
			return nil, err
		}
		out = append(out, sums)
	}
	return out, nil
}

func (v *View) sumSite(sv *siteView, on forms.Day) (SiteSums, error) {
	sums := SiteSums{Site: sv.Site, NextDay: forms.NoDay}
	devices := map[uint32]bool{}
	err := v.scan(bktOpen, put32(nil, sv.ord), func(_, row []byte) error {
		devices[read32(row)] = true
		return nil
	})
	if err != nil {
		return sums, err
	}
	sums.Failed = len(devices)
	return sums, v.sumDates(sv, on, &sums)
}

// sumDates counts a site's devices and dates, and the months behind it: two short scans, whatever its size.
func (v *View) sumDates(sv *siteView, on forms.Day, sums *SiteSums) error {
	u := unpacker{b: v.bucket(bktSiteLog).Get(sv.id[:])}
	u.uint()
	u.uint()
	sums.Devices = int(u.uint())
	last := forms.MonthOf(on)
	sums.Year = make([]Month, 12)
	for i := range sums.Year {
		sums.Year[i].Month = last - 11 + int32(i)
	}
	first := sums.Year[0].Month
	month := func(m int32) *forms.Count {
		if m < first || m > last {
			return new(forms.Count)
		}
		return &sums.Year[m-first].Count
	}
	prefix := put32(nil, sv.ord)
	c := v.bucket(bktKeep).Cursor()
	for k, row := c.Seek(prefix); k != nil && bytes.HasPrefix(k, prefix); k, row = c.Next() {
		if err := eachKept(row, first, func(m int32, kept *monthKept) { kept.count(month(m)) }); err != nil {
			return err
		}
	}
	next := nextDate{day: forms.NoDay}
	ahead := max(on+31, forms.MonthStart(last+1)-1)
	c = v.bucket(bktSum).Cursor()
	for k, n := c.Seek(prefix); k != nil && bytes.HasPrefix(k, prefix); k, n = c.Next() {
		d, u := readSum(k), unpacker{b: n}
		if next.day != forms.NoDay && next.order < 2 && d.Due > max(ahead, next.day) {
			break
		}
		count, state := int(u.uint()), d.State(on)
		next.take(d, state)
		switch {
		case state == forms.Paused:
			sums.Paused += count
		case state == forms.Overdue:
			sums.Overdue += count
		case d.Due >= on && d.Due <= on+31:
			sums.DueSoon += count
		}
		if d.Due <= ahead {
			for o := range d.Unmet(on) {
				month(forms.MonthOf(o.Due)).Add(forms.Obligation{DueDate: o, Met: forms.NoDay}.Outcome(on), count)
			}
		}
	}
	sums.NextDay, sums.NextTask = next.day, next.task
	return v.scan(bktAlso, prefix, func(k, n []byte) error {
		d, u := readSum(k), unpacker{b: n}
		by := int(u.int())
		for o := range d.Unmet(on) {
			month(forms.MonthOf(o.Due)).Add(forms.Obligation{DueDate: o, Met: forms.NoDay}.Outcome(on), by)
		}
		return u.err()
	})
}

// nextDate finds the date a site is to look at next: one that is overdue comes before one that has not passed, and that
// before one within its grace.
type nextDate struct {
	day   forms.Day
	task  string
	order int
}

func (d *nextDate) take(date forms.DueDate, state string) {
	order := 1
	switch state {
	case forms.Overdue:
		order = 0
	case forms.InGrace:
		order = 2
	case forms.Paused:
		return
	}
	if d.day == forms.NoDay || cmp.Or(cmp.Compare(order, d.order), cmp.Compare(date.Due, d.day), cmp.Compare(date.Task, d.task)) < 0 {
		*d = nextDate{date.Due, date.Task, order}
	}
}

// MonthTally counts the results of one task in one month of test days.
type MonthTally struct {
	Year, Month int
	Task        string
	Results     map[string]int // by result; withdrawn entries are not counted
}

// Tallies gives a site's results by month and task, oldest first.
func (v *View) Tallies(site string) ([]MonthTally, error) {
	sv, err := v.siteNamed(site)
	if err != nil {
		return nil, err
	}
	if v.scope.Period != nil {
		return v.talliesShown(sv)
	}
	var out []MonthTally
	prefix := put32(nil, sv.ord)
	c := v.bucket(bktTally).Cursor()
	for k, row := c.Seek(prefix); k != nil && bytes.HasPrefix(k, prefix); k, row = c.Next() {
		t, err := unpackTally(row)
		if err != nil {
			return nil, err
		}
		month := int(read32(k[4:]))
		m := MonthTally{Year: month / 12, Month: month%12 + 1, Task: string(k[8:]), Results: map[string]int{}}
		for code, n := range t {
			if n > 0 {
				m.Results[resultCodes[code]] = int(n)
			}
		}
		out = append(out, m)
	}
	return out, nil
}

// talliesShown counts the entries of a scope with a period, which need not end with a month.
func (v *View) talliesShown(sv *siteView) ([]MonthTally, error) {
	type monthOf struct {
		month int32
		task  string
	}
	counts := map[monthOf]map[string]int{}
	for e, err := range v.SiteEntries(sv.ID, forms.NoDay, forms.NoDay) {
		if err != nil {
			return nil, err
		}
		if e.Withdrawn != nil {
			continue
		}
		key := monthOf{forms.MonthOf(e.Day), e.Task}
		if counts[key] == nil {
			counts[key] = map[string]int{}
		}
		counts[key][e.Verdict.Result]++
	}
	var out []MonthTally
	for key, results := range counts {
		out = append(out, MonthTally{Year: int(key.month) / 12, Month: int(key.month)%12 + 1, Task: key.task, Results: results})
	}
	slices.SortFunc(out, func(a, b MonthTally) int {
		return cmp.Or(cmp.Compare(a.Year, b.Year), cmp.Compare(a.Month, b.Month), cmp.Compare(a.Task, b.Task))
	})
	return out, nil
}
