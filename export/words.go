package export

import (
	"encoding/json"
	"fmt"
	"strconv"
	"strings"

	"tripwell/forms"
	"tripwell/static"
	"tripwell/store"
)

// word looks a code up in a section of the catalogue; a code without a word is shown as it is.
func (b *book) word(section, code string) string {
	if code == "" {
		return ""
	}
	key := section + "." + code
	if w, ok := b.named[key]; ok {
		return w
	}
	w := code
	if b.words.Has(key) {
		w = b.words.Say(key)
	}
	b.named[key] = w
	return w
}

// readingName is the name of a reading without its unit.
func (b *book) readingName(code string) string {
	key := "reading." + code + ".name"
	if w, ok := b.named[key]; ok {
		return w
	}
	w := strings.ReplaceAll(code, "_", " ")
	switch column := "sheet.col." + code; {
	case b.words.Has(key):
		w = b.words.Say(key)
	case b.words.Has(column): // a field of the register
		w = b.words.Say(column)
	}
	b.named[key] = w
	return w
}

// option is an answer in words.
func (b *book) option(code, value string) string {
	for _, key := range []string{"option." + code + "." + value, "option." + value, "sheet." + value} {
		if b.words.Has(key) {
			return b.words.Say(key)
		}
	}
	return value
}

// conditions puts the conditions of a series reading in words: "Multiple 5, Phase 180".
func (b *book) conditions(at map[string]any) string {
	if len(at) == 0 {
		return ""
	}
	var parts []string
	for _, k := range sortedKeys(at) {
		v := fmt.Sprint(at[k])
		if s, ok := at[k].(string); ok {
			v = b.option(k, s)
		}
		parts = append(parts, b.readingName(k)+" "+v)
	}
	return strings.Join(parts, ", ")
}

// unit is the unit a reading's value is in, "" for answers.
func (b *book) unit(code string) string {
	c, _ := forms.CodeOf(code)
	return b.word("unit", c.Unit)
}

// value says what was read: a number where there is one, else words (">310", "open ground", "could not get to it").
func (b *book) value(code string, raw json.RawMessage) (number *float64, text string) {
	if len(raw) == 0 {
		return nil, ""
	}
	switch c := raw[0]; {
	case c == '-' || c >= '0' && c <= '9':
		if v, err := strconv.ParseFloat(string(raw), 64); err == nil {
			return &v, ""
		}
	case c == '"':
		var s string
		if json.Unmarshal(raw, &s) == nil {
			if s == "no-trip" {
				return nil, b.say("sheet.no_trip")
			}
			return nil, b.option(code, s)
		}
	case c == '{':
		var r struct {
			Above, Below *float64
			NoTrip       bool `json:"no_trip"`
			Missing      string
			Value        json.RawMessage
		}
		if json.Unmarshal(raw, &r) == nil {
			switch {
			case r.Missing != "":
				return nil, b.word("missing", r.Missing)
			case r.Above != nil:
				return nil, ">" + figureText(*r.Above)
			case r.Below != nil:
				return nil, "<" + figureText(*r.Below)
			case r.NoTrip:
				return nil, b.say("sheet.no_trip")
			case len(r.Value) > 0 && r.Value[0] != '{':
				return b.value(code, r.Value)
			}
		}
	}
	return nil, string(raw)
}

func figureText(v float64) string { return strconv.FormatFloat(v, 'f', -1, 64) }

// PlaceText is where a device sits, from the building down to the spot.
func PlaceText(p store.Place) string {
	var parts []string
	for _, s := range []string{p.Building, p.Floor, p.Room, p.Name} {
		if s != "" {
			parts = append(parts, s)
		}
	}
	return strings.Join(parts, " · ")
}

// TagText shows a tag in groups, K7Q-M2P-3, with plain hyphens: people search sheets for what they type.
func TagText(tag string) string {
	if len(tag) != 7 || strings.ContainsAny(tag, "- ") {
		return tag
	}
	return tag[:3] + "-" + tag[3:6] + "-" + tag[6:]
}

func limitRevision(set string, rev int) string {
	if set == "" {
		return ""
	}
	return set + " r" + strconv.Itoa(rev)
}

// ReadingText says a reading with its unit: "24 ms", ">310 ms", "Open ground"; "" where it says nothing.
func ReadingText(words *static.Words, code string, r forms.Reading) string {
	b := &book{words: words, named: map[string]string{}}
	if r.Missing != "" {
		return b.word("missing", r.Missing)
	}
	number, text := b.reading(code, r)
	if number != nil {
		text = figureText(*number)
	}
	if unit := b.unit(code); unit != "" && (number != nil || text != "" && (text[0] == '>' || text[0] == '<')) {
		text += " " + unit
	}
	return text
}
