package forms

import (
	"fmt"
	"slices"
	"strings"
)

// CheckForm says what in a form cannot be meant, none where it can be filled in.
func CheckForm(f *Form) []*Error {
	w := &wrongs{}
	w.head(f.ID, f.Revision, f.InForce, f.Kinds)
	if _, task, ok := strings.Cut(f.ID, "/"); !ok || task != f.Task {
		w.add("form", "The id of a form is KIND/TASK and ends in its task: %q and %q do not fit.", f.ID, f.Task)
	}
	if !slices.Contains(Tasks(), f.Task) {
		w.add("task", "%q is no task. The tasks are: %s.", f.Task, strings.Join(Tasks(), ", "))
	}
	if f.LimitSet == "" {
		w.add("limit_set", "The limit set that judges this form is missing. Name one.")
	}
	asked := map[string]bool{}
	f.asks(func(a ask) bool { asked[a.Reading] = true; return true })
	if len(asked) == 0 {
		w.add("steps", "The form asks nothing. Give at least one question.")
	}
	isAsked := func(code string) bool {
		return asked[code] || slices.Contains([]string{"multiple", "phase_deg", "waveform", "loads_disconnected"}, code)
	}
	steps := map[string]bool{}
	for i := range f.Steps {
		s := &f.Steps[i]
		place := "steps." + s.Step
		if s.Step == "" || steps[s.Step] {
			place = fmt.Sprintf("steps.%d", i+1)
			w.add(place, "A step needs a name that no other step has.")
		}
		steps[s.Step] = true
		w.conditions(place+".closed_unless", s.ClosedUnless, isAsked)
		w.conditions(place+".closed_when", s.ClosedWhen, isAsked)
		for k := range s.Asks {
			w.ask(place, &s.Asks[k], isAsked)
		}
	}
	for _, field := range f.Needs {
		if !slices.Contains(deviceFields, field) {
			w.add("needs", "%q is no field of a device. Use one of: %s.", field, strings.Join(deviceFields, ", "))
		}
	}
	w.quick(f, asked)
	w.series(f, asked, steps)
	return w.list
}

// ask checks one question.
func (w *wrongs) ask(step string, a *Ask, asked func(string) bool) {
	place := step + "." + a.Reading
	if !w.reading(place, a.Reading) {
		return
	}
	code := codes[codeAt[a.Reading]]
	if a.Type != code.Type {
		w.add(place+".type", "%s is a %s, not a %q.", a.Reading, code.Type, a.Type)
	}
	if IsOwn(a.Reading) && strings.TrimSpace(a.Name) == "" {
		w.add(place+".name", "A check of your own needs its question in words.")
	}
	if a.Required && a.Expected {
		w.add(place+".required", "A question is required or expected, not both. Required: without it the entry is incomplete.")
	}
	if code.Type == TypeChoice && len(a.Options) < 2 {
		w.add(place+".options", "A choice needs at least two answers.")
	}
	for i, o := range a.Options {
		switch {
		case code.Type == TypeNumber:
			w.add(place+".options", "%s is a figure and has no list of answers.", a.Reading)
		case strings.TrimSpace(o) == "" || slices.Contains(a.Options[:i], o):
			w.add(place+".options", "Every answer stands once and is not empty.")
		case len(code.Options) > 0 && !slices.Contains(code.Options, o):
			w.add(place+".options", "%s is never %q. It is one of: %s.", a.Reading, o, strings.Join(code.Options, ", "))
		}
	}
	answers := a.Options
	if code.Type == TypeYesNo {
		answers = code.Options
	}
	for _, end := range a.Ends {
		if !slices.Contains(answers, end) {
			w.add(place+".ends", "The form ends at the answer %q, which cannot be given. The answers are: %s.", end, strings.Join(answers, ", "))
		}
	}
	if a.Or != "" && !asked(a.Or) {
		w.add(place+".or", "%s would answer as well, and no question asks it. Add the question or leave it out.", a.Or)
	}
	w.askFigure(place, a, &code)
	for _, why := range a.OfferMissing {
		if !slices.Contains(MissingReasons(), why) {
			w.add(place+".offer_missing", "%q is no reason for a missing reading. Use one of: %s.", why, strings.Join(MissingReasons(), ", "))
		}
	}
	w.conditions(place+".when", a.When, asked)
}

// askFigure checks how a figure is asked: its units, its bound, its scale.
func (w *wrongs) askFigure(place string, a *Ask, code *Code) {
	if a.Unit != "" && a.Unit != code.Unit {
		w.add(place+".unit", "%s is held in %q, not in %q.", a.Reading, code.Unit, a.Unit)
	}
	for _, unit := range a.Units {
		if _, ok := perUnit(code.Unit, unit); !ok {
			w.add(place+".units", "%s cannot be typed in %q: it is held in %q.", a.Reading, unit, code.Unit)
		}
	}
	if a.Bound != "" && a.Bound != "above" && a.Bound != "below" {
		w.add(place+".bound", "The bound is %q. It is above or below.", a.Bound)
	}
	s := a.Scale
	switch {
	case s == nil:
	case s.Shape != "log" && s.Shape != "linear":
		w.add(place+".scale.shape", "The scale is %q. It is log or linear.", s.Shape)
	case s.To <= s.From:
		w.add(place+".scale.to", "The scale ends (%s) before it begins (%s).", figureText(s.To), figureText(s.From))
	case s.Shape == "log" && s.From <= 0:
		w.add(place+".scale.from", "A log scale begins above 0.")
	}
}

// quick checks the one-tap answer: it states what is asked, never a figure.
func (w *wrongs) quick(f *Form, asked map[string]bool) {
	if f.Quick == nil {
		return
	}
	for code, answer := range f.Quick.Readings {
		place := "quick." + code
		if !w.reading(place, code) {
			continue
		}
		switch c := codes[codeAt[code]]; {
		case c.Type == TypeNumber:
			w.add(place, "One tap never states a figure.")
		case !asked[code]:
			w.add(place, "The tap answers %s, and no question asks it.", code)
		case len(c.Options) > 0 && !slices.Contains(c.Options, answer):
			w.add(place, "%s is never %q. It is one of: %s.", code, answer, strings.Join(c.Options, ", "))
		}
	}
	f.asks(func(a ask) bool {
		if _, stated := f.Quick.Readings[a.Reading]; a.Required && len(a.When) == 0 && !stated {
			w.add("quick."+a.Reading, "%s is required, and the one tap does not answer it: every tap would be incomplete. Make it expected or optional.", a.Reading)
		}
		return true
	})
}

// series checks the conditions a reading is required under.
func (w *wrongs) series(f *Form, asked, steps map[string]bool) {
	if f.Series == nil {
		return
	}
	if !steps[f.Series.Step] {
		w.add("series.step", "The series belongs to the step %q, which the form does not have.", f.Series.Step)
	}
	for i, c := range f.Series.Conditions {
		place := fmt.Sprintf("series.conditions.%d", i+1)
		if len(c.At) == 0 || len(c.AnyOf) == 0 {
			w.add(place, "A condition of the series says at what, and which readings are taken there.")
		}
		for _, code := range c.AnyOf {
			if w.reading(place+".any_of", code) && !asked[code] {
				w.add(place+".any_of", "%s is required there, and no question asks it.", code)
			}
		}
		w.conditions(place+".when", c.When, func(code string) bool { return asked[code] })
	}
}
