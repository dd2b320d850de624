package store

import (
	"bytes"
	"cmp"
	"encoding/json"
	"errors"
	"fmt"
	"slices"
	"time"
	"unicode"
	"unicode/utf8"

	"tripwell/forms"
	"tripwell/store/record"
)

// Revision is one revision of a form, a limit set or a plan: what it says, since when, and who set it why.
type Revision struct {
	Kind     string // limits.set | forms.set | plan.set
	ID       string // of the set or the form
	Site     string // id of the site whose own it is; "" = the organisation's
	Revision int
	InForce  forms.Day
	JSON     json.RawMessage // as its author sent it
	LimitSet *forms.LimitSet // of limits.set
	Form     *forms.Form     // of forms.set
	Plan     *forms.Plan     // of plan.set
	Record   string
	By       string // person; "" for what the program ships
	At       time.Time
	Reason   string
	seq      uint64
}

// LimitRevisions gives the revisions of the organisation's limit sets, or those of one site, by id, then by day in force.
// id "" is all.
func (v *View) LimitRevisions(site, id string) ([]Revision, error) {
	ord := v.orgLog()
	if site != "" {
		sv, err := v.siteNamed(site)
		if err != nil {
			return nil, err
		}
		site, ord = sv.ID, sv.ord
	}
	return v.revisions("limits.set", ruleLimit, ord, site, id)
}

// FormRevisions gives the revisions of forms, by id, then by day in force. id "" is all.
func (v *View) FormRevisions(id string) ([]Revision, error) {
	return v.revisions("forms.set", ruleForm, v.orgLog(), "", id)
}

// PlanRevisions gives the revisions of the organisation's plans, or those of one site, by id, then by day in force. id "" is
// all.
func (v *View) PlanRevisions(site, id string) ([]Revision, error) {
	ord := v.orgLog()
	if site != "" {
		sv, err := v.siteNamed(site)
		if err != nil {
			return nil, err
		}
		site, ord = sv.ID, sv.ord
	}
	return v.revisions("plan.set", rulePlan, ord, site, id)
}

func (v *View) revisions(kind string, typ byte, ord uint32, site, id string) ([]Revision, error) {
	out := []Revision{}
	if ord == 0 {
		return out, nil
	}
	o := overlay{bucket: v.tx.Bucket(bktRule)}
	for _, row := range o.list(rulePrefix(typ, ord, id)) {
		r, err := v.revision(kind, site, row)
		if err != nil {
			return nil, err
		}
		out = append(out, r)
	}
	slices.SortStableFunc(out, func(a, b Revision) int {
		return cmp.Or(cmp.Compare(a.ID, b.ID), cmp.Compare(a.InForce, b.InForce), cmp.Compare(a.Revision, b.Revision))
	})
	return out, nil
}

func (v *View) revision(kind, site string, row row) (Revision, error) {
	r := Revision{Kind: kind, Site: site, JSON: slices.Clone(ruleJSON(row.value))}
	if kind == "plan.set" {
		plan, err := parseRule[forms.Plan](row.value)
		if err != nil {
			return r, err
		}
		r.Plan, r.ID, r.Revision, r.InForce = plan, plan.ID, plan.Revision, plan.InForce
	} else if kind == "limits.set" {
		set, err := parseRule[forms.LimitSet](row.value)
		if err != nil {
			return r, err
		}
		r.LimitSet, r.ID, r.Revision, r.InForce = set, set.ID, set.Revision, set.InForce
	} else {
		form, err := parseRule[forms.Form](row.value)
		if err != nil {
			return r, err
		}
		r.Form, r.ID, r.Revision, r.InForce = form, form.ID, form.Revision, form.InForce
	}
	u := unpacker{b: row.value}
	u.fixed()
	id := u.id()
	seq, ok := v.seqOf(id)
	if u.bad || !ok {
		return r, errPacked
	}
	rec, _, _, err := readBook(v.tx, seq)
	if err != nil {
		return r, fmt.Errorf("revision %d of %s: %w", r.Revision, r.ID, err)
	}
	var body struct{ Reason string }
	_ = json.Unmarshal(rec.Body, &body) // a reason that is no text was refused
	r.Record, r.At, r.Reason, r.seq = rec.ID, rec.At, body.Reason, seq
	if rec.By != shippedBy {
		r.By = rec.By
	}
	return r, nil
}

// Standing is the limit set that applies to a device, and why: ByDevice, BySite, ByOrganisation or ByShipped. OwnRevision
// says that the site has revisions of the set of its own, which stand before the organisation's.
type Standing struct {
	Set         *forms.LimitSet // nil: no set applies, or none of that name is in force
	ID, Why     string
	OwnRevision bool
}

// StandingFor tells which limit set applies to a device on a day.
func (v *View) StandingFor(device string, on forms.Day) (Standing, error) {
	sv, d, err := v.findDevice(device)
	if err != nil {
		return Standing{}, err
	}
	ru := v.rules()
	st := Standing{ID: d.text("limit_set"), Why: ByDevice}
	if st.ID == "" {
		st.ID, st.Why = ru.setOfKind(sv.ord, v.orgLog(), d.text("kind"), string(d.value("delayed")) == "true", on)
	}
	if st.ID == "" {
		return st, nil
	}
	if st.Set = ru.revisionOn(sv.ord, st.ID, on); st.Set != nil {
		st.OwnRevision = true
		return st, nil
	}
	st.Set = ru.revisionOn(v.orgLog(), st.ID, on)
	return st, nil
}

