package forms

import (
	"errors"
	"fmt"
	"regexp"
	"slices"
	"strings"

	"github.com/go-json-experiment/json"
	"github.com/go-json-experiment/json/jsontext"
)

// A form or a limit set is data that people write: what cannot be meant is refused before it judges anybody's test. Every
// refusal is an *Error whose Field is the place ("limits.trip-time.max", "steps.button.button_trips.options").

// ParseLimitSet reads a limit set as people write it: no name twice, none that is not known. The set may be used only
// where there are no refusals.
func ParseLimitSet(raw []byte) (*LimitSet, []*Error) {
	type plainSet LimitSet
	if err := strict(raw, &plainSet{}); err != nil {
		return nil, []*Error{err}
	}
	s := &LimitSet{InForce: NoDay}
	if err := json.Unmarshal(raw, s); err != nil {
		return nil, []*Error{invalid("", "The limit set is not readable: "+err.Error()+".")}
	}
	return s, CheckLimitSet(s)
}

// ParseForm reads a form as people write it, as ParseLimitSet reads a limit set.
func ParseForm(raw []byte) (*Form, []*Error) {
	type plainForm Form
	if err := strict(raw, &plainForm{}); err != nil {
		return nil, []*Error{err}
	}
	f := &Form{InForce: NoDay}
	if err := json.Unmarshal(raw, f); err != nil {
		return nil, []*Error{invalid("", "The form is not readable: "+err.Error()+".")}
	}
	return f, CheckForm(f)
}

// strict reads JSON into a value of a type without methods, so that unknown members are seen at every depth.
func strict(raw []byte, into any) *Error {
	err := json.Unmarshal(raw, into, json.RejectUnknownMembers(true))
	if err == nil {
		return nil
	}
	var syntax *jsontext.SyntacticError
	var meaning *json.SemanticError
	place := func(p jsontext.Pointer) string {
		return strings.ReplaceAll(strings.TrimPrefix(string(p), "/"), "/", ".")
	}
	switch {
	case errors.As(err, &syntax) && errors.Is(err, jsontext.ErrDuplicateName):
		return invalid(place(syntax.JSONPointer), fmt.Sprintf("A name stands twice, at byte %d. Keep one of the two.", syntax.ByteOffset))
	case errors.As(err, &syntax):
		return invalid(place(syntax.JSONPointer), fmt.Sprintf("This is not well-formed JSON at byte %d. Mend it there.", syntax.ByteOffset))
	case errors.As(err, &meaning) && errors.Is(err, json.ErrUnknownName):
		at := place(meaning.JSONPointer)
		return invalid(at, fmt.Sprintf("%q is no member that is known here. Correct its spelling or leave it out.", at[strings.LastIndexByte(at, '.')+1:]))
	case errors.As(err, &meaning):
		return invalid(place(meaning.JSONPointer), "The value has the wrong kind: a number where a word belongs, or the other way round.")
	}
	return invalid("", "This is not readable: "+err.Error()+".")
}

// wrongs gathers refusals.
type wrongs struct{ list []*Error }

func (w *wrongs) add(place, format string, a ...any) {
	w.list = append(w.list, invalid(place, fmt.Sprintf(format, a...)))
}

var idShape = regexp.MustCompile(`^[a-z0-9]+(-[a-z0-9]+)*$`)

// head checks what forms and limit sets have in common.
func (w *wrongs) head(id string, revision int, inForce Day, kinds []string) {
	if !idShape.MatchString(strings.ReplaceAll(id, "/", "-")) || len(id) > 60 {
		w.add("id", "The id %q must be lower-case letters, digits and single hyphens, at most 60.", id)
	}
	if revision < 1 || revision > 1_000_000 {
		w.add("revision", "The revision is %d. Revisions count from 1.", revision)
	}
	if inForce == NoDay {
		w.add("in_force", "The first day in force is missing. Write it as 2026-12-31.")
	}
	if len(kinds) == 0 {
		w.add("kinds", "No device kind is named. Name at least one of: %s.", strings.Join(Kinds(), ", "))
	}
	for i, kind := range kinds {
		switch {
		case !slices.Contains(Kinds(), kind):
			w.add("kinds", "%q is no device kind. The kinds are: %s.", kind, strings.Join(Kinds(), ", "))
		case slices.Contains(kinds[:i], kind):
			w.add("kinds", "The kind %q stands twice. Keep one.", kind)
		}
	}
}

