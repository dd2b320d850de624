package store

import (
	"slices"

	"tripwell/forms"
)

// VisitAsk says what a visit of a site is to clear.
type VisitAsk struct {
	Site            string
	Day             forms.Day // of the visit; states are those of this day
	Until           forms.Day // last due day of the tests taken along; NoDay: what is overdue or due by the day itself
	Task            string    // "" = all
	Building, Floor string    // "" = all
	Most            float64   // minutes of one round
}

// Visit is what waits at a site on a day, and the fewest rounds that clear it.
type Visit struct {
	Site      Site
	Stops     []VisitStop // walking order
	Starts    []int       // where each round begins in Stops
	Minutes   float64
	Overdue   int          // of the stops, on the day
	OnRounds  int          // tests left out because an open round has them
	Defects   []Defect     // open ones: a round does not clear them, a repair does
	Expired   []Instrument // whose certificate ends before the day
	Gaps      []Gap        // records that never came
	Pace      map[string]Pace
	Buildings []string
	Floors    []string
}

// VisitStop is one test of a visit. An instrument test that also meets the button's date stands for both.
type VisitStop struct {
	Device  DeviceRow
	Task    string
	Due     forms.Day
	State   string
	Minutes float64
	Also    []string // other tasks the same test meets
}

// Visit works out what a visit of a site on a day has to do.
func (v *View) Visit(ask VisitAsk) (Visit, error) {
	sv, err := v.siteNamed(ask.Site)
	if err != nil {
		return Visit{}, err
	}
	out := Visit{Site: sv.Site}
	if out.Pace, err = v.Pace(sv.ID); err != nil {
		return out, err
	}
	open, err := v.openStops(sv)
	if err != nil {
		return out, err
	}
	if ask.Until == forms.NoDay {
		ask.Until = ask.Day
	}
	rows, err := v.visitRows(sv, ask.Day)
	if err != nil {
		return out, err
	}
	for _, row := range rows {
		addOnce(&out.Buildings, row.Place.Building)
		addOnce(&out.Floors, row.Place.Floor)
		if ask.Building != "" && row.Place.Building != ask.Building || ask.Floor != "" && row.Place.Floor != ask.Floor {
			continue
		}
		out.take(row, ask, open)
	}
	minutes := make([]float64, len(out.Stops))
	for i, s := range out.Stops {
		minutes[i] = s.Minutes
	}
	out.Starts = forms.SplitWalk(minutes, ask.Most)
	return out, v.visitRest(sv, ask, &out)
}

func addOnce(list *[]string, s string) {
	if s != "" && !slices.Contains(*list, s) {
		*list = append(*list, s)
	}
}

// take adds what is due at a device.
func (out *Visit) take(row DeviceRow, ask VisitAsk, open map[string]bool) {
	var due []Due
	for _, d := range row.Due {
		if d.Due != forms.NoDay && d.Due <= ask.Until && (ask.Task == "" || d.Task == ask.Task) {
			due = append(due, d)
		}
	}
	measured := slices.ContainsFunc(due, func(d Due) bool { return d.Task == "instrument" })
	for _, d := range due {
		switch {
		case open[row.ID+"/"+d.Task] || d.Task == "button" && open[row.ID+"/instrument"]:
			out.OnRounds++
			continue
		case d.Task == "button" && measured:
			continue // the instrument's form presses TEST too
		}
		stop := VisitStop{Device: row, Task: d.Task, Due: d.Due, State: d.State, Minutes: out.Pace[d.Task].Minutes}
		if d.Task == "instrument" {
			for _, other := range due {
				if other.Task == "button" {
					stop.Also = append(stop.Also, other.Task)
				}
			}
		}
		if d.State == "overdue" {
			out.Overdue++
		}
		out.Minutes += stop.Minutes
		out.Stops = append(out.Stops, stop)
	}
}

// openStops are the tests that stand on rounds not yet ended, and were not done on them.
func (v *View) openStops(sv *siteView) (map[string]bool, error) {
	open := map[string]bool{}
	err := v.each(sv, ofRound, func(n uint32, t *thing) error {
		r, err := v.round(sv, n, t)
		if err != nil || r.State != RoundMade && r.State != RoundWalking {
			return err
		}
		for _, s := range r.Stops {
			if s.State != StopDone {
				open[s.Device+"/"+s.Task] = true
			}
		}
		return nil
	})
	return open, err
}

// visitRows gives the devices in use in walking order, with their states on a day.
func (v *View) visitRows(sv *siteView, on forms.Day) ([]DeviceRow, error) {
	if err := v.loadSite(sv); err != nil {
		return nil, err
	}
	var rows []DeviceRow
	err := v.eachDevice(sv, func(_ uint32, t *thing, w *work) error {
		if t.value("#retired") != nil {
			return nil
		}
		row, err := v.row(sv, t, w, on)
		rows = append(rows, row)
		return err
	})
	sortWalking(rows, func(r DeviceRow) (Place, string) { return r.Place, r.ID })
	return rows, err
}

// visitRest adds what is no test: open defects, certificates that end, records that never came.
func (v *View) visitRest(sv *siteView, ask VisitAsk, out *Visit) error {
	defects, err := v.Defects(DefectAsk{Site: sv.ID, On: ask.Day})
	if err != nil {
		return err
	}
	for _, d := range defects {
		if p := d.Device.Place; (ask.Building == "" || p.Building == ask.Building) && (ask.Floor == "" || p.Floor == ask.Floor) {
			out.Defects = append(out.Defects, d)
		}
	}
	instruments, err := v.Instruments()
	if err != nil {
		return err
	}
	for _, i := range instruments {
		if !i.Retired && i.CalibrationDue != forms.NoDay && i.CalibrationDue < ask.Day {
			out.Expired = append(out.Expired, i)
		}
	}
	gaps, err := v.Gaps()
	for _, g := range gaps {
		if g.Log == sv.ID {
			out.Gaps = append(out.Gaps, g)
		}
	}
	return err
}