// RuleDraft is a revision that somebody wants to make.
type RuleDraft struct {
	Kind   string // limits.set | forms.set | plan.set
	Site   string // id; "" = the organisation's
	JSON   json.RawMessage
	Reason string
}

// Draft gives the record to be appended.
func (d RuleDraft) Draft(id, by string) (Draft, error) {
	member, name, _, _, err := d.read()
	if err != nil {
		return Draft{}, err
	}
	subject, log := LimitSetSubject(name), d.Site
	switch d.Kind {
	case "forms.set":
		subject = FormSubject(name)
	case "plan.set":
		subject = PlanSubject(name)
	}
	if log == "" {
		log = record.Org
	}
	body := map[string]any{member: d.JSON}
	if d.Reason != "" {
		body["reason"] = d.Reason
	}
	return Draft{ID: id, Kind: d.Kind, Log: log, Subject: subject, By: by, Body: body}, nil
}

// read gives what a draft names; its first fault is an *Error whose field is the place.
func (d RuleDraft) read() (member, id string, revision int, inForce forms.Day, err error) {
	var wrong []*forms.Error
	if d.Kind == "plan.set" {
		plan, err := forms.ParsePlan(d.JSON)
		if err != nil {
			var wrong *forms.Error
			field := "plan"
			if errors.As(err, &wrong) {
				field = wrong.Field
			}
			return "plan", "", 0, forms.NoDay, &Error{Code: "invalid", Field: field, Text: sentence(err.Error())}
		}
		return "plan", plan.ID, plan.Revision, plan.InForce, nil
	}
	if d.Kind == "forms.set" {
		form, list := forms.ParseForm(d.JSON)
		if wrong = list; form != nil {
			member, id, revision, inForce = "form", form.ID, form.Revision, form.InForce
		}
	} else {
		set, list := forms.ParseLimitSet(d.JSON)
		if wrong = list; set != nil {
			member, id, revision, inForce = "limits", set.ID, set.Revision, set.InForce
		}
	}
	if len(wrong) > 0 {
		return member, id, revision, inForce, &Error{Code: "invalid", Field: wrong[0].Field, Text: wrong[0].Text}
	}
	return member, id, revision, inForce, nil
}

// sentence makes a sentence of what is wrong.
func sentence(text string) string {
	r, n := utf8.DecodeRuneInString(text)
	return string(unicode.ToUpper(r)) + text[n:] + "."
}

// Next makes the following revision of what a draft holds: it counts on from the newest the book has, unless the draft
// counts further already, and is in force from the day asked for; NoDay leaves the draft's own day where its revision is
// new, and is else today. same reports that the newest revision says just this already.
func (v *View) Next(d RuleDraft, inForce, today forms.Day) (next RuleDraft, same bool, err error) {
	_, id, revision, day, err := d.read()
	if err != nil {
		return d, false, err
	}
	var held []Revision
	switch d.Kind {
	case "forms.set":
		held, err = v.FormRevisions(id)
	case "plan.set":
		held, err = v.PlanRevisions(d.Site, id)
	default:
		held, err = v.LimitRevisions(d.Site, id)
	}
	if err != nil {
		return d, false, err
	}
	newest := 0
	for i := range held {
		newest = max(newest, held[i].Revision)
	}
	switch {
	case inForce != forms.NoDay:
		day = inForce
	case revision <= newest:
		day = today
	}
	counted := revision
	if revision <= newest {
		counted = newest + 1
	}
	for i := range held {
		if held[i].Revision == newest {
			if same, err = saysTheSame(d, held[i]); err != nil || same && (inForce == forms.NoDay || inForce == held[i].InForce) {
				return d, same, err
			}
		}
	}
	next = d
	next.JSON, err = d.numbered(counted, day)
	return next, false, err
}

// numbered gives the draft's JSON with another revision and day; the bytes stay where both are the draft's own.
func (d RuleDraft) numbered(revision int, day forms.Day) (json.RawMessage, error) {
	_, _, rev, in, err := d.read()
	if err != nil {
		return nil, err
	}
	if rev == revision && in == day {
		return encodeBody(d.JSON)
	}
	switch d.Kind {
	case "forms.set":
		form, _ := forms.ParseForm(d.JSON)
		form.Revision, form.InForce = revision, day
		return encodeBody(form)
	case "plan.set":
		plan, _ := forms.ParsePlan(d.JSON)
		plan.Revision, plan.InForce = revision, day
		return encodeBody(plan)
	}
	set, _ := forms.ParseLimitSet(d.JSON)
	set.Revision, set.InForce = revision, day
	return encodeBody(set)
}

// saysTheSame reports whether a draft differs from a revision in number and day at most.
func saysTheSame(d RuleDraft, r Revision) (bool, error) {
	a, err := d.numbered(1, 0)
	if err != nil {
		return false, err
	}
	b, err := RuleDraft{Kind: d.Kind, JSON: r.JSON}.numbered(1, 0)
	var e *Error
	if errors.As(err, &e) {
		return false, nil // of a newer program: it says more than we can read
	}
	return bytes.Equal(a, b), err
}
