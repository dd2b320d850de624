package static

import (
	"bytes"
	"encoding/json"
	"fmt"
	"io/fs"
	"maps"
	"strings"
)

// Words is one language's catalogue: dotted key → sentence, with {name} places and, where a count decides the form,
// {"one": …, "other": …}.
type Words struct {
	flat map[string]word
}

type word struct{ one, other string }

// Languages are those the phone's words are written in, English first: it stands in for what another does not say.
var Languages = []string{"en", "es"}

// PhoneWordsName is the name of the words a phone takes along in one language.
func PhoneWordsName(lang string) string { return "words/phone-" + lang + ".json" }

// PhoneWords makes the catalogue a phone takes along: the sections that are translated, which are those its pages use
// (a test holds it), with English where the language lacks a key. A phone needs one language and no office page.
func PhoneWords(tree fs.FS, lang string) ([]byte, error) {
	read := func(lang string) (map[string]any, error) {
		raw, err := fs.ReadFile(tree, "words/"+lang+".json")
		if err != nil {
			return nil, fmt.Errorf("words %s: %w", lang, err)
		}
		var tree map[string]any
		if err := json.Unmarshal(raw, &tree); err != nil {
			return nil, fmt.Errorf("words %s: %w", lang, err)
		}
		return tree, nil
	}
	words, err := read(Languages[0])
	if err != nil {
		return nil, err
	}
	translated, err := read(Languages[1])
	if err != nil {
		return nil, err
	}
	own, err := read(lang)
	if err != nil {
		return nil, err
	}
	maps.DeleteFunc(words, func(section string, _ any) bool { return translated[section] == nil })
	lay(words, own)
	var line bytes.Buffer
	encoder := json.NewEncoder(&line)
	encoder.SetEscapeHTML(false)
	err = encoder.Encode(words)
	return line.Bytes(), err
}

// lay puts the words of one tree over those of another that has the same sections.
func lay(under, over map[string]any) {
	for key, v := range over {
		below, ok := under[key].(map[string]any)
		if inner, both := v.(map[string]any); ok && both {
			lay(below, inner)
		} else if under[key] != nil {
			under[key] = v
		}
	}
}

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
