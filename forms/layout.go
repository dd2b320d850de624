package forms

import (
	"bytes"
	"encoding/json"
	"slices"
)

// spread are the lists whose items stand on lines of their own, so that two revisions can be compared line by line.
var spread = []string{"limits", "steps", "asks", "conditions"}

// Layout writes the JSON of a form or a limit set the way forms/data keeps it: a line for each member, limit and question.
// It changes nothing but the space between values.
func Layout(raw []byte) ([]byte, error) {
	dec := json.NewDecoder(bytes.NewReader(raw))
	dec.UseNumber()
	var out bytes.Buffer
	if err := layoutValue(dec, &out, 1, true, false); err != nil {
		return nil, err
	}
	out.WriteByte('\n')
	return out.Bytes(), nil
}

// layoutValue copies one value; members tells whether an object's members stand on lines of their own, items the same of
// a list's.
func layoutValue(dec *json.Decoder, out *bytes.Buffer, depth int, members, items bool) error {
	token, err := dec.Token()
	if err != nil {
		return err
	}
	open, ok := token.(json.Delim)
	if !ok {
		return layoutScalar(out, token)
	}
	lines := members && open == '{' || items && open == '['
	out.WriteRune(rune(open))
	empty := true
	for dec.More() {
		if !empty {
			out.WriteByte(',')
		}
		newline(out, depth, lines, !empty)
		empty = false
		inner := false
		if open == '{' {
			name, err := dec.Token()
			if err != nil {
				return err
			}
			if err := layoutScalar(out, name); err != nil {
				return err
			}
			out.WriteString(": ")
			text, _ := name.(string)
			inner = slices.Contains(spread, text)
		}
		next := depth
		if lines || inner {
			next++
		}
		if err := layoutValue(dec, out, next, false, inner); err != nil {
			return err
		}
	}
	closing, err := dec.Token()
	if err != nil {
		return err
	}
	if !empty {
		newline(out, depth-1, lines, false)
	}
	out.WriteRune(rune(closing.(json.Delim)))
	return nil
}

func newline(out *bytes.Buffer, depth int, lines, spaced bool) {
	switch {
	case lines:
		out.WriteByte('\n')
		out.Write(bytes.Repeat([]byte(" "), depth))
	case spaced:
		out.WriteByte(' ')
	}
}

func layoutScalar(out *bytes.Buffer, token any) error {
	enc := json.NewEncoder(out)
	enc.SetEscapeHTML(false)
	if err := enc.Encode(token); err != nil {
		return err
	}
	out.Truncate(out.Len() - 1)
	return nil
}
