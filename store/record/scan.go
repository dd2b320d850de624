package record

import (
	"bytes"
	"errors"
	"math"
	"slices"
	"strconv"
	"strings"
	"sync"

	"github.com/go-json-experiment/json/jsontext"
)

var decoders = sync.Pool{New: func() any { return new(jsontext.Decoder) }}

// checkBytes holds the rules that need no meaning: size, one line, JSON, UTF-8, names once, depth, numbers.
func checkBytes(raw []byte) *Fault {
	if len(raw) > MaxBytes {
		return fault("too_large", "", "The record is %d bytes long; a record may hold 65,536. Send photos as files and shorten notes.", len(raw))
	}
	if bytes.IndexByte(raw, '\n') >= 0 || bytes.IndexByte(raw, '\r') >= 0 {
		return fault("malformed", "", "The record is not one line: it holds a line break outside its texts. Send each record as one line of JSON.")
	}
	d := decoders.Get().(*jsontext.Decoder)
	defer decoders.Put(d)
	d.Reset(bytes.NewBuffer(raw))
	v, err := d.ReadValue()
	if err == nil && len(bytes.Trim(d.UnreadBuffer(), " \t")) > 0 {
		return fault("malformed", "", "The record is followed by something else on its line. Send each record as one line of JSON.")
	}
	if errors.Is(err, jsontext.ErrDuplicateName) {
		return fault("duplicate_name", pointer(err), "The record names a member twice (%s). Each name may stand once in an object.", pointer(err))
	}
	if err != nil {
		return fault("malformed", "", "The record is not JSON in UTF-8 (at byte %d). Send each record as one line of JSON.", d.InputOffset())
	}
	if v[0] != '{' {
		return fault("malformed", "", "The record is not a JSON object.")
	}
	return checkNumbers(raw)
}

func pointer(err error) string {
	var s *jsontext.SyntacticError
	if errors.As(err, &s) {
		return string(s.JSONPointer)
	}
	return ""
}

// checkNumbers walks valid JSON once: how deep it goes, and how large its numbers are.
func checkNumbers(raw []byte) *Fault {
	depth := 0
	for i := 0; i < len(raw); {
		switch c := raw[i]; {
		case c == '"':
			i = stringEnd(raw, i)
		case c == '{' || c == '[':
			if depth++; depth > MaxDepth {
				return fault("malformed", "", "The record is nested deeper than %d levels.", MaxDepth)
			}
			i++
		case c == '}' || c == ']':
			depth--
			i++
		case c == '-' || c >= '0' && c <= '9':
			end := plainEnd(raw, i)
			if tooLarge(raw[i:end]) {
				return fault("number_range", "", "The number %s is beyond 9007199254740992, where numbers are no longer exact. Write it as a text.", short(raw[i:end]))
			}
			i = end
		default:
			i++
		}
	}
	return nil
}

func short(b []byte) string {
	if len(b) > 40 {
		return string(b[:40]) + "…"
	}
	return string(b)
}

// tooLarge reports a magnitude beyond 2^53: by its digits where it is written plainly (so that 2^53+1 is not rounded
// into range), by its nearest double where it has an exponent.
func tooLarge(num []byte) bool {
	const limit = "9007199254740992"
	if num[0] == '-' {
		num = num[1:]
	}
	if len(num) < len(limit) && !bytes.ContainsAny(num, "eE") {
		return false
	}
	if bytes.ContainsAny(num, "eE") {
		x, err := strconv.ParseFloat(string(num), 64)
		return x > 1<<53 || math.IsInf(x, 0) || (err != nil && x != 0)
	}
	whole, frac, _ := strings.Cut(string(num), ".")
	switch {
	case len(whole) != len(limit):
		return len(whole) > len(limit)
	case whole != limit:
		return whole > limit
	}
	return strings.Trim(frac, "0") != ""
}

// ---- walking JSON that has been checked --------------------------------------------------------------------------

// members calls fn for every member of an object, in order, until it gives a fault.
func members(obj []byte, fn func(name string, value []byte) *Fault) *Fault {
	i := next(obj, 0) + 1
	for {
		if i = next(obj, i); obj[i] == '}' {
			return nil
		}
		if obj[i] == ',' {
			i = next(obj, i+1)
		}
		end := stringEnd(obj, i)
		name := nameOf(obj[i:end])
		i = next(obj, next(obj, end)+1) // past the colon
		end = valueEnd(obj, i)
		if f := fn(name, obj[i:end]); f != nil {
			return f
		}
		i = end
	}
}

// elements calls fn for every element of a list, in order, until it gives a fault.
func elements(list []byte, fn func(value []byte) *Fault) *Fault {
	i := 1
	for {
		if i = next(list, i); list[i] == ']' {
			return nil
		}
		if list[i] == ',' {
			i = next(list, i+1)
		}
		end := valueEnd(list, i)
		if f := fn(list[i:end]); f != nil {
			return f
		}
		i = end
	}
}

// next gives the place of the next byte that is no space.
func next(b []byte, i int) int {
	for b[i] == ' ' || b[i] == '\t' {
		i++
	}
	return i
}

// valueEnd gives the place after the value that starts at i.
func valueEnd(b []byte, i int) int {
	switch b[i] {
	case '"':
		return stringEnd(b, i)
	case '{', '[':
		for depth := 0; ; {
			switch b[i] {
			case '"':
				i = stringEnd(b, i)
				continue
			case '{', '[':
				depth++
			case '}', ']':
				if depth--; depth == 0 {
					return i + 1
				}
			}
			i++
		}
	}
	return plainEnd(b, i)
}

// plainEnd gives the place after the number or word that starts at i.
func plainEnd(b []byte, i int) int {
	for i < len(b) {
		switch b[i] {
		case ',', '}', ']', ' ', '\t':
			return i
		}
		i++
	}
	return i
}

func stringEnd(b []byte, i int) int {
	for i++; b[i] != '"'; i++ {
		if b[i] == '\\' {
			i++
		}
	}
	return i + 1
}

// text gives the text of a JSON string, "" of anything else.
func text(v []byte) string {
	if v[0] != '"' {
		return ""
	}
	if bytes.IndexByte(v, '\\') < 0 {
		return string(v[1 : len(v)-1])
	}
	b, _ := jsontext.AppendUnquote(nil, v)
	return string(b)
}

// nameOf gives the text of a member's name; those that every record has are not made anew.
func nameOf(v []byte) string {
	if s, ok := usualNames[string(v[1:len(v)-1])]; ok {
		return s
	}
	return text(v)
}

var usualNames = func() map[string]string {
	m := map[string]string{}
	for _, name := range slices.Concat(envelopeOrder, []string{"value", "typed", "unit", "above", "below", "no_trip", "missing", "at"}) {
		m[name] = name
	}
	for _, k := range kinds {
		for _, b := range k.body {
			m[b.name] = b.name
		}
	}
	return m
}()

func isNumber(v []byte) bool { return v[0] == '-' || v[0] >= '0' && v[0] <= '9' }
