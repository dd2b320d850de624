package forms

import (
	"fmt"
	"maps"
	"math"
	"regexp"
	"slices"
	"strings"
)

// conditionCodes are what a series item may be taken at.
var conditionCodes = []string{"multiple", "phase_deg", "waveform", "face", "test_current_ma", "loads_disconnected"}

var faceName = regexp.MustCompile(`^[a-z][a-z0-9-]{0,31}$`)

// Check refuses what a form cannot take: unknown codes, answers no code has, figures that are no measurement. The error
// is an *Error whose Field is the path of what is wrong.
func Check(form *Form, e *Entry) error {
	if err := checkGiven(form, &e.Given); err != nil {
		return err
	}
	if err := checkReadings(e.Readings, "readings"); err != nil {
		return err
	}
	for i := range e.Series {
		if err := checkItem(&e.Series[i], fmt.Sprintf("series.%d", i)); err != nil {
			return err
		}
	}
	return nil
}

// checkReadings looks at every reading; of several faults it names the first by code.
func checkReadings(readings map[string]Reading, path string) error {
	bad := false
	for code, r := range readings {
		if checkReading(code, &r) != nil {
			bad = true
			break
		}
	}
	if !bad {
		return nil
	}
	for _, code := range slices.Sorted(maps.Keys(readings)) {
		r := readings[code]
		if err := checkReading(code, &r); err != nil {
			err.Field = path + "." + code
			return err
		}
	}
	return nil
}

func checkReading(code string, r *Reading) *Error {
	i, ok := codeAt[code]
	if !ok {
		return invalid("", fmt.Sprintf(`"%s" is no reading Tripwell knows. "tripwell forms" lists them.`, code))
	}
	c := &codes[i]
	if r.Missing != "" {
		if !slices.Contains(MissingReasons(), r.Missing) {
			return invalid("", fmt.Sprintf(`"%s" is no reason for a missing reading. Use one of: %s.`, r.Missing, strings.Join(MissingReasons(), ", ")))
		}
		return nil
	}
	if c.Type != TypeNumber {
		s, ok := r.Text()
		if ok && IsOwn(code) && len(c.Options) == 0 {
			return nil // its form says what may be answered
		}
		if !ok || !slices.Contains(c.Options, s) {
			return invalid("", fmt.Sprintf("%s is answered with one of: %s.", code, strings.Join(c.Options, ", ")))
		}
		return nil
	}
	return checkFigure(c, r)
}

func checkFigure(c *Code, r *Reading) *Error {
	if r.NoTrip && mayNotTrip(c.Code) {
		return nil
	}
	v, isNumber := r.Float()
	switch {
	case r.Above != nil:
		v = *r.Above
	case r.Below != nil:
		v = *r.Below
	case !isNumber:
		return invalid("", fmt.Sprintf("%s is a number in %s.", c.Code, c.Unit))
	}
	switch {
	case !isNumber && !c.Test:
		return invalid("", fmt.Sprintf("%s is a condition of the test, not a result: a bound says nothing. Give the figure.", c.Code))
	case math.IsNaN(v) || math.Abs(v) > maxMagnitude:
		return invalid("", textNumberRange)
	case v < 0:
		return invalid("", fmt.Sprintf("%s cannot be negative.", c.Code))
	}
	return checkTyped(c, r, v)
}

// checkTyped holds what was typed against the value, which is always in the code's own unit.
func checkTyped(c *Code, r *Reading, v float64) *Error {
	unit := r.Unit
	if unit == "" {
		unit = c.Unit
	}
	per, ok := perUnit(c.Unit, unit)
	if !ok {
		return invalid("", fmt.Sprintf(`%s is measured in %s; "%s" is no unit for it.`, c.Code, c.Unit, unit))
	}
	typed, ok := typedNumber(r.Typed)
	switch {
	case !ok && unit != c.Unit:
		return invalid("", fmt.Sprintf(`The value of %s is always in %s. With the unit "%s", give what was typed beside it and the value converted to %s.`, c.Code, c.Unit, unit, c.Unit))
	case ok && math.Abs(typed*per-v) > 0.001*v:
		return invalid("", fmt.Sprintf(`What was typed ("%s" %s) is not the value given in %s. Correct one of them.`, r.Typed, unit, c.Unit))
	}
	return nil
}

