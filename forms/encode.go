package forms

import (
	"encoding/json"
	"maps"
	"slices"
	"strconv"

	"github.com/go-json-experiment/json/jsontext"
)

// AppendJSON appends the verdict as one line of JSON, members in the order of the types, what is empty left out.
func (v *Verdict) AppendJSON(dst []byte) []byte {
	dst = append(dst, `{"result":`...)
	dst = appendString(dst, v.Result)
	dst = append(dst, `,"findings":[`...)
	for i := range v.Findings {
		if i > 0 {
			dst = append(dst, ',')
		}
		dst = v.Findings[i].appendJSON(dst)
	}
	return append(dst, "]}"...)
}

// MarshalJSON writes what AppendJSON writes.
func (v Verdict) MarshalJSON() ([]byte, error) { return v.AppendJSON(nil), nil }

func (f *Finding) appendJSON(dst []byte) []byte {
	dst = append(dst, `{"reading":`...)
	dst = appendString(dst, f.Reading)
	if len(f.Value) > 0 {
		dst = append(append(dst, `,"value":`...), f.Value...)
	}
	dst = appendMember(dst, "unit", f.Unit)
	if len(f.At) > 0 {
		dst = appendAt(append(dst, `,"at":`...), f.At)
	}
	dst = appendMember(dst, "verdict", f.Verdict)
	if f.Limit != nil {
		dst = f.Limit.appendJSON(append(dst, `,"limit":`...))
	}
	dst = appendFigure(dst, "uncertainty", f.Uncertainty)
	dst = appendFigure(dst, "probability", f.Probability)
	dst = appendFigure(dst, "scaled_ma", f.ScaledMA)
	dst = appendMember(dst, "level", f.Level)
	dst = appendMember(dst, "severity", f.Severity)
	dst = appendMember(dst, "source", f.Source)
	dst = appendMember(dst, "reason", f.Reason)
	dst = appendMember(dst, "text", f.Text)
	return append(dst, '}')
}

func (b *Bounds) appendJSON(dst []byte) []byte {
	dst = append(dst, '{')
	comma := false
	next := func(name string) {
		if comma {
			dst = append(dst, ',')
		}
		comma = true
		dst = append(append(append(dst, '"'), name...), `":`...)
	}
	if b.Min != nil {
		next("min")
		dst = appendNumber(dst, *b.Min)
	}
	if b.Max != nil {
		next("max")
		dst = appendNumber(dst, *b.Max)
	}
	if len(b.OneOf) > 0 {
		next("one_of")
		for i, s := range b.OneOf {
			dst = appendString(append(dst, "[,"[min(i, 1)]), s)
		}
		dst = append(dst, ']')
	}
	return append(dst, '}')
}

// appendAt writes conditions by name, so that equal conditions are equal bytes.
func appendAt(dst []byte, at map[string]any) []byte {
	dst = append(dst, '{')
	for i, name := range slices.Sorted(maps.Keys(at)) {
		if i > 0 {
			dst = append(dst, ',')
		}
		dst = append(appendString(dst, name), ':')
		switch v := at[name].(type) {
		case float64:
			dst = appendNumber(dst, v)
		case string:
			dst = appendString(dst, v)
		default:
			dst = append(dst, "null"...)
		}
	}
	return append(dst, '}')
}

// appendMember writes a further member of an object, nothing for an empty one. name is plain ASCII.
func appendMember(dst []byte, name, value string) []byte {
	if value == "" {
		return dst
	}
	dst = append(append(append(dst, `,"`...), name...), `":`...)
	return appendString(dst, value)
}

// appendFigure writes a further member of an object, nothing for nil. name is plain ASCII.
func appendFigure(dst []byte, name string, v *float64) []byte {
	if v == nil {
		return dst
	}
	dst = append(append(append(dst, `,"`...), name...), `":`...)
	return appendNumber(dst, *v)
}

// appendString quotes by the JSON library; what is not UTF-8 (no decoder here lets it through) comes out mangled, not
// malformed.
func appendString(dst []byte, s string) []byte {
	dst, _ = jsontext.AppendQuote(dst, s)
	return dst
}

// rawValue is a reading as findings show it.
func rawValue(r *Reading, own, unit string) json.RawMessage {
	switch {
	case r.NoTrip:
		return json.RawMessage(`"no-trip"`)
	case r.Above != nil:
		return append(appendNumber([]byte(`{"above":`), *r.Above), '}')
	case r.Below != nil:
		return append(appendNumber([]byte(`{"below":`), *r.Below), '}')
	}
	if s, ok := r.Text(); ok {
		return appendString(make([]byte, 0, len(s)+2), s)
	}
	v, _ := r.figure(own, unit)
	return appendNumber(make([]byte, 0, 12), v)
}

// appendNumber writes a number as JavaScript does.
func appendNumber(dst []byte, v float64) []byte {
	if v == 0 || v >= 1e-6 && v < 1e21 {
		return strconv.AppendFloat(dst, v, 'f', -1, 64)
	}
	raw, err := json.Marshal(v)
	if err != nil {
		return append(dst, "null"...)
	}
	return append(dst, raw...)
}
