package demo

import (
	"fmt"

	"tripwell/forms"
	"tripwell/store"
)

// rules are the forms and limit sets of the store, as a phone has them on board.
type rules struct {
	catalogue *forms.Catalogue
}

// readRules takes the shipped rules: a new store holds them at revision 1 and the demo never changes them.
func (b *builder) readRules() error {
	b.rules = &rules{forms.Shipped()}
	return nil
}

// form finds the form of a kind and a task with the limit set it is judged under.
func (r *rules) form(kind, task string) (*forms.Form, *forms.LimitSet, error) {
	id, ok := forms.FormFor(kind, task)
	if !ok {
		return nil, nil, fmt.Errorf("no form for %s of a %s", task, kind)
	}
	form, _ := r.catalogue.Form(id)
	set, ok := r.catalogue.LimitSet(forms.DefaultLimitSet(kind, false))
	if !ok {
		return nil, nil, fmt.Errorf("no limit set for a %s", kind)
	}
	return form, set, nil
}

// answer puts what is known of a device into the entry, question by question as the form asks them: what an answer
// closes or ends is not asked any more. Readings that belong to a series are left to it.
func answer(form *forms.Form, set *forms.LimitSet, e *forms.Entry, known map[string]forms.Reading) {
	e.Readings = map[string]forms.Reading{}
	for more := true; more; {
		more = false
		for _, ask := range form.Asked(set, *e) {
			_, done := e.Readings[ask.Reading]
			reading, ok := known[ask.Reading]
			if done || !ok || ask.Series {
				continue
			}
			e.Readings[ask.Reading] = reading
			more = true
			break
		}
	}
}

// shown is what the phone shows its tester.
func shown(form *forms.Form, set *forms.LimitSet, e forms.Entry) (store.Shown, error) {
	v, err := forms.Judge(form, set, e)
	if err != nil {
		return store.Shown{}, err
	}
	return store.Shown{Result: v.Result, LimitRev: set.Revision, Judge: forms.JudgeVersion}, nil
}
