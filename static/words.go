package static

import (
	"encoding/json"
	"fmt"
	"strings"
)

// Words is one language's catalogue: dotted key → sentence, with {name} places and, where a count decides the form,
// {"one": …, "other": …}.
type Words struct {
	flat map[string]word
}

type word struct{ one, other string }

// ReadWords reads words/LANG.json.
func ReadWords(lang string) (*Words, error) {
	raw, err := Files.ReadFile("words/" + lang + ".json")
	if err != nil {
		return nil, fmt.Errorf("words %s: %w", lang, err)
	}
	var tree map[string]any
	if err := json.Unmarshal(raw, &tree); err != nil {
		return nil, fmt.Errorf("words %s: %w", lang, err)
	}
	w := &Words{flat: map[string]word{}}
	w.flatten("", tree)
	return w, nil
}

func (w *Words) flatten(prefix string, tree map[string]any) {
	for k, v := range tree {
		key := k
		if prefix != "" {
			key = prefix + "." + k
		}
		switch v := v.(type) {
		case string:
			w.flat[key] = word{v, v}
		case map[string]any:
			one, isOne := v["one"].(string)
			other, isOther := v["other"].(string)
			if isOne && isOther && len(v) == 2 {
				w.flat[key] = word{one, other}
				continue
			}
			w.flatten(key, v)
		}
	}
}

// Has reports whether a key is in the catalogue.
func (w *Words) Has(key string) bool { _, ok := w.flat[key]; return ok }

// Say gives the sentence of a key; pairs are name, value, … for its {name} places, and a pair "n" that is 1 picks the
// singular. An unknown key is given back as it is, so that a test can find it on a page.
func (w *Words) Say(key string, pairs ...any) string {
	entry, ok := w.flat[key]
	if !ok {
		return key
	}
	text := entry.other
	var replace []string
	for i := 0; i+1 < len(pairs); i += 2 {
		name, value := fmt.Sprint(pairs[i]), fmt.Sprint(pairs[i+1])
		if name == "n" && value == "1" {
			text = entry.one
		}
		replace = append(replace, "{"+name+"}", value)
	}
	if len(replace) == 0 {
		return text
	}
	return strings.NewReplacer(replace...).Replace(text)
}
