package forms

// Applied is a limit as it stands for one entry before its reading is known: what the scale under a number shows.
type Applied struct {
	Limit     *Bounds `json:"limit,omitempty"`
	NoTrip    bool    `json:"no_trip,omitzero"`    // must not trip at all under these conditions
	OverRange bool    `json:"over_range,omitzero"` // only "above" is outside
	Unit      string  `json:"unit,omitempty"`      // where not the code's own unit
	Level     string  `json:"level"`
	Source    string  `json:"source"`
	Text      string  `json:"text,omitempty"` // why nothing is judged; Limit is then nil
	Lacks     string  `json:"lacks,omitempty"`
	// ScaledMA is the test current the limit was computed at, where it was scaled to the line voltage.
	ScaledMA *float64 `json:"scaled_ma,omitempty"`
	low      bool     // a trip here is a low trip current
	current  float64  // test current in mA the curve was read at; 0 elsewhere
}

// LimitsFor gives the limits of a reading under an entry's other readings (the trip-time limit at the test current), must
// before watch. at is nil or the conditions of a series item.
func LimitsFor(form *Form, set *LimitSet, e *Entry, reading string, at map[string]any) []Applied {
	place, ok := codeAt[reading]
	if !ok {
		return nil
	}
	f := factsOf(form, set, e)
	if at != nil {
		f.item = &SeriesReading{At: at}
		for i := range e.Series {
			if matches(e.Series[i].At, at) {
				f.item = &e.Series[i]
			}
		}
	}
	r := f.at(place)
	if r == nil {
		r = &Reading{}
	}
	var out []Applied
	for _, l := range set.on(place) {
		if f.all(l.When) {
			out = append(out, f.apply(l, r))
		}
	}
	return out
}

// apply finds the bounds a limit sets under these facts. r is the reading, for the unit it was read in.
func (f *facts) apply(l *Limit, r *Reading) Applied {
	a := Applied{Level: l.Level, Source: l.Source}
	for i := range l.Void {
		if f.all(l.Void[i].When) {
			a.Text = l.Void[i].Text
			return a
		}
	}
	switch {
	case l.Flag:
	case l.OverRange:
		a.OverRange = true
	case l.PerLength != nil:
		f.applyLength(l, &a)
	case l.Curve != "":
		f.applyCurve(&a)
	case l.OfRated != nil || l.OverRated != 0:
		f.applyRated(l, &a)
	case l.ByMultiple != nil:
		f.applyMultiple(l, &a)
	default:
		a.Limit = l.bounds()
		if b, ok := l.ByUnit[r.Unit]; ok && r.Value != nil {
			a.Limit, a.Unit = &b, r.Unit
		}
		if l.Bond != "" && !f.bondJudged() {
			a.Limit, a.Text = nil, "limit.bond_not_judged"
		}
	}
	return a
}

// bounds gives the limit's own figures; everyone shares them.
func (l *Limit) bounds() *Bounds {
	if l.fixed != nil {
		return l.fixed
	}
	return &Bounds{Min: l.Min, Max: l.Max, OneOf: l.OneOf}
}

func (f *facts) applyCurve(a *Applied) {
	current, scaled, ok := f.testCurrent()
	if scaled {
		a.ScaledMA = &current
	}
	switch {
	case !ok:
		a.Lacks, a.Text = "test_current_ma", "limit.no_test_current"
	case current < classANoTripMA:
		a.NoTrip, a.low = true, true
	case current < classATripMA:
		a.Text = "limit.below_curve"
	case current > classALastMA:
		a.Text = "limit.above_curve"
	default:
		ms, _ := ClassATripMS(current)
		a.Limit, a.current = &Bounds{Max: &ms}, current
	}
}

func (f *facts) applyRated(l *Limit, a *Applied) {
	rated, ok := f.field("rated_residual_ma").(float64)
	if !ok {
		a.Lacks, a.Text = "rated_residual_ma", "limit.no_rating"
		return
	}
	a.Limit = &Bounds{}
	if l.OverRated != 0 {
		most := round9(l.OverRated / rated)
		a.Limit.Max = &most
		return
	}
	if l.OfRated.Min != nil {
		least := round9(*l.OfRated.Min * rated)
		a.Limit.Min = &least
	}
	if l.OfRated.Max != nil {
		most := round9(*l.OfRated.Max * rated)
		a.Limit.Max = &most
	}
}

func (f *facts) applyMultiple(l *Limit, a *Applied) {
	multiple, ok := f.number("multiple")
	if !ok {
		a.Lacks, a.Text = "multiple", "limit.no_multiple"
		return
	}
	for i := range l.ByMultiple {
		rung := &l.ByMultiple[i]
		if rung.Multiple != multiple {
			continue
		}
		if a.NoTrip = rung.NoTrip; !rung.NoTrip {
			a.Limit = &Bounds{Min: rung.Min, Max: rung.Max}
		}
		return
	}
	a.Text = "limit.multiple_outside"
}

// bondJudged reports whether a neutral-to-ground voltage near zero says anything: at 5 A or more, with a measured drop
// half of which (neutral's share) exceeds 0.5 V.
func (f *facts) bondJudged() bool {
	load, okLoad := f.number("load_a")
	drop, okDrop := f.number("voltage_drop_pct")
	volts, okVolts := f.number("voltage_v")
	return okLoad && okDrop && okVolts && load >= 5 && round9(drop*volts/200) > 0.5
}