func checkItem(item *SeriesReading, path string) error {
	if len(item.At) == 0 {
		return invalid(path+".at", `Say under which conditions this was taken: {"at":{"multiple":5},"trip_time_ms":24}.`)
	}
	for _, name := range slices.Sorted(maps.Keys(item.At)) {
		if err := checkAt(name, item.At[name]); err != nil {
			err.Field = path + ".at." + name
			return err
		}
	}
	if len(item.Readings) == 0 {
		return invalid(path, `An item of series holds at least one reading beside "at".`)
	}
	return checkReadings(item.Readings, path)
}

func checkAt(name string, v any) *Error {
	if !slices.Contains(conditionCodes, name) {
		return invalid("", fmt.Sprintf(`"%s" is no condition a reading is taken at. Use one of: %s.`, name, strings.Join(conditionCodes, ", ")))
	}
	if name == "face" {
		if s, ok := v.(string); !ok || !faceName.MatchString(s) {
			return invalid("", `"face" is a short name in lower case, such as upper or lower.`)
		}
		return nil
	}
	return checkReading(name, &Reading{Value: v})
}

func checkGiven(form *Form, g *Given) error {
	if g.Kind != "" && !slices.Contains(form.Kinds, g.Kind) {
		return invalid("given.kind", fmt.Sprintf(`The form %s does not serve the kind "%s". It serves: %s.`, form.ID, g.Kind, strings.Join(form.Kinds, ", ")))
	}
	for _, w := range [...]struct{ name, value, first, second string }{
		{"equipment_ground", g.EquipmentGround, "yes", "none-permitted"},
		{"supply", g.Supply, "grounded", "isolated"},
		{"loads", g.Loads, "connected", "disconnected"},
	} {
		if w.value != "" && w.value != w.first && w.value != w.second {
			return invalid("given."+w.name, fmt.Sprintf("%s is one of: %s, %s.", w.name, w.first, w.second))
		}
	}
	for _, n := range [...]struct {
		name  string
		value float64
	}{{"rated_residual_ma", g.RatedResidualMA}, {"rating_a", g.RatingA}, {"nominal_v", g.NominalV}, {"faces", float64(g.Faces)},
		{"test_resistor_ohm", g.TestResistorOhm}, {"test_nominal_v", g.TestNominalV}} {
		if err := checkFact(n.name, n.value); err != nil {
			return err
		}
	}
	if g.Ramp != nil {
		for _, n := range [...]struct {
			name  string
			value float64
		}{{"ramp.ma_per_s", g.Ramp.RateMAPerS}, {"ramp.step_ma", g.Ramp.StepMA}, {"ramp.dwell_ms", g.Ramp.DwellMS}} {
			if err := checkFact(n.name, n.value); err != nil {
				return err
			}
		}
	}
	if len(g.Accuracy) == 0 {
		return nil
	}
	for _, code := range slices.Sorted(maps.Keys(g.Accuracy)) {
		if c, ok := CodeOf(code); !ok || c.Type != TypeNumber {
			return invalid("given.accuracy."+code, fmt.Sprintf(`"%s" is no reading that is a number. "tripwell forms" lists them.`, code))
		}
		a := g.Accuracy[code]
		if err := checkFact("accuracy."+code+".percent", a.Percent); err != nil {
			return err
		}
		if err := checkFact("accuracy."+code+".plus", a.Plus); err != nil {
			return err
		}
	}
	return nil
}

// checkFact looks at a figure of what is given.
func checkFact(name string, v float64) error {
	short := name[strings.LastIndexByte(name, '.')+1:]
	switch {
	case math.IsNaN(v) || math.Abs(v) > maxMagnitude:
		return invalid("given."+name, textNumberRange)
	case v < 0:
		return invalid("given."+name, short+" cannot be negative.")
	}
	return nil
}
