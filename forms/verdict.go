package forms

import "encoding/json"

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

// Levels of a limit.
const (
	Must      = "must"  // outside is a fail
	WatchOnly = "watch" // outside is flagged and still passes
)

// Nuisance is the severity of a fault that trips too easily: replace soon, never take out of service for it.
const Nuisance = "nuisance"

// Results lists every result of an entry, worst first, not-tested last.
func Results() []string {
	return []string{Fail, ConditionalFail, Incomplete, ConditionalPass, Pass, NotTested}
}

// Bounds is a limit as applied: computed figures are rounded to 9 significant digits so that every judge agrees.
type Bounds struct {
	Min   *float64 `json:"min,omitempty"`
	Max   *float64 `json:"max,omitempty"`
	OneOf []string `json:"one_of,omitempty"`
}

// Finding is what one limit says of one reading. Field names come in this order on the wire.
type Finding struct {
	Reading string          `json:"reading"`
	Value   json.RawMessage `json:"value,omitempty"` // number, string, bound ({"above":310}) or "no-trip"
	Unit    string          `json:"unit,omitempty"`  // where value and limit are not in the code's own unit
	At      map[string]any  `json:"at,omitempty"`
	Verdict string          `json:"verdict"`
	Limit   *Bounds         `json:"limit,omitempty"` // shared between findings: not to be changed
	// Uncertainty is the doubt about the value against its limit: expanded, k = 2, in the unit of the value.
	Uncertainty *float64 `json:"uncertainty,omitempty"`
	// Probability is how probable it is, 0 to 1, that the true value lies inside the limit (JCGM 106).
	Probability *float64 `json:"probability,omitempty"`
	// ScaledMA is the test current the limit was computed at, where it was scaled to the line voltage.
	ScaledMA *float64 `json:"scaled_ma,omitempty"`
	Level    string   `json:"level,omitempty"` // must | watch
	Severity string   `json:"severity,omitempty"`
	Source   string   `json:"source,omitempty"` // document and clause
	Reason   string   `json:"reason,omitempty"` // why a missing reading is missing
	Text     string   `json:"text,omitempty"`   // key in the words catalogue: what it means and what to do; none on a pass
}

// Verdict is the result of an entry and why.
type Verdict struct {
	Result   string    `json:"result"`
	Findings []Finding `json:"findings"`
}

// worse ranks the result a finding's verdict leads to; larger is worse.
func worse(verdict string) int {
	switch verdict {
	case Fail:
		return 4
	case ConditionalFail:
		return 3
	case Missing, Incomplete:
		return 2
	case ConditionalPass:
		return 1
	}
	return 0 // pass, watch and not-judged never change a result
}

// resultOf is the result of the worst finding.
func resultOf(findings []Finding) string {
	worst := 0
	for _, f := range findings {
		worst = max(worst, worse(f.Verdict))
	}
	return [...]string{Pass, ConditionalPass, Incomplete, ConditionalFail, Fail}[worst]
}
