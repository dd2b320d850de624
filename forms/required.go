package forms

// required reports an answer that is required and missing, under every condition it is required under.
func (j *judging) required(a ask, i int) {
	bySeries := false
	if a.Series && j.form.Series != nil {
		for i := range j.form.Series.Conditions {
			c := &j.form.Series.Conditions[i]
			if c.AnyOf[0] != a.Reading || !j.all(c.When) {
				continue
			}
			bySeries = true
			if !j.taken(c) {
				j.missUnder(c)
			}
		}
	}
	if !a.Required && !(a.Expected && j.saidMissing(i)) || bySeries || j.givenAt(i) || a.Or != "" && j.givenAnywhere(a.Or) || a.Series && j.givenAnywhere(a.Reading) {
		return
	}
	if a.Reading == "test_current_ma" {
		if _, _, known := j.testCurrent(); known {
			return
		}
	}
	reason := ""
	if r := j.at(i); r != nil {
		reason = r.Missing
	}
	j.miss(a.Reading, nil, reason, "")
}

// saidMissing reports whether the entry says of a reading that it was not taken.
func (j *judging) saidMissing(i int) bool {
	r := j.at(i)
	return r != nil && r.Missing != ""
}

// givenAnywhere reports whether a reading is given in the entry or under any condition.
func (j *judging) givenAnywhere(code string) bool {
	if j.given(code) {
		return true
	}
	for i := range j.e.Series {
		if r, ok := j.e.Series[i].Readings[code]; ok && r.Given() {
			return true
		}
	}
	return false
}

// taken reports whether one of a condition's readings was taken at that condition, in the series or beside it.
func (j *judging) taken(c *SeriesCondition) bool {
	for _, code := range c.AnyOf {
		for i := range j.e.Series {
			item := &j.e.Series[i]
			if r, ok := item.Readings[code]; ok && r.Given() && fits(&codes[codeAt[code]], &r) && matches(item.At, c.At) {
				return true
			}
		}
		if j.given(code) && j.baseAt(c.At) {
			return true
		}
	}
	return false
}

// baseAt reports whether the entry's own readings were taken at the conditions ("multiple":1 among the readings).
func (j *judging) baseAt(at map[string]any) bool {
	for code, want := range at {
		if r, ok := j.e.Readings[code]; !ok || r.Value != want {
			return false
		}
	}
	return true
}

// matches reports whether an item was taken at all conditions wanted.
func matches(at, want map[string]any) bool {
	for code, v := range want {
		if at[code] != v {
			return false
		}
	}
	return true
}

// missUnder reports a reading missing under a condition, with the reason given there or for the reading as a whole.
func (j *judging) missUnder(c *SeriesCondition) {
	reason := ""
	for _, code := range c.AnyOf {
		if r := j.e.Readings[code]; reason == "" {
			reason = r.Missing
		}
		for i := range j.e.Series {
			if r := j.e.Series[i].Readings[code]; r.Missing != "" && matches(j.e.Series[i].At, c.At) {
				reason = r.Missing
			}
		}
	}
	j.findings = append(j.findings, Finding{Reading: c.AnyOf[0], At: c.At, Verdict: Missing, Level: Must, Reason: reason, Text: missingText(reason)})
}

func missingText(reason string) string {
	if reason == "" {
		reason = "none"
	}
	return "missing." + reason
}

// miss reports once that something is missing.
func (j *judging) miss(code string, at map[string]any, reason, text string) {
	if at == nil {
		if j.missed[code] {
			return
		}
		if j.missed == nil {
			j.missed = map[string]bool{}
		}
		j.missed[code] = true
	}
	if text == "" {
		text = missingText(reason)
	}
	j.findings = append(j.findings, Finding{Reading: code, At: at, Verdict: Missing, Level: Must, Reason: reason, Text: text})
}
