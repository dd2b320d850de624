package store

import (
	"encoding/json"

	"tripwell/forms"
	"tripwell/store/record"
)

// ruleSet keeps a revision of a form, a limit set, a plan or a list of usual places, and judges or dates again what it touches. Of two records
// that state the same revision the larger (clock, id) stands.
func (f *fold) ruleSet(r *record.Record) error {
	var body struct{ Form, Limits, Plan, Usual json.RawMessage }
	if err := json.Unmarshal(r.Body, &body); err != nil {
		return badBody("", "The body of %s is not readable: %v.", r.Kind, err)
	}
	l, err := f.log(r.Log)
	if err != nil {
		return err
	}
	p := packer{make([]byte, 0, 24+len(r.Body))}
	p.fixed(r.Clock)
	id := parseID(r.ID)
	p.id(id)
	var key []byte
	todo := todoItem{what: todoEntries, site: l.ord, from: forms.NoDay}
	switch r.Kind {
	case "forms.set":
		form, err := parseChecked[forms.Form](body.Form, "form")
		if err == nil {
			err = firstWrong("form", forms.CheckForm(form))
		}
		if err != nil {
			return err
		}
		key, p.b = ruleKey(ruleForm, l.ord, form.ID, form.Revision), append(p.b, body.Form...)
	case "limits.set":
		set, err := parseChecked[forms.LimitSet](body.Limits, "limits")
		if err == nil {
			err = firstWrong("limits", forms.CheckLimitSet(set))
		}
		if err != nil {
			return err
		}
		key, p.b = ruleKey(ruleLimit, l.ord, set.ID, set.Revision), append(p.b, body.Limits...)
		todo.from = set.InForce
	case "plan.set":
		plan, err := parseChecked[forms.Plan](body.Plan, "plan")
		if err != nil {
			return err
		}
		if err := plan.Check(); err != nil {
			return badBody("plan", "The plan cannot be followed: %v.", err)
		}
		key, p.b = ruleKey(rulePlan, l.ord, plan.ID, plan.Revision), append(p.b, body.Plan...)
		todo.what = todoDates
	case "usual.set":
		usual, err := parseChecked[forms.UsualPlaces](body.Usual, "usual")
		if err == nil {
			err = firstWrong("usual", forms.CheckUsualPlaces(usual))
		}
		if err != nil {
			return err
		}
		key, p.b = ruleKey(ruleUsual, l.ord, usual.ID, usual.Revision), append(p.b, body.Usual...)
		todo.what = 0
	}
	if old := f.on(bktRule).get(key); old != nil {
		u := unpacker{b: old}
		if (binding{clock: r.Clock, id: id}).before(binding{clock: u.fixed(), id: u.id()}) {
			return nil
		}
		if was, err := parseRule[forms.LimitSet](old); r.Kind == "limits.set" && err == nil {
			todo.from = min(todo.from, was.InForce) // what it judged until now is judged again
		}
	}
	f.on(bktRule).put(key, p.b)
	f.rules.forget()
	if r.Log == record.Org {
		todo.site = 0
	}
	if todo.what == 0 { // nothing is judged or dated by it
		return nil
	}
	return f.queue(todo)
}

// firstWrong refuses a rule for the first thing in it that cannot be meant.
func firstWrong(member string, list []*forms.Error) error {
	if len(list) == 0 {
		return nil
	}
	return badBody(member+"."+list[0].Field, "%s", list[0].Text)
}

func parseChecked[T any](raw json.RawMessage, field string) (*T, error) {
	t, err := parseRule[T](append(make([]byte, 24), raw...))
	if err != nil {
		return nil, badBody(field, "The body's %q is not readable: %v.", field, err)
	}
	var id string
	var revision int
	switch v := any(t).(type) {
	case *forms.Form:
		id, revision = v.ID, v.Revision
	case *forms.LimitSet:
		id, revision = v.ID, v.Revision
	case *forms.Plan:
		id, revision = v.ID, v.Revision
	case *forms.UsualPlaces:
		id, revision = v.ID, v.Revision
	}
	if id == "" || len(id) > 200 || revision < 1 {
		return nil, badBody(field, "The body's %q needs an id and a revision from 1.", field)
	}
	return t, nil
}