// deviceFields are the fields of a device and of what is given that a condition or a limit may name.
var deviceFields = []string{"kind", "rated_residual_ma", "equipment_ground", "supply", "gauge", "waveform", "rating_a", "nominal_v",
	"faces", "delayed", "make", "model", "serial", "installed", "limit_set", "formerly", "where", "note", "length_m", "locking",
	"no_neutral", "supply_edition", "double_insulated", "new_construction", "quiet_ground", "earthing", "special_location", "distribution", "rcd_tests",
	"test_resistor_ohm"}

// conditions checks a list of conditions, all of which must hold at once; asked tells whether a form asks a reading (nil:
// any may be named).
func (w *wrongs) conditions(place string, list []Condition, asked func(code string) bool) {
	for i := range list {
		c := &list[i]
		at := fmt.Sprintf("%s.%d", place, i+1)
		switch {
		case (c.Reading == "") == (c.Field == ""):
			w.add(at, "A condition names one reading or one field of the device.")
			continue
		case c.Field != "":
			if !slices.Contains(deviceFields, c.Field) {
				w.add(at, "%q is no field of a device. Use one of: %s.", c.Field, strings.Join(deviceFields, ", "))
			}
		default:
			if !w.reading(at, c.Reading) {
				continue
			}
			if asked != nil && !asked(c.Reading) {
				w.add(at, "The condition asks for %s, and no question of this form gives it. Add the question or change the condition.", c.Reading)
			}
			w.conditionValues(at, c)
		}
		w.conditionSense(at, c)
	}
}

// conditionValues holds what a condition compares with against what its reading can be.
func (w *wrongs) conditionValues(at string, c *Condition) {
	code := codes[codeAt[c.Reading]]
	for _, v := range slices.Concat(c.Is, c.Not) {
		text, isText := v.(string)
		switch {
		case code.Type == TypeNumber && isText:
			w.add(at, "%s is a figure and is never %q.", c.Reading, text)
		case code.Type != TypeNumber && !isText:
			w.add(at, "%s is a word and is never a figure.", c.Reading)
		case isText && len(code.Options) > 0 && !slices.Contains(code.Options, text):
			w.add(at, "%s is never %q. It is one of: %s.", c.Reading, text, strings.Join(code.Options, ", "))
		}
	}
	if code.Type != TypeNumber && (c.AtLeast != nil || c.AtMost != nil || c.Above != nil || c.Below != nil) {
		w.add(at, "%s is a word: it cannot be above or below anything.", c.Reading)
	}
}

// conditionSense refuses conditions that say nothing or can never hold.
func (w *wrongs) conditionSense(at string, c *Condition) {
	bounded := c.AtLeast != nil || c.AtMost != nil || c.Above != nil || c.Below != nil
	if !bounded && len(c.Is) == 0 && len(c.Not) == 0 && !c.Missing {
		w.add(at, "The condition says nothing. Give one of is, not, at_least, at_most, above, below or missing.")
		return
	}
	if c.Missing && (bounded || len(c.Is) > 0) {
		w.add(at, "What is missing has no value: the condition can never hold.")
	}
	for _, low := range []*float64{c.AtLeast, c.Above} {
		for _, high := range []*float64{c.AtMost, c.Below} {
			if low != nil && high != nil && (*low > *high || *low == *high && (low == c.Above || high == c.Below)) {
				w.add(at, "Nothing lies above %s and below %s: the condition can never hold.", figureText(*low), figureText(*high))
			}
		}
	}
	if len(c.Is) > 0 && !slices.ContainsFunc(c.Is, func(v any) bool { return !c.Not.has(v) }) {
		w.add(at, "Every value asked for is also excluded: the condition can never hold.")
	}
}

// reading reports whether a code is known, and refuses it where it is not.
func (w *wrongs) reading(place, code string) bool {
	if _, ok := codeAt[code]; !ok {
		w.add(place, `%q is no reading that is known. "tripwell forms" lists them.`, code)
		return false
	}
	return true
}

func figureText(v float64) string { return strings.TrimSuffix(fmt.Sprintf("%g", v), ".0") }
