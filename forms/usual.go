package forms

import (
	"fmt"
	"slices"
	"strings"
	"unicode"
	"unicode/utf8"
)

// UsualPlaces lists the kinds of place that usually need ground-fault protection, with where that is said. It is a help to
// look, not a judgement: what a place needs is decided by the code in force there. An organisation keeps its own, a site
// may have another.
type UsualPlaces struct {
	ID       string       `json:"usual"`
	Revision int          `json:"revision"`
	InForce  Day          `json:"in_force"`
	Standard string       `json:"standard,omitempty"` // sites of another standard are not held against it; "" = all
	Places   []UsualPlace `json:"places"`
	// Follows says of a site's list that the organisation's stands here again from InForce on.
	Follows bool `json:"follows_organisation,omitzero"`
}

// UsualPlace is one kind of place.
type UsualPlace struct {
	Place  string   `json:"place"` // id, what a place's field usual says
	Name   string   `json:"name"`
	Words  []string `json:"words,omitempty"` // a place whose names hold one of them is taken for this kind
	Source string   `json:"source,omitempty"`
	Off    bool     `json:"off,omitzero"` // kept on the list, not looked for
}

// UsualPlacesID names the one list there is of a log, NoUsualPlace what a place says that is of no listed kind whatever its
// names suggest.
const (
	UsualPlacesID = "usual-places"
	NoUsualPlace  = "none"
)

// usualMost bounds a list and the texts in it.
const usualMost = 200

// Kind finds a kind of the list by its id.
func (u *UsualPlaces) Kind(id string) (UsualPlace, bool) {
	for _, p := range u.Places {
		if p.Place == id {
			return p, true
		}
	}
	return UsualPlace{}, false
}

// Match gives the kind a place is taken for: the one it says itself, else the first a word of which stands in its names. ok
// is false where none is looked for there.
func (u *UsualPlaces) Match(says string, names ...string) (kind UsualPlace, byName, ok bool) {
	if u == nil || says == NoUsualPlace {
		return UsualPlace{}, false, false
	}
	if says != "" {
		kind, ok = u.Kind(says)
		return kind, false, ok && !kind.Off
	}
	for _, p := range u.Places {
		if !p.Off && slices.ContainsFunc(p.Words, func(w string) bool {
			return slices.ContainsFunc(names, func(name string) bool { return holdsWord(name, w) })
		}) {
			return p, true, true
		}
	}
	return UsualPlace{}, false, false
}

// holdsWord reports whether a whole word, or its plural, stands in a text.
func holdsWord(text, word string) bool {
	text, word = strings.ToLower(text), strings.ToLower(strings.TrimSpace(word))
	if word == "" {
		return false
	}
	for from := 0; ; {
		at := strings.Index(text[from:], word)
		if at < 0 {
			return false
		}
		at += from
		after := text[at+len(word):]
		for _, plural := range []string{"es", "s", ""} {
			rest, cut := strings.CutPrefix(after, plural)
			if next, _ := utf8.DecodeRuneInString(rest); cut && !letter(next) {
				if before, _ := utf8.DecodeLastRuneInString(text[:at]); !letter(before) {
					return true
				}
			}
		}
		from = at + len(word)
	}
}

func letter(r rune) bool { return r != utf8.RuneError && (unicode.IsLetter(r) || unicode.IsDigit(r)) }

// CheckUsualPlaces lists what is wrong with a list.
func CheckUsualPlaces(u *UsualPlaces) (wrong []*Error) {
	say := func(i int, format string, a ...any) {
		wrong = append(wrong, &Error{Code: "invalid", Field: fmt.Sprintf("places.%d", i+1), Text: fmt.Sprintf(format, a...)})
	}
	if u.ID != UsualPlacesID {
		wrong = append(wrong, &Error{Code: "invalid", Field: "usual", Text: fmt.Sprintf("There is one list of usual places, %q.", UsualPlacesID)})
	}
	if len(u.Places) > usualMost {
		wrong = append(wrong, &Error{Code: "invalid", Field: "places", Text: fmt.Sprintf("A list holds %d kinds of place at most.", usualMost)})
	}
	met := map[string]bool{"": true, NoUsualPlace: true}
	for i, p := range u.Places {
		switch {
		case met[p.Place]:
			say(i, "The kind of place %q is named twice, or has no name of its own. Give each another one.", p.Place)
		case strings.TrimSpace(p.Name) == "" || utf8.RuneCountInString(p.Name) > usualMost:
			say(i, "The kind of place %q needs a name of at most %d characters.", p.Place, usualMost)
		case len(p.Words) > usualMost || slices.ContainsFunc(p.Words, func(w string) bool { return strings.TrimSpace(w) == "" || len(w) > usualMost }):
			say(i, "The words of %q are too many, empty or too long.", p.Name)
		}
		met[p.Place] = true
	}
	return wrong
}
