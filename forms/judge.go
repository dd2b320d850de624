package forms

import (
	"fmt"
	"slices"
)

// judging is one entry being judged.
type judging struct {
	facts
	findings []Finding
	seen     uint64          // codes already judged, by their place in codes
	missed   map[string]bool // conditions already reported missing
	ended    bool
}

// Judge judges an entry of a form under a limit set. It never refuses readings (Check does): what it cannot understand
// counts as not given, and what is required and not given makes the entry incomplete. The error is an *Error: a decision
// rule this judge does not know.
func Judge(form *Form, set *LimitSet, e Entry) (Verdict, error) {
	if set.Rule != "" && set.Rule != SimpleRule && set.Rule != GuardBandRule {
		return Verdict{}, invalid("limit_set", fmt.Sprintf(
			"The limit set %q decides by the rule %q, which this version does not know. Use a newer version, or a set whose rule is simple or guard-band.", set.ID, set.Rule))
	}
	j := judging{facts: factsOf(form, set, &e), findings: make([]Finding, 0, len(e.Readings)+2*len(e.Series)+4)}
	j.needs()
	j.fieldLimits()
	form.asks(func(a ask) bool { j.ask(a); return true })
	for i := range codes {
		j.code(i)
	}
	v := Verdict{Result: resultOf(j.findings), Findings: j.findings}
	if v.Result != Fail && j.nothingTested() {
		v.Result = NotTested
	}
	return v, nil
}

// needs reports what must be known of the device and is not.
func (j *judging) needs() {
	for _, name := range j.form.Needs {
		if j.field(name) == nil {
			j.miss(name, nil, "", "missing.of_device")
		}
	}
}

// fieldLimits judges fields of the device.
func (j *judging) fieldLimits() {
	for i := range j.set.Limits {
		l := &j.set.Limits[i]
		if l.Field == "" || !j.all(l.When) {
			continue
		}
		r := Reading{Value: j.field(l.Field)}
		if r.Value == nil {
			continue
		}
		j.limit(l, &Code{Code: l.Field, Unit: l.Unit}, &r)
	}
}

// ask judges what was answered to one question and reports what was not.
func (j *judging) ask(a ask) {
	i := placeOf(a.place, a.Reading)
	if i < 0 || !j.all(a.When) {
		return
	}
	j.code(i)
	if j.ended {
		return
	}
	if !j.barred(a.step) {
		j.required(a, i)
	}
	if len(a.Ends) > 0 {
		s, _ := j.answerAt(i).(string)
		j.ended = s != "" && slices.Contains(a.Ends, s)
	}
}

// code judges a reading of the entry and, in their order, those taken under conditions; each code once.
func (j *judging) code(i int) {
	if j.seen&(1<<i) != 0 {
		return
	}
	j.seen |= 1 << i
	if j.givenAt(i) {
		j.limits(i, j.at(i))
	}
	c := &codes[i]
	for k := range j.e.Series {
		r, ok := j.e.Series[k].Readings[c.Code]
		if !ok || !fits(c, &r) {
			continue
		}
		if r = settled(r); r.Missing == "" {
			j.item = &j.e.Series[k]
			j.limits(i, &r)
			j.item = nil
		}
	}
}

// limits holds a reading against every limit on it, must before watch.
func (j *judging) limits(place int, r *Reading) {
	for _, l := range j.set.on(place) {
		if j.all(l.When) {
			j.limit(l, &codes[place], r)
		}
	}
}

// limit adds the finding of one limit on one reading.
func (j *judging) limit(l *Limit, c *Code, r *Reading) {
	a := j.apply(l, r)
	f := Finding{Reading: c.Code, Unit: a.Unit, Limit: a.Limit, ScaledMA: a.ScaledMA, Level: l.Level, Source: l.Source}
	unit := c.Unit
	if a.Unit != "" {
		unit = a.Unit
	}
	f.Value = rawValue(r, c.Unit, unit)
	if j.item != nil {
		f.At = j.item.At
	}
	if a.Lacks != "" {
		j.miss(a.Lacks, f.At, "", "")
	}
	if a.Text != "" && !(a.Lacks != "" && r.NoTrip) {
		f.Verdict, f.Text = NotJudged, a.Text
	} else {
		j.decide(l, c, r, &a, unit, &f)
	}
	j.findings = append(j.findings, f)
}

