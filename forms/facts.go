package forms

// facts answers what conditions and limits ask of one entry, seen under one item of its series (nil: none).
type facts struct {
	form *Form
	set  *LimitSet
	e    *Entry
	item *SeriesReading
	base []Reading // the entry's readings that fit their codes, as they are judged
	of   [64]int8  // place in codes → place in base, from 1; 0 where there is none
}

// factsOf sorts an entry's readings out by code.
func factsOf(form *Form, set *LimitSet, e *Entry) facts {
	f := facts{form: form, set: set, e: e, base: make([]Reading, 0, len(e.Readings))}
	for code, r := range e.Readings {
		i, ok := codeAt[code]
		if !ok || !fits(&codes[i], &r) {
			continue
		}
		f.base = append(f.base, settled(r))
		f.of[i] = int8(len(f.base))
	}
	return f
}

// testCurrent gives the test current in mA. That of a tester with a fixed resistor is scaled to the measured line voltage:
// by its resistor where that is known, else by the voltage at which what it is marked with is true.
func (f *facts) testCurrent() (current float64, scaled, ok bool) {
	current, ok = f.number("test_current_ma")
	g := &f.e.Given
	if g.TestResistorOhm <= 0 && g.TestNominalV <= 0 {
		return current, false, ok
	}
	volts, measured := f.number("voltage_v")
	switch {
	case measured && g.TestResistorOhm > 0:
		return round9(1000 * volts / g.TestResistorOhm), true, true
	case measured && ok && g.TestNominalV > 0:
		return round9(current * volts / g.TestNominalV), true, true
	}
	return current, false, ok
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

// at gives the reading of the code at a place: under the item first, then of the entry; nil where there is none.
func (f *facts) at(place int) *Reading {
	if f.item != nil {
		c := &codes[place]
		if r, ok := f.item.Readings[c.Code]; ok && fits(c, &r) {
			r = settled(r)
			return &r
		}
		if v, ok := f.item.At[c.Code]; ok {
			if r := (Reading{Value: v}); fits(c, &r) {
				return &r
			}
		}
	}
	if k := f.of[place]; k > 0 {
		return &f.base[k-1]
	}
	return nil
}

// givenAt reports whether the reading of the code at a place has a value or a bound.
func (f *facts) givenAt(place int) bool {
	r := f.at(place)
	return r != nil && r.Missing == ""
}

// given reports whether a reading has a value or a bound.
func (f *facts) given(code string) bool {
	i, ok := codeAt[code]
	return ok && f.givenAt(i)
}

// boundMark stands for "has a bound" where a condition asks for a value: it is not missing and equals nothing.
const boundMark = ""

// answer gives the value of a reading for a condition: float64, string or nil. No waveform is ac; whether loads were
// unplugged may come from what is given.
func (f *facts) answer(code string) any {
	if i, ok := codeAt[code]; ok {
		return f.answerAt(i)
	}
	return nil
}

func (f *facts) answerAt(place int) any {
	if place < 0 {
		return nil
	}
	if r := f.at(place); r != nil && r.Missing == "" {
		if r.Value == nil {
			return boundMark
		}
		return r.Value
	}
	switch codes[place].Code {
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
	case "test_resistor_ohm":
		return figure(g.TestResistorOhm)
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
	return c.holds(f.answerAt(placeOf(c.place, c.Reading)))
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

// barred reports whether what is known forbids a step, so that nothing in it can be missed: closed by a fact, not only for
// want of an answer.
func (f *facts) barred(s *Step) bool {
	for i := range s.ClosedWhen {
		if f.holds(&s.ClosedWhen[i]) {
			return true
		}
	}
	for i := range s.ClosedUnless {
		if c := &s.ClosedUnless[i]; f.given(c.Reading) && !f.holds(c) {
			return true
		}
	}
	return false
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
