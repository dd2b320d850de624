package forms

import (
	"github.com/go-json-experiment/json"
	"github.com/go-json-experiment/json/jsontext"
)

// Entry is what is judged: one test of one device.
type Entry struct {
	Form     string             `json:"form"` // kind/task
	Given    Given              `json:"given"`
	Readings map[string]Reading `json:"readings"`
	Series   []SeriesReading    `json:"series,omitempty"`
}

// Given is what the judgement needs to know beside the readings; it travels inside the entry.
type Given struct {
	Kind            string              `json:"kind,omitempty"`
	RatedResidualMA float64             `json:"rated_residual_ma,omitzero"`
	FormRev         int                 `json:"form_rev,omitzero"`
	LimitSet        string              `json:"limit_set,omitempty"`
	LimitRev        int                 `json:"limit_rev,omitzero"`
	Instrument      string              `json:"instrument,omitempty"` // instrument id
	CalibrationDue  *Day                `json:"calibration_due,omitempty"`
	Accuracy        map[string]Accuracy `json:"accuracy,omitempty"` // by reading code
	Ramp            *Ramp               `json:"ramp,omitempty"`
	EquipmentGround string              `json:"equipment_ground,omitempty"` // yes | none-permitted
	Supply          string              `json:"supply,omitempty"`           // grounded | isolated
	Loads           string              `json:"loads,omitempty"`            // connected | disconnected
	RetentionGauge  string              `json:"retention_gauge,omitempty"`  // mass of a go/no-go gauge: "115 g" or "4 oz"
	// Gauge is a cord's conductor size, "14" or "2.5 mm2". Entries of earlier versions have the mass of a go/no-go gauge here;
	// the two cannot be mistaken for each other, since a mass says g or oz.
	Gauge string `json:"gauge,omitempty"`
	// TestResistorOhm is the resistor of a tester that has no current source: its current follows the line voltage.
	TestResistorOhm float64 `json:"test_resistor_ohm,omitzero"`
	// TestNominalV is the voltage at which such a tester injects what it is marked with.
	TestNominalV float64 `json:"test_nominal_v,omitzero"`
	RatingA      float64 `json:"rating_a,omitzero"`
	NominalV     float64 `json:"nominal_v,omitzero"`
	Delayed      bool    `json:"delayed,omitzero"`
	Faces        int     `json:"faces,omitzero"`
	Waveform     string  `json:"waveform,omitempty"` // what the device is made for; a test's own waveform is a reading
	// Other fields of the device that a limit's or form's `when` may name.
	Fields map[string]any `json:"fields,omitempty"`
}

// Accuracy is ±(Percent % of reading + Plus), in the reading's own unit, taken as U (k = 2).
type Accuracy struct {
	Percent float64 `json:"percent,omitzero"`
	Plus    float64 `json:"plus,omitzero"`
}

// Ramp is how the instrument raises its current: a rate in mA/s, or step (mA) and dwell (ms).
type Ramp struct {
	RateMAPerS float64 `json:"ma_per_s,omitzero"`
	StepMA     float64 `json:"step_ma,omitzero"`
	DwellMS    float64 `json:"dwell_ms,omitzero"`
}

// Rate gives the ramp in mA/s, 0 where nothing is known of it.
func (r *Ramp) Rate() float64 {
	switch {
	case r == nil:
		return 0
	case r.RateMAPerS > 0:
		return r.RateMAPerS
	case r.StepMA > 0 && r.DwellMS > 0:
		return r.StepMA / r.DwellMS * 1000
	}
	return 0
}

// SeriesReading is one reading (or several) taken under stated conditions:
// {"at":{"multiple":5,"phase_deg":180},"trip_time_ms":24}. At holds float64 and string values by reading code or "face".
type SeriesReading struct {
	At       map[string]any
	Readings map[string]Reading
}

const (
	textSeriesShape = `An item of series is an object: {"at":{"multiple":5},"trip_time_ms":24}.`
	textAtShape     = `"at" is an object of numbers and words: {"multiple":5,"phase_deg":180}.`
)

// UnmarshalJSONFrom reads the flat form.
func (s *SeriesReading) UnmarshalJSONFrom(dec *jsontext.Decoder) error {
	*s = SeriesReading{Readings: map[string]Reading{}}
	if dec.PeekKind() != '{' {
		if err := dec.SkipValue(); err != nil {
			return err
		}
		return invalid("", textSeriesShape)
	}
	if _, err := dec.ReadToken(); err != nil {
		return err
	}
	for dec.PeekKind() != '}' {
		tok, err := dec.ReadToken()
		if err != nil {
			return err
		}
		name := tok.String()
		if name == "at" {
			if err := s.readAt(dec); err != nil {
				return err
			}
			continue
		}
		var r Reading
		if err := r.UnmarshalJSONFrom(dec); err != nil {
			if e, ok := asError(err); ok && e.Field == "" {
				return invalid(name, e.Text)
			}
			return err
		}
		s.Readings[name] = r
	}
	_, err := dec.ReadToken()
	return err
}

func (s *SeriesReading) readAt(dec *jsontext.Decoder) error {
	if dec.PeekKind() != '{' {
		if err := dec.SkipValue(); err != nil {
			return err
		}
		return invalid("at", textAtShape)
	}
	if _, err := dec.ReadToken(); err != nil {
		return err
	}
	s.At = map[string]any{}
	for dec.PeekKind() != '}' {
		tok, err := dec.ReadToken()
		if err != nil {
			return err
		}
		name := tok.String()
		v, err := readScalar(dec)
		if e, ok := asError(err); ok && e.Text == textReadingShape {
			return invalid("at", textAtShape)
		} else if err != nil {
			return err
		}
		if v == nil {
			return invalid("at", textAtShape)
		}
		s.At[name] = v
	}
	_, err := dec.ReadToken()
	return err
}

// UnmarshalJSON reads the flat form.
func (s *SeriesReading) UnmarshalJSON(b []byte) error { return json.Unmarshal(b, s) }

// flat is the item as one map, for encoding.
func (s SeriesReading) flat() map[string]any {
	m := make(map[string]any, len(s.Readings)+1)
	if s.At != nil {
		m["at"] = s.At
	}
	for code, r := range s.Readings {
		m[code] = r
	}
	return m
}

// MarshalJSONTo writes the flat form, names in order.
func (s SeriesReading) MarshalJSONTo(enc *jsontext.Encoder) error {
	return json.MarshalEncode(enc, s.flat(), json.Deterministic(true))
}

// MarshalJSON writes the flat form, names in order.
func (s SeriesReading) MarshalJSON() ([]byte, error) {
	return json.Marshal(s.flat(), json.Deterministic(true))
}
