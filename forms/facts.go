package forms

// facts answers what conditions and limits ask of one entry, seen under one item of its series (nil: none).
type facts struct {
	form *Form
	set  *LimitSet
	e    *Entry
	item *SeriesReading
}

// fits reports whether a reading says something its code can say. One that does not is taken as not given: what cannot
// be understood never passes.
func fits(c *Code, r *Reading) bool {
	switch v := r.Value.(type) {
	case float64:
		return c.Type == TypeNumber
	case string:
		return c.Type != TypeNumber && v != ""
	case nil:
		return r.Missing != "" || c.Type == TypeNumber && r.Given()
	}
	return false
}

// settled gives a reading as it is judged: the answer "not-testable" is a missing reading with that reason.
func settled(r Reading) Reading {
	if r.Value == "not-testable" {
		return Reading{Missing: "not-testable"}
	}
	return r
}

// reading gives a reading under the item first, then of the entry.
func (f *facts) reading(code string) (Reading, bool) {
	i, ok := codeAt[code]
	if !ok {
		return Reading{}, false
	}
	c := &codes[i]
	if f.item != nil {
		if r, ok := f.item.Readings[code]; ok && fits(c, &r) {
			return settled(r), true
		}
		if v, ok := f.item.At[code]; ok {
			if r := (Reading{Value: v}); fits(c, &r) {
				return r, true
			}
		}
	}
	r, ok := f.e.Readings[code]
	return settled(r), ok && fits(c, &r)
}

// given reports whether a reading has a value or a bound.
func (f *facts) given(code string) bool {
	r, ok := f.reading(code)
	return ok && r.Missing == ""
}

// boundMark stands for "has a bound" where a condition asks for a value: it is not missing and equals nothing.
const boundMark = ""

// answer gives the value of a reading for a condition: float64, string or nil. No waveform is ac; whether loads were
// unplugged may come from what is given.
func (f *facts) answer(code string) any {
	if r, ok := f.reading(code); ok && r.Missing == "" {
		if r.Value == nil {
			return boundMark
		}
		return r.Value
	}
	switch code {
	case "waveform":
		return "ac"
	case "loads_disconnected":
		switch f.e.Given.Loads {
		case "connected":
			return "no"
		case "disconnected":
			return "yes"
		}
	}
	return nil
}

// number gives a reading's measured value.
func (f *facts) number(code string) (float64, bool) {
	v, ok := f.answer(code).(float64)
	return v, ok
}

// field gives a field of the device or of what else is given: float64, string or nil where it is not known.
func (f *facts) field(name string) any {
	if v := f.givenField(name); v != nil {
		return v
	}
	if v := plain(f.e.Given.Fields[name]); v != nil {
		return v
	}
	if f.set != nil {
		return plain(f.set.Assume[name])
	}
	return nil
}

func (f *facts) givenField(name string) any {
	g := &f.e.Given
	switch name {
	case "kind":
		if g.Kind == "" && f.form != nil && len(f.form.Kinds) > 0 {
			return f.form.Kinds[0]
		}
		return word(g.Kind)
	case "rated_residual_ma":
		return figure(g.RatedResidualMA)
	case "equipment_ground":
		return word(g.EquipmentGround)
	case "supply":
		return word(g.Supply)
	case "gauge":
		return word(g.Gauge)
	case "waveform":
		return word(g.Waveform)
	case "rating_a":
		return figure(g.RatingA)
	case "nominal_v":
		return figure(g.NominalV)
	case "faces":
		return figure(float64(g.Faces))
	case "delayed":
		if g.Delayed {
			return "yes"
		}
	}
	return nil
}

func word(s string) any {
	if s == "" {
		return nil
	}
	return s
}

func figure(v float64) any {
	if v == 0 {
		return nil
	}
	return v
}

// plain makes a field of any JSON value: yes/no of true/false, nil of what no condition can name.
func plain(v any) any {
	switch v := v.(type) {
	case bool:
		if v {
			return "yes"
		}
		return "no"
	case int:
		return float64(v)
	case float64, string:
		return v
	}
	return nil
}

func (f *facts) holds(c *Condition) bool {
	if c.Field != "" {
		return c.holds(f.field(c.Field))
	}
	return c.holds(f.answer(c.Reading))
}

// all reports whether every condition holds; none at all hold.
func (f *facts) all(conditions []Condition) bool {
	for i := range conditions {
		if !f.holds(&conditions[i]) {
			return false
		}
	}
	return true
}

// closed reports whether a step is closed.
func (f *facts) closed(s *Step) bool {
	for i := range s.ClosedWhen {
		if f.holds(&s.ClosedWhen[i]) {
			return true
		}
	}
	return !f.all(s.ClosedUnless)
}
