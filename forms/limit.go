package forms

// LimitSet is a named, revised table of limits; data, not code (forms/data).
type LimitSet struct {
	ID string `json:"limit_set"`
	// Name is what a set made by its users is called; shipped sets are named in the catalogue.
	Name     string   `json:"name,omitempty"`
	Revision int      `json:"revision"`
	InForce  Day      `json:"in_force"`
	Kinds    []string `json:"kinds"`
	// StandsFor lists kinds, or "KIND delayed", whose devices are held against this set where none is chosen for the
	// device itself: in a site's log at that site, in the organisation's everywhere else.
	StandsFor []string `json:"stands_for,omitempty"`
	// Rule is the decision rule, one of Rules; empty is simple.
	Rule string `json:"rule"`
	// Assume gives fields that are taken where the entry does not say ("nominal_v": 120).
	Assume map[string]any `json:"assume,omitempty"`
	Limits []Limit        `json:"limits"`
	byCode [][]*Limit     // by place in codes, must before watch; nil where they were not sorted out
}

// Limit says what one reading, or one field of the device, must satisfy. Exactly one shape is stated: Min/Max, OneOf,
// Curve, OfRated, OverRated, ByMultiple, PerLength, OverRange or Flag. Figures are in the code's own unit.
type Limit struct {
	ID      string   `json:"id"`
	Reading string   `json:"reading,omitempty"`
	Field   string   `json:"field,omitempty"` // instead of a reading: a field of the device
	Min     *float64 `json:"min,omitempty"`
	Max     *float64 `json:"max,omitempty"`
	Unit    string   `json:"unit,omitempty"`
	OneOf   []string `json:"one_of,omitempty"`
	// ByUnit gives the document's figure in another unit; a reading typed in that unit is held against it.
	ByUnit map[string]Bounds `json:"by_unit,omitempty"`
	// Curve "ul943": at most (20/I)^1.43 s at the measured test current I, 6 to 264 mA.
	Curve string `json:"curve,omitempty"`
	// OfRated gives bounds as shares of the rated residual current.
	OfRated *Bounds `json:"of_rated,omitempty"`
	// OverRated gives max = OverRated / rated residual current in mA (50 V over 30 mA: 50000 / 30 ohm).
	OverRated float64 `json:"over_rated,omitzero"`
	// ByMultiple gives bounds by the multiple of the rated residual current the test was made at.
	ByMultiple []Rung `json:"by_multiple,omitempty"`
	// PerLength bounds a conductor's ohms by its length and size.
	PerLength *PerLength `json:"per_length,omitempty"`
	// OverRange: "above" of any figure is outside, every figure is inside (an open conductor reads over range).
	OverRange bool `json:"over_range,omitzero"`
	// Flag is a limit without bounds: outside wherever all of When hold.
	Flag bool `json:"flag,omitzero"`
	// Gauge holds a go/no-go answer to be about at least these masses, by unit; a lighter or heavier gauge proves less.
	Gauge map[string]float64 `json:"gauge,omitempty"`
	// Ramp "ul943": a figure above Max that the instrument's ramp explains is conditional-fail.
	Ramp string `json:"ramp,omitempty"`
	// Loads: below Min is a watch with loads connected, else a fail of severity nuisance.
	Loads bool `json:"loads,omitzero"`
	// Bond "half-drop": judged only from 5 A of load and where half the measured drop exceeds 0.5 V.
	Bond     string            `json:"bond,omitempty"`
	Level    string            `json:"level"`
	Severity string            `json:"severity,omitempty"`
	Source   string            `json:"source"`
	Status   string            `json:"status"`
	Text     string            `json:"text"`
	Texts    map[string]string `json:"texts,omitempty"` // by answer, instead of Text
	When     []Condition       `json:"when,omitempty"`
	// Void lists where the reading says nothing: it is then not judged, and Text says why.
	Void  []Void  `json:"void,omitempty"`
	fixed *Bounds // Min, Max and OneOf as findings share them; nil where they were not sorted out
}

// Rung is one row of a table by multiple.
type Rung struct {
	Multiple float64  `json:"multiple"`
	Min      *float64 `json:"min,omitempty"`
	Max      *float64 `json:"max,omitempty"`
	NoTrip   bool     `json:"no_trip,omitzero"` // must not trip at all
}

// Void is a case in which a limit does not apply.
type Void struct {
	When []Condition `json:"when"`
	Text string      `json:"text"`
}
