// Package forms is the trade: what is asked of a device, which limits a reading must satisfy, what a test result is,
// and when the next test is due. It is pure: no I/O, no clock, no randomness, and it imports no other package of ours.
// Everything that decides "inside or outside a limit" or "due or not" lives here and nowhere else.
package forms

import "encoding/json"

// JudgeVersion names the rules of Judge; it changes whenever the same entry under the same limits may get another verdict.
const JudgeVersion = 1

// Results of an entry, worst first (not-tested stands beside them: nothing could be tested, and it moves no date).
const (
	Fail            = "fail"
	ConditionalFail = "conditional-fail"
	Incomplete      = "incomplete"
	ConditionalPass = "conditional-pass"
	Pass            = "pass"
	NotTested       = "not-tested"
)

// Further verdicts of a finding.
const (
	Watch     = "watch"
	Missing   = "missing"
	NotJudged = "not-judged"
)

// Reading is one answer or measured value. Exactly one of Value, Above/Below or Missing says what it is.
// JSON: {"typed":"4,5","unit":"mA","value":4.5} | {"above":310,"unit":"ms"} | {"below":0.1,"unit":"ohm"} | {"missing":"no-access"};
// a bare number, string or true/false is taken as Value ("no-trip" as a bound without a figure).
type Reading struct {
	Typed   string   `json:"typed,omitempty"`
	Unit    string   `json:"unit,omitempty"`
	Value   any      `json:"value,omitempty"` // float64 or string; yes/no answers are "yes" / "no"
	Above   *float64 `json:"above,omitempty"`
	Below   *float64 `json:"below,omitempty"`
	NoTrip  bool     `json:"no_trip,omitempty"` // no-trip without a figure
	Missing string   `json:"missing,omitempty"`
}

// Given is what the judgement needs to know beside the readings; it travels inside the entry (FORMATS 8).
type Given struct {
	Kind            string              `json:"kind,omitempty"`
	RatedResidualMA float64             `json:"rated_residual_ma,omitempty"`
	FormRev         int                 `json:"form_rev,omitempty"`
	LimitSet        string              `json:"limit_set,omitempty"`
	LimitRev        int                 `json:"limit_rev,omitempty"`
	Instrument      string              `json:"instrument,omitempty"` // instrument id
	CalibrationDue  *Day                `json:"calibration_due,omitempty"`
	Accuracy        map[string]Accuracy `json:"accuracy,omitempty"` // by reading code
	Ramp            *Ramp               `json:"ramp,omitempty"`
	EquipmentGround string              `json:"equipment_ground,omitempty"` // yes | none-permitted
	Supply          string              `json:"supply,omitempty"`           // grounded | isolated
	Loads           string              `json:"loads,omitempty"`
	Gauge           string              `json:"gauge,omitempty"`
	RatingA         float64             `json:"rating_a,omitempty"`
	NominalV        float64             `json:"nominal_v,omitempty"`
	Delayed         bool                `json:"delayed,omitempty"`
	Faces           int                 `json:"faces,omitempty"`
	Waveform        string              `json:"waveform,omitempty"`
	// Other fields of the device that a limit's or form's `when` may name.
	Fields map[string]any `json:"fields,omitempty"`
}

// Accuracy is ±(Percent % of reading + Plus), in the reading's own unit, taken as U (k = 2).
type Accuracy struct {
	Percent float64 `json:"percent,omitempty"`
	Plus    float64 `json:"plus,omitempty"`
}

// Ramp is how the instrument raises its current: a rate in mA/s, or step (mA) and dwell (ms).
type Ramp struct {
	RateMAPerS float64 `json:"ma_per_s,omitempty"`
	StepMA     float64 `json:"step_ma,omitempty"`
	DwellMS    float64 `json:"dwell_ms,omitempty"`
}

// SeriesReading is one reading (or several) taken under stated conditions: {"at":{"multiple":5,"phase_deg":180},"trip_time_ms":24}.
type SeriesReading struct {
	At       map[string]any
	Readings map[string]Reading
}

// Entry is what is judged: one test of one device.
type Entry struct {
	Form     string             `json:"form"` // kind/task
	Given    Given              `json:"given"`
	Readings map[string]Reading `json:"readings"`
	Series   []SeriesReading    `json:"series,omitempty"`
}

// Bounds is a limit as applied: computed figures are rounded to 9 significant digits so that every judge agrees.
type Bounds struct {
	Min   *float64 `json:"min,omitempty"`
	Max   *float64 `json:"max,omitempty"`
	OneOf []string `json:"one_of,omitempty"`
}

// Finding is what one limit says of one reading.
type Finding struct {
	Reading  string          `json:"reading"`
	Value    json.RawMessage `json:"value,omitempty"` // number, string or bound as given
	At       map[string]any  `json:"at,omitempty"`
	Verdict  string          `json:"verdict"`
	Limit    *Bounds         `json:"limit,omitempty"`
	Level    string          `json:"level,omitempty"` // must | watch
	Severity string          `json:"severity,omitempty"`
	Source   string          `json:"source,omitempty"` // document and clause
	Text     string          `json:"text,omitempty"`   // key in the words catalogue: what it means and what to do
}

// Verdict is the result of an entry and why.
type Verdict struct {
	Result   string    `json:"result"`
	Findings []Finding `json:"findings"`
}

// Form is what is asked for a device kind and a task; data, not code (forms/data).
type Form struct {
	ID string `json:"form"`
}

// LimitSet is a named, revised table of limits; data, not code (forms/data).
type LimitSet struct {
	ID       string `json:"limit_set"`
	Revision int    `json:"revision"`
	InForce  Day    `json:"in_force"`
}