// decide gives a finding its verdict, and its text where that is not a pass.
func (j *judging) decide(l *Limit, c *Code, r *Reading, a *Applied, unit string, f *Finding) {
	outcome, text := j.outcome(l, c, r, a, unit)
	figure, isFigure := figureOf(r, c.Unit, unit)
	isFigure = isFigure && a.Limit != nil && l.Level == Must
	if isFigure {
		j.weigh(c, r, a, figure, unit, f)
	}
	switch {
	case outcome == inside && !isFigure:
		f.Verdict = Pass
		return
	case outcome == inside:
		if f.Verdict, f.Text = j.guard(l, r, a, f, figure, outcome); f.Verdict == "" {
			f.Verdict = Pass
		}
		return
	case l.Level == WatchOnly:
		f.Verdict = Watch
	case outcome == unproven:
		f.Verdict = ConditionalFail
	case outcome == low && (l.Loads || a.low):
		f.Verdict, f.Severity, text = Fail, Nuisance, "limit.trips_low"
		if j.answer("loads_disconnected") == "no" {
			f.Verdict, f.Severity, text = Watch, "", "limit.trips_low_with_loads"
		} else if verdict, why := j.guard(l, r, a, f, figure, outcome); isFigure && verdict != "" {
			f.Verdict, text = verdict, why
		}
	default:
		f.Verdict, f.Severity = Fail, l.Severity
		if a.NoTrip {
			text = "limit.must_not_trip"
		} else if verdict, why := j.excused(l, r, a, f, figure, outcome); isFigure && verdict != "" {
			f.Verdict, f.Severity, text = verdict, "", why
		}
	}
	f.Text = text
}

// outcome is what a reading proves of a limit, and the text that goes with it.
func (j *judging) outcome(l *Limit, c *Code, r *Reading, a *Applied, unit string) (outcome int, text string) {
	outcome, text = other, l.Text
	switch {
	case a.NoTrip:
		outcome = proveNoTrip(r)
	case a.OverRange:
		if outcome = inside; r.Above != nil {
			outcome = high
		}
	case a.Lacks != "": // it did not trip, at nobody says what current
		outcome = unproven
	case a.Limit != nil:
		outcome = prove(a.Limit, r, c.Unit, unit)
	}
	if special, ok := l.Texts[textOf(r)]; ok {
		text = special
	}
	switch {
	case l.Gauge != nil:
		var why string
		if outcome, why = gaugeProof(l, j.gauge(), outcome); why != "" {
			text = why
		}
	case outcome == unproven && j.currentInDoubt(a):
		text = "limit.current_in_doubt"
	case outcome == unproven && r.Below != nil:
		text = "limit.not_proven"
	case outcome == unproven:
		text = "limit.stopped_before"
	}
	return outcome, text
}

// excused gives what a figure outside its limit is instead of a fail, "" where it is one. The instrument's doubt comes
// first; the ramp of its current speaks only for what lies beyond that.
func (j *judging) excused(l *Limit, r *Reading, a *Applied, f *Finding, figure float64, outcome int) (verdict, text string) {
	if outcome == high && j.currentInDoubt(a) && (r.Above != nil || j.set.Rule == GuardBandRule) {
		return ConditionalFail, "limit.current_in_doubt"
	}
	if verdict, text = j.guard(l, r, a, f, figure, outcome); verdict != "" {
		return verdict, text
	}
	if outcome == high && l.Ramp != "" && a.Limit.Max != nil && j.rampExplains(r, *a.Limit.Max) {
		return ConditionalFail, "limit.ramp_over_reads"
	}
	return "", ""
}

func textOf(r *Reading) string { s, _ := r.Text(); return s }

// rampExplains reports whether a device inside the set's most could show this current on the instrument's ramp.
func (j *judging) rampExplains(r *Reading, limit float64) bool {
	rate := j.e.Given.Ramp.Rate()
	if rate <= 0 {
		return false
	}
	most := RampMA(limit, rate)
	if r.Above != nil {
		return *r.Above < most
	}
	v, ok := r.Float()
	return ok && v <= most
}

// nothingTested reports that a reason was given for what is missing and no test of the device was made, or that the
// circuit ahead of a dead device is dead.
func (j *judging) nothingTested() bool {
	reason, dead, tested := false, false, false
	note := func(code string, r Reading) {
		r = settled(r)
		i, ok := codeAt[code]
		if !ok {
			return
		}
		reason = reason || r.Missing != ""
		dead = dead || r.Missing == "circuit-dead"
		tested = tested || codes[i].Test && r.Given() && fits(&codes[i], &r)
	}
	for code, r := range j.e.Readings {
		note(code, r)
	}
	for i := range j.e.Series {
		for code, r := range j.e.Series[i].Readings {
			note(code, r)
		}
	}
	if dead && j.answer("found") == "no-power" {
		return true
	}
	return reason && !tested && resultOf(j.findings) == Incomplete
}
