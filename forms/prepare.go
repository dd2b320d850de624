package forms

import "encoding/json"

// Judging looks readings up by their place in codes. Decoding a form or a limit set looks the places up once; one that
// was put together by hand is judged the same, only slower.

// placeOf gives a code's place in codes from what was looked up before, else by name; -1 for none.
func placeOf(place int, code string) int {
	if place > 0 {
		return place - 1
	}
	if i, ok := codeAt[code]; ok {
		return i
	}
	return -1
}

func prepare(conditions []Condition) {
	for i := range conditions {
		conditions[i].place = placeOf(0, conditions[i].Reading) + 1
	}
}

// UnmarshalJSON decodes a form. Unknown members are left for newer programs.
func (f *Form) UnmarshalJSON(b []byte) error {
	type plainForm Form
	if err := json.Unmarshal(b, (*plainForm)(f)); err != nil {
		return err
	}
	for i := range f.Steps {
		step := &f.Steps[i]
		prepare(step.ClosedUnless)
		prepare(step.ClosedWhen)
		for k := range step.Asks {
			prepare(step.Asks[k].When)
			step.Asks[k].place = placeOf(0, step.Asks[k].Reading) + 1
		}
	}
	if f.Series != nil {
		for i := range f.Series.Conditions {
			prepare(f.Series.Conditions[i].When)
		}
	}
	return nil
}

// UnmarshalJSON decodes a limit set. Unknown members are left for newer programs.
func (s *LimitSet) UnmarshalJSON(b []byte) error {
	type plainSet LimitSet
	if err := json.Unmarshal(b, (*plainSet)(s)); err != nil {
		return err
	}
	s.byCode = make([][]*Limit, len(codes))
	for i := range s.Limits {
		l := &s.Limits[i]
		l.fixed = l.bounds()
		prepare(l.When)
		for k := range l.Void {
			prepare(l.Void[k].When)
		}
	}
	for i := range codes {
		s.byCode[i] = s.sortOut(codes[i].Code)
	}
	return nil
}

// on gives the limits on the code at a place, must before watch.
func (s *LimitSet) on(place int) []*Limit {
	if s.byCode != nil {
		return s.byCode[place]
	}
	return s.sortOut(codes[place].Code)
}

func (s *LimitSet) sortOut(code string) []*Limit {
	var out []*Limit
	for _, level := range [...]string{Must, WatchOnly} {
		for i := range s.Limits {
			if l := &s.Limits[i]; l.Reading == code && l.Level == level {
				out = append(out, l)
			}
		}
	}
	return out
}
