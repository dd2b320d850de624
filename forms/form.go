package forms

// Form is what is asked for device kinds and a task; data, not code (forms/data). Words are keys in the catalogue:
// step.STEP, reading.CODE.ask, option.CODE.VALUE, caution.CAUTION, missing.REASON.
type Form struct {
	ID       string   `json:"form"`
	Revision int      `json:"revision"`
	InForce  Day      `json:"in_force"`
	Task     string   `json:"task"`
	Kinds    []string `json:"kinds"`
	LimitSet string   `json:"limit_set"`
	// Needs lists what must be known of the device before anything can be judged ("rated_residual_ma").
	Needs []string `json:"needs,omitempty"`
	// Quick is the one-tap answer of a button form: exactly what its words state, never a number.
	Quick  *Quick  `json:"quick,omitempty"`
	Steps  []Step  `json:"steps"`
	Series *Series `json:"series,omitempty"`
}

// Quick is a one-tap answer.
type Quick struct {
	Text     string            `json:"text"`            // words key of what the tap states
	Texts    map[string]string `json:"texts,omitempty"` // by device kind, instead of Text
	Readings map[string]string `json:"readings"`
}

// Step is one screenful, in the order of work. Where any condition of ClosedWhen holds, or one of ClosedUnless does not,
// the step is closed: nothing in it is required, and ClosedText says why.
type Step struct {
	Step     string   `json:"step"`
	Cautions []string `json:"cautions,omitempty"`
	// Proves and ProvesNot are words keys of what the step shows of the device, and what it does not.
	Proves       string      `json:"proves,omitempty"`
	ProvesNot    string      `json:"proves_not,omitempty"`
	ClosedUnless []Condition `json:"closed_unless,omitempty"`
	ClosedWhen   []Condition `json:"closed_when,omitempty"`
	ClosedText   string      `json:"closed_text,omitempty"`
	Asks         []Ask       `json:"asks"`
}

// Ask is one question. It is put only where all of When hold.
type Ask struct {
	Reading string `json:"reading"`
	// Name is the question as its users wrote it, of a check of their own (OwnCodes); the others are in the catalogue.
	Name string `json:"name,omitempty"`
	// Text is the words key of the question where it is not the code's own, Texts by device kind.
	Text    string            `json:"text,omitempty"`
	Texts   map[string]string `json:"texts,omitempty"`
	Type    string            `json:"type"`
	Options []string          `json:"options,omitempty"`
	Unit    string            `json:"unit,omitempty"`  // the code's own unit
	Units   []string          `json:"units,omitempty"` // units a person may type in
	// Required: an entry without it is incomplete.
	Required bool `json:"required,omitzero"`
	// Expected: put as openly as what is required, so that a form in the hand is filled in whole. An entry made otherwise is
	// incomplete without it only where it says why it was not answered.
	Expected bool `json:"expected,omitzero"`
	// Or names another reading that answers a required ask as well.
	Or string `json:"or,omitempty"`
	// Ends lists answers after which nothing more is asked.
	Ends []string `json:"ends,omitempty"`
	// Bound offers "more than" (above) or "less than" (below) beside the figure; on trip readings above means it did not trip.
	Bound string `json:"bound,omitempty"`
	// OfferMissing lists reasons shown as answers beside the others.
	OfferMissing []string `json:"offer_missing,omitempty"`
	// Series marks a reading that is asked once for each condition of the form's series.
	Series bool        `json:"series,omitzero"`
	Scale  *Scale      `json:"scale,omitempty"`
	When   []Condition `json:"when,omitempty"`
	place  int         // of Reading in codes, from 1; 0 where it was not looked up
}

// Scale is the line drawn under a number, in the code's own unit.
type Scale struct {
	Shape string  `json:"shape"` // log | linear
	From  float64 `json:"from"`
	To    float64 `json:"to"`
}

// Series lists the conditions under which readings of a step are required.
type Series struct {
	Step       string            `json:"step"`
	Conditions []SeriesCondition `json:"conditions"`
}

// SeriesCondition is required where all of When hold: one of AnyOf, taken at At.
type SeriesCondition struct {
	At    map[string]any `json:"at"`
	AnyOf []string       `json:"any_of"`
	When  []Condition    `json:"when,omitempty"`
}

// ask is an ask with what the judge needs of its step.
type ask struct {
	*Ask
	step *Step
}

// asks walks the form in its order.
func (f *Form) asks(yield func(ask) bool) {
	for i := range f.Steps {
		step := &f.Steps[i]
		for j := range step.Asks {
			if !yield(ask{&step.Asks[j], step}) {
				return
			}
		}
	}
}
