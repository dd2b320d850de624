package forms

// Error is a refusal a person can act on. Code is one of the closed list of error codes; Field is a dotted path into
// what was sent ("readings.trip_time_ms"); Text is a whole sentence: what is wrong, then what to do.
type Error struct {
	Code  string `json:"code"`
	Field string `json:"field,omitempty"`
	Text  string `json:"text"`
}

func (e *Error) Error() string { return e.Text }

// invalid makes the refusal this package gives for anything it cannot judge.
func invalid(field, text string) *Error { return &Error{Code: "invalid", Field: field, Text: text} }
