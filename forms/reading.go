package forms

import (
	"errors"
	"math"
	"strconv"
	"strings"

	"github.com/go-json-experiment/json"
	"github.com/go-json-experiment/json/jsontext"
)

// Reading is one answer or measured value. Exactly one of Value, Above, Below, NoTrip or Missing says what it is.
// Figures are always in the code's own unit (trip_time_ms in ms); Typed keeps what a person typed and Unit the unit it
// was typed in.
// JSON: {"typed":"4,5","unit":"mA","value":4.5} | {"above":310,"unit":"ms"} | {"below":0.1,"unit":"ohm"} |
// {"no_trip":true} | {"missing":"no-access"}; a bare number, string or true/false is taken as the value, the bare
// string "no-trip" as a bound without a figure.
type Reading struct {
	Typed   string   `json:"typed,omitempty"`
	Unit    string   `json:"unit,omitempty"`
	Value   any      `json:"value,omitempty"` // float64 or string; yes/no answers are "yes" / "no"
	Above   *float64 `json:"above,omitempty"`
	Below   *float64 `json:"below,omitempty"`
	NoTrip  bool     `json:"no_trip,omitzero"` // no-trip without a figure
	Missing string   `json:"missing,omitempty"`
}

const (
	textReadingShape = "A reading is a number, a word, true or false, or an object with exactly one of value, above, below, no_trip or missing."
	textReadingKey   = "A reading has only typed, unit, value, above, below, no_trip and missing. Leave out what is not one of these."
)

// Number makes a measured value in the code's own unit.
func Number(v float64) Reading { return Reading{Value: v} }

// Answer makes an answer in words: "yes", "no" or one of the code's options.
func Answer(s string) Reading { return Reading{Value: s} }

// MissingFor makes a reading that was not taken, with its reason.
func MissingFor(reason string) Reading { return Reading{Missing: reason} }

// Float gives the measured value; ok is false for answers, bounds and missing readings.
func (r Reading) Float() (v float64, ok bool) { v, ok = r.Value.(float64); return v, ok }

// Text gives the answer in words; ok is false for everything else.
func (r Reading) Text() (s string, ok bool) { s, ok = r.Value.(string); return s, ok }

// Given reports whether the reading says anything of the device: a value or a bound.
func (r Reading) Given() bool {
	return r.Value != nil || r.Above != nil || r.Below != nil || r.NoTrip
}

// UnmarshalJSONFrom reads the forms the type's comment names.
func (r *Reading) UnmarshalJSONFrom(dec *jsontext.Decoder) error {
	*r = Reading{}
	if dec.PeekKind() != '{' {
		v, err := readScalar(dec)
		if err != nil {
			return err
		}
		if v == "no-trip" {
			r.NoTrip = true
			return nil
		}
		if v == nil {
			return invalid("", textReadingShape)
		}
		r.Value = v
		return nil
	}
	if _, err := dec.ReadToken(); err != nil {
		return err
	}
	for dec.PeekKind() != '}' {
		name, err := dec.ReadToken()
		if err != nil {
			return err
		}
		if err := r.readMember(name.String(), dec); err != nil {
			return err
		}
	}
	if _, err := dec.ReadToken(); err != nil {
		return err
	}
	if r.Value == "no-trip" {
		r.Value, r.NoTrip = nil, true
	}
	if r.saysCount() != 1 {
		return invalid("", textReadingShape)
	}
	return nil
}

func (r *Reading) readMember(name string, dec *jsontext.Decoder) error {
	v, err := readScalar(dec)
	if err != nil {
		return err
	}
	ok := true
	switch name {
	case "typed":
		r.Typed, ok = v.(string)
	case "unit":
		r.Unit, ok = v.(string)
	case "value":
		r.Value, ok = v, v != nil
	case "above":
		r.Above, ok = floatPointer(v)
	case "below":
		r.Below, ok = floatPointer(v)
	case "no_trip":
		r.NoTrip, ok = v == "yes", v == "yes"
	case "missing":
		r.Missing, ok = v.(string)
		ok = ok && r.Missing != ""
	default:
		return invalid("", textReadingKey)
	}
	if !ok {
		return invalid("", textReadingShape)
	}
	return nil
}

func floatPointer(v any) (*float64, bool) {
	f, ok := v.(float64)
	if !ok {
		return nil, false
	}
	return &f, true
}

func (r *Reading) saysCount() int {
	n := 0
	for _, says := range []bool{r.Value != nil, r.Above != nil, r.Below != nil, r.NoTrip, r.Missing != ""} {
		if says {
			n++
		}
	}
	return n
}

// maxMagnitude is the largest whole number every JSON reader keeps exactly.
const maxMagnitude = 1 << 53

const textNumberRange = "This number is beyond what can be kept exactly. Give a figure between -9007199254740992 and 9007199254740992."

// readScalar reads one JSON value that is no list and no object: float64, string, "yes"/"no" for true/false, nil for null.
func readScalar(dec *jsontext.Decoder) (any, error) {
	switch dec.PeekKind() {
	case '{', '[':
		if err := dec.SkipValue(); err != nil {
			return nil, err
		}
		return nil, invalid("", textReadingShape)
	}
	tok, err := dec.ReadToken()
	if err != nil {
		return nil, err
	}
	switch tok.Kind() {
	case '"':
		return tok.String(), nil
	case 't':
		return "yes", nil
	case 'f':
		return "no", nil
	case '0':
		f, err := tok.Float()
		if err != nil || math.Abs(f) > maxMagnitude {
			return nil, invalid("", textNumberRange)
		}
		return f, nil
	}
	return nil, nil
}

// UnmarshalJSON reads what UnmarshalJSONFrom reads.
func (r *Reading) UnmarshalJSON(b []byte) error {
	return json.Unmarshal(b, r)
}

// figure gives the number a limit in the given unit is held against: what was typed where it was typed in that unit
// (4 oz against 4 oz, not against 115 g), else the value converted.
func (r Reading) figure(own, unit string) (float64, bool) {
	v, ok := r.Float()
	if !ok || unit == own {
		return v, ok
	}
	if typed, ok := typedNumber(r.Typed); ok && r.Unit == unit {
		return typed, true
	}
	per, ok := perUnit(own, unit)
	return round9(v / per), ok
}

// typedNumber reads what a person typed: a decimal comma or point, no thousands separators.
func typedNumber(s string) (float64, bool) {
	s = strings.TrimSpace(s)
	if s == "" || strings.Trim(s, "0123456789.,") != "" || strings.Count(s, ".")+strings.Count(s, ",") > 1 {
		return 0, false
	}
	v, err := strconv.ParseFloat(strings.Replace(s, ",", ".", 1), 64)
	return v, err == nil
}

// asError finds the refusal in an error of the JSON library.
func asError(err error) (*Error, bool) {
	var e *Error
	return e, errors.As(err, &e)
}
