package record

import (
	"bytes"
	"cmp"
	"encoding/json"
	"slices"

	"github.com/go-json-experiment/json/jsontext"
)

// Said is what one record says of one field.
type Said struct {
	Value json.RawMessage // null clears the field
	Clock uint64
	ID    string // the record
	From  string // the installation it was made on
	Seen  uint64 // the largest stamp of the subject its author knew of; 0 = none
}

// Weigh puts everything that was said of one field in order, the winner first: the largest (clock, id) wins. What is
// said twice by one record stays once. The order things arrived in has no say.
func Weigh(said []Said) []Said {
	slices.SortFunc(said, func(a, b Said) int {
		return cmp.Or(cmp.Compare(b.Clock, a.Clock), cmp.Compare(b.ID, a.ID))
	})
	return slices.CompactFunc(said, func(a, b Said) bool { return a.ID == b.ID })
}

// Losers gives the values that lost to the winner without its author knowing of them: another value, from another
// installation, with a stamp larger than the winner's Seen. said is in the order Weigh gives.
func Losers(said []Said) []Said {
	var lost []Said
	for i, s := range said {
		if i > 0 && s.Clock > said[0].Seen && s.From != said[0].From && !sameValue(s.Value, said[0].Value) {
			lost = append(lost, s)
		}
	}
	return lost
}

// sameValue compares what is written, not how: 4.50 is 4.5 (RFC 8785 form).
func sameValue(a, b json.RawMessage) bool {
	if bytes.Equal(a, b) {
		return true
	}
	x, y := jsontext.Value(bytes.Clone(a)), jsontext.Value(bytes.Clone(b))
	return x.Canonicalize() == nil && y.Canonicalize() == nil && bytes.Equal(x, y)
}

// Set reads a body's set and seen: field → value as written. It gives nil for a body without a set.
func Set(body []byte) (set map[string]json.RawMessage, seen uint64) {
	b := bodyOf(body)
	if v := b["set"]; v == nil || v[0] != '{' {
		return nil, 0
	}
	set = map[string]json.RawMessage{}
	for name, v := range bodyOf(b["set"]) {
		set[name] = json.RawMessage(v)
	}
	if v := b["seen"]; v != nil {
		seen, _ = ParseClock(text(v))
	}
	return set, seen
}
