package forms

import (
	"encoding/json"
	"slices"
)

// Condition names a reading or a field of what is given and what it must be. Every part that is stated must hold. A
// missing reading or field satisfies Missing and Not, and nothing else.
type Condition struct {
	Reading string   `json:"reading,omitempty"`
	Field   string   `json:"field,omitempty"`
	Is      OneOf    `json:"is,omitempty"`
	Not     OneOf    `json:"not,omitempty"`
	AtLeast *float64 `json:"at_least,omitempty"`
	AtMost  *float64 `json:"at_most,omitempty"`
	Above   *float64 `json:"above,omitempty"`
	Below   *float64 `json:"below,omitempty"`
	Missing bool     `json:"missing,omitzero"`
	place   int      // of Reading in codes, from 1; 0 where it was not looked up
}

// OneOf is a value or a list of values, any of which may match; each is a float64 or a string. JSON: "x" | 3 | ["x","y"].
type OneOf []any

// UnmarshalJSON reads one value or a list.
func (o *OneOf) UnmarshalJSON(b []byte) error {
	if len(b) > 0 && b[0] == '[' {
		var list []any
		if err := json.Unmarshal(b, &list); err != nil {
			return err
		}
		*o = list
		return nil
	}
	var one any
	if err := json.Unmarshal(b, &one); err != nil {
		return err
	}
	*o = OneOf{one}
	return nil
}

// MarshalJSON writes a single value bare.
func (o OneOf) MarshalJSON() ([]byte, error) {
	if len(o) == 1 {
		return json.Marshal(o[0])
	}
	return json.Marshal([]any(o))
}

func (o OneOf) has(v any) bool { return v != nil && slices.Contains(o, v) }

// holds reports whether the condition holds for a value, nil being missing.
func (c *Condition) holds(v any) bool {
	if c.Missing && v != nil || c.Is != nil && !c.Is.has(v) || c.Not.has(v) {
		return false
	}
	if c.AtLeast == nil && c.AtMost == nil && c.Above == nil && c.Below == nil {
		return true
	}
	f, ok := v.(float64)
	return ok && (c.AtLeast == nil || f >= *c.AtLeast) && (c.AtMost == nil || f <= *c.AtMost) &&
		(c.Above == nil || f > *c.Above) && (c.Below == nil || f < *c.Below)
}
