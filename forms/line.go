package forms

import (
	"errors"
	"fmt"
	"reflect"
	"slices"
	"strings"

	"github.com/go-json-experiment/json"
	"github.com/go-json-experiment/json/jsontext"
)

// Line is one test to be judged without a store. Only Form and Readings are required; RatedResidualMA and Accuracy are
// short forms of the same members of Given.
type Line struct {
	Form            string              `json:"form"`
	LimitSet        string              `json:"limit_set,omitempty"` // default: the shipped one of the kind
	RatedResidualMA float64             `json:"rated_residual_ma,omitzero"`
	Accuracy        map[string]Accuracy `json:"accuracy,omitempty"`
	Given           Given               `json:"given,omitzero"`
	Readings        map[string]Reading  `json:"readings"`
	Series          []SeriesReading     `json:"series,omitempty"`
}

// DecodeLine reads one line of JSON strictly: no duplicate and no unknown names. The error is an *Error.
func DecodeLine(raw []byte, into *Line) error {
	if err := json.Unmarshal(raw, into, json.RejectUnknownMembers(true)); err != nil {
		return lineError(err)
	}
	return nil
}

// JudgeLine judges one line under the catalogue's forms and limit sets. The error is an *Error.
func (c *Catalogue) JudgeLine(line *Line) (Verdict, error) {
	if line.Form == "" {
		return Verdict{}, invalid("form", `Say which form this is, such as "gfci-receptacle/instrument". "tripwell forms" lists them.`)
	}
	form, ok := c.Form(line.Form)
	if !ok {
		return Verdict{}, invalid("form", fmt.Sprintf(`There is no form "%s". "tripwell forms" lists them.`, line.Form))
	}
	if line.Readings == nil {
		return Verdict{}, invalid("readings", `Give the readings as an object: {"form":"…","readings":{"button_trips":true}}.`)
	}
	e := Entry{Form: line.Form, Given: line.Given, Readings: line.Readings, Series: line.Series}
	if err := line.shortForms(&e.Given); err != nil {
		return Verdict{}, err
	}
	if err := Check(form, &e); err != nil {
		return Verdict{}, err
	}
	set, err := c.limitSetOf(line, form, &e.Given)
	if err != nil {
		return Verdict{}, err
	}
	return Judge(form, set, e)
}

// shortForms moves the line's short forms into what is given.
func (line *Line) shortForms(g *Given) error {
	if line.RatedResidualMA != 0 {
		if g.RatedResidualMA != 0 && g.RatedResidualMA != line.RatedResidualMA {
			return invalid("rated_residual_ma", "rated_residual_ma stands twice with different values. Keep one.")
		}
		g.RatedResidualMA = line.RatedResidualMA
	}
	if line.Accuracy != nil {
		if g.Accuracy != nil {
			return invalid("accuracy", "accuracy stands twice. Keep one.")
		}
		g.Accuracy = line.Accuracy
	}
	return nil
}

// limitSetOf finds the limit set a line names, or the shipped one of its kind.
func (c *Catalogue) limitSetOf(line *Line, form *Form, g *Given) (*LimitSet, error) {
	kind := g.Kind
	if kind == "" {
		kind = form.Kinds[0]
	}
	field, id := "limit_set", line.LimitSet
	if id == "" {
		field, id = "given.limit_set", g.LimitSet
	}
	if id == "" {
		id = DefaultLimitSet(kind, g.Delayed)
	}
	set, ok := c.LimitSet(id)
	if !ok {
		return nil, invalid(field, fmt.Sprintf(`There is no limit set "%s". "tripwell forms" lists them.`, id))
	}
	if !slices.Contains(set.Kinds, kind) {
		return nil, invalid(field, fmt.Sprintf(`The limit set "%s" holds no limits for the kind "%s". It serves: %s.`, id, kind, strings.Join(set.Kinds, ", ")))
	}
	return set, nil
}

// lineError makes a sentence of the JSON library's error, with the path of what is wrong.
func lineError(err error) *Error {
	var semantic *json.SemanticError
	if e, ok := asError(err); ok {
		if errors.As(err, &semantic) {
			return invalid(joinPath(dotted(semantic.JSONPointer), e.Field), e.Text)
		}
		return e
	}
	var syntactic *jsontext.SyntacticError
	if errors.As(err, &syntactic) {
		field := dotted(syntactic.JSONPointer)
		if errors.Is(err, jsontext.ErrDuplicateName) {
			return invalid(field, fmt.Sprintf(`The name "%s" stands twice in one object. Keep one.`, lastName(field)))
		}
		return invalid(field, fmt.Sprintf("This line is not one JSON object: it goes wrong at byte %d. Check quotes, commas and brackets there.", syntactic.ByteOffset))
	}
	if errors.As(err, &semantic) {
		field := dotted(semantic.JSONPointer)
		if errors.Is(err, json.ErrUnknownName) {
			return invalid(field, fmt.Sprintf(`"%s" is no name known here. Leave it out, or correct its spelling.`, lastName(field)))
		}
		if field == "" {
			return invalid("", "A line is one JSON object.")
		}
		return invalid(field, fmt.Sprintf("%s must be %s.", lastName(field), wanted(semantic.GoType)))
	}
	return invalid("", "This line is not one JSON object.")
}

// wanted says in words what a Go type is in JSON.
func wanted(t reflect.Type) string {
	for t != nil && t.Kind() == reflect.Pointer {
		t = t.Elem()
	}
	if t == nil {
		return "something else"
	}
	if t == reflect.TypeFor[Day]() {
		return "a date, written 2026-12-31"
	}
	switch t.Kind() {
	case reflect.String:
		return "text"
	case reflect.Bool:
		return "true or false"
	case reflect.Int:
		return "a whole number"
	case reflect.Float64:
		return "a number"
	case reflect.Slice:
		return "a list"
	}
	return "an object"
}

// dotted writes a JSON pointer as a path with dots.
func dotted(p jsontext.Pointer) string {
	var parts []string
	for token := range p.Tokens() {
		parts = append(parts, token)
	}
	return strings.Join(parts, ".")
}

func lastName(field string) string { return field[strings.LastIndexByte(field, '.')+1:] }

func joinPath(path, field string) string {
	switch {
	case field == "" || path == field || strings.HasSuffix(path, "."+field):
		return path
	case path == "":
		return field
	}
	return path + "." + field
}
