package intake

import (
	"strconv"
	"strings"

	"tripwell/forms"
)

// Bound says that a figure is a limit of what was measured rather than the value.
type Bound string

// Bounds of a figure.
const (
	Exact Bound = ""
	Below Bound = forms.BoundBelow // <0.1
	Above Bound = forms.BoundAbove // >1999
	Over  Bound = forms.BoundOver  // OL: above what the instrument can show, without a figure
)

// Quantity is a figure as a person or an instrument wrote it. Value is in Unit, which is the unit that was written, or
// else the one that was expected.
type Quantity struct {
	Value float64
	Unit  string
	Bound Bound
}

// Figures says how figures are written. The zero value takes a decimal point or a decimal comma, and asks where a comma
// could also part thousands.
type Figures struct {
	DecimalComma bool // 1,999 is a little less than two
}

// ParseQuantity reads a figure with or without its unit: 20A, 0,3 s, <0.1, OL, >1999. unit is the one that is expected,
// such as A or ms; a unit of another dimension is an error, one of the same dimension is kept (see In).
func ParseQuantity(text, unit string) (Quantity, error) { return Figures{}.Parse(text, unit) }

// Parse is ParseQuantity for figures written in a known way. Digits and marks are read as everywhere (forms.ParseFigure).
func (w Figures) Parse(text, unit string) (Quantity, error) {
	f, err := forms.ParseFigure(text, w.DecimalComma)
	if err != nil {
		return Quantity{}, wrong("%s", err.Error())
	}
	q := Quantity{Value: f.Value, Bound: Bound(f.Bound)}
	q.Unit, err = unitWritten(f.Unit, unit)
	return q, err
}

// measure is a unit: its dimension and how many of the dimension's base it is, as a fraction of whole numbers so that
// 0.57 s are 570 ms and not a hair less.
type measure struct {
	of       string
	num, den float64
}

// measures by the name the program uses for them. Ounce and pound: 28.349523125 g and 453.59237 g exactly
// (International yard and pound agreement, 1959).
var measures = map[string]measure{
	"A": {"current", 1000, 1}, "mA": {"current", 1, 1}, "uA": {"current", 1, 1000},
	"V": {"voltage", 1000, 1}, "mV": {"voltage", 1, 1}, "kV": {"voltage", 1_000_000, 1},
	"s": {"time", 1000, 1}, "ms": {"time", 1, 1}, "us": {"time", 1, 1000}, "min": {"time", 60_000, 1},
	"ohm": {"resistance", 1000, 1}, "mohm": {"resistance", 1, 1}, "kohm": {"resistance", 1_000_000, 1}, "Mohm": {"resistance", 1e9, 1}, "Gohm": {"resistance", 1e12, 1},
	"g": {"mass", 1, 1}, "kg": {"mass", 1000, 1}, "oz": {"mass", 28.349523125, 1}, "lb": {"mass", 453.59237, 1},
	// A force on a retention gauge, as the mass that weighs as much: 1 N = 1000/9.80665 g (standard acceleration of free fall).
	"N": {"mass", 1e8, 980665},
	"m": {"length", 1000, 1}, "cm": {"length", 10, 1}, "mm": {"length", 1, 1}, "ft": {"length", 304.8, 1}, "in": {"length", 25.4, 1},
	"%": {"share", 1, 1}, "x": {"multiple", 1, 1}, "deg": {"angle", 1, 1}, "Hz": {"frequency", 1, 1}, "W": {"power", 1, 1},
}

// spellings of units beside their own names; matched as written first, then in lower case.
var spellings = map[string]string{
	"µA": "uA", "μA": "uA", "amp": "A", "amps": "A", "ampere": "A", "amperes": "A", "a": "A", "ma": "mA", "milliamp": "mA", "milliamps": "mA", "milliamperes": "mA", "MA": "mA",
	"v": "V", "volt": "V", "volts": "V", "vac": "V", "vdc": "V", "v ac": "V", "v~": "V", "mv": "mV", "kv": "kV",
	"sec": "s", "secs": "s", "second": "s", "seconds": "s", "msec": "ms", "msecs": "ms", "millisecond": "ms", "milliseconds": "ms", "µs": "us", "μs": "us", "mins": "min", "minutes": "min",
	"Ω": "ohm", "\u2126": "ohm", "ω": "ohm", "ohms": "ohm", "r": "ohm", "R": "ohm", "mΩ": "mohm", "m\u2126": "mohm", "milliohm": "mohm", "kΩ": "kohm", "k\u2126": "kohm", "KΩ": "kohm", "kohms": "kohm", "k": "kohm",
	"MΩ": "Mohm", "M\u2126": "Mohm", "MOhm": "Mohm", "MOHM": "Mohm", "Mohms": "Mohm", "megohm": "Mohm", "megohms": "Mohm", "GΩ": "Gohm", "G\u2126": "Gohm",
	"gram": "g", "grams": "g", "gr": "g", "ounce": "oz", "ounces": "oz", "lbs": "lb", "pound": "lb", "pounds": "lb",
	"meter": "m", "meters": "m", "metre": "m", "metres": "m", "feet": "ft", "foot": "ft", "'": "ft", "′": "ft", `"`: "in", "″": "in", "inch": "in", "inches": "in",
	"pct": "%", "percent": "%", "times": "x", "×": "x", "°": "deg", "degrees": "deg", "hz": "Hz", "watts": "W", "w": "W",
}

// UnitNamed finds a unit in one of its spellings.
func UnitNamed(s string) (string, bool) {
	s = strings.TrimRight(strings.TrimSpace(s), ".")
	for _, try := range []string{s, strings.ToLower(s)} {
		if _, ok := measures[try]; ok {
			return try, true
		}
		if name, ok := spellings[try]; ok {
			return name, true
		}
	}
	return "", false
}

// unitWritten settles the unit of a figure: what is written, if it measures the same as what is expected.
func unitWritten(written, expected string) (string, error) {
	if written == "" {
		return expected, nil
	}
	name, ok := UnitNamed(written)
	switch {
	case !ok && expected == "":
		return "", wrong("The unit %s is not known. Write the figure alone.", brief(written))
	case !ok:
		return "", wrong("The unit %s is not known. Write the figure in %s.", brief(written), expected)
	case expected == "" || measures[name].of == measures[expected].of:
		return name, nil
	}
	return "", wrong("The unit %s does not fit here. Write the figure in %s.", brief(written), expected)
}

// In gives the same quantity in another unit of its dimension, rounded to 9 significant digits; ok is false where the
// dimensions differ or a unit is not known.
func (q Quantity) In(unit string) (Quantity, bool) {
	if q.Unit == unit {
		return q, true
	}
	from, ok1 := measures[q.Unit]
	to, ok2 := measures[unit]
	if !ok1 || !ok2 || from.of != to.of {
		return Quantity{}, false
	}
	v := q.Value * (from.num * to.den) / (from.den * to.num)
	if rounded, err := strconv.ParseFloat(strconv.FormatFloat(v, 'g', 9, 64), 64); err == nil {
		v = rounded
	}
	return Quantity{Value: v, Unit: unit, Bound: q.Bound}, true
}
