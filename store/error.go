package store

// Error is a refusal a person can act on. Code is one of a closed list: invalid, not_signed_in, forbidden, not_found,
// conflict, stale, too_large, busy, unavailable, internal. Text is a whole sentence: what is wrong, then what to do.
type Error struct {
	Code  string `json:"code"`
	Field string `json:"field,omitempty"`
	Text  string `json:"text"`
}

func (e *Error) Error() string { return e.Text }
