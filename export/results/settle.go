package results

import (
	"errors"
	"slices"
	"strings"

	"tripwell/forms"
	"tripwell/store"
	"tripwell/store/record"
)

// settle judges every test once all its rows are read, looks up what is in already, and drafts the rest.
func (p *planner) settle(v *store.View) error {
	for _, t := range p.order {
		o := p.outcome(t, "", t.row)
		if err := p.judge(t, &o); err != nil {
			return err
		}
		there, differs, err := p.known(v, t)
		switch {
		case err != nil:
			return err
		case differs:
			o.State, o.Text = LeftOut, "This test is in already, and with other values. Correct it on its own page, or leave the row out."
			p.rest = append(p.rest, restRow{t.row, t.head, o.Text})
		case there:
			o.State = There
			p.report.There++
		default:
			o.State = Taken
			p.report.Taken++
			p.report.Results[o.Result]++
			p.drafts = append(p.drafts, p.draft(t))
		}
		for _, at := range t.outcomes {
			o.Row = p.report.Outcomes[at].Row
			p.report.Outcomes[at] = o
		}
	}
	return nil
}

// known looks a test up by its id; differs says that the store holds other values under it.
func (p *planner) known(v *store.View, t *test) (there, differs bool, err error) {
	e, err := v.Entry(t.id)
	var refused *store.Error
	if errors.As(err, &refused) && refused.Code == "not_found" {
		return false, false, nil
	}
	if err != nil {
		return false, false, err
	}
	if e.Sealed != nil { // nobody can say any more what it said
		return true, false, nil
	}
	have := e.Original
	if !t.measured() {
		return true, len(have.Readings) > 0 || len(have.Series) > 0 || len(e.Corrections) == 0 && e.Withdrawn == nil && e.Verdict.Result != t.result, nil
	}
	return true, !sameJSON(have.Readings, t.readings) || !sameJSON(have.Series, t.series), nil
}

// judge fills in what the judgement says; what older lists state without readings stands as they say it.
func (p *planner) judge(t *test, o *Outcome) error {
	if !t.measured() {
		return nil
	}
	form := p.rules.forms[t.form]
	set, err := p.rules.limitSetOf(t.device, form, t.day)
	if err != nil {
		return err
	}
	o.Result = forms.Incomplete
	if set == nil {
		return nil
	}
	verdict, err := forms.Judge(form, set, t.entry())
	if err != nil {
		return nil // a rule of decision this program does not know judges nothing
	}
	o.Result = verdict.Result
	for _, f := range verdict.Findings {
		if f.Verdict != forms.Pass && f.Verdict != forms.NotJudged && f.Text != "" {
			o.Finding = f.Text
			break
		}
	}
	return nil
}

// draft is the record of a test.
func (p *planner) draft(t *test) store.Draft {
	body := map[string]any{"form": t.form, "source": p.ask.Source}
	if record.IsID(t.round) {
		body["round"] = t.round
	}
	d := store.Draft{ID: t.id, Kind: p.kind(), Log: t.Site, Subject: t.device.ID, By: p.by, Body: body}
	if t.measured() {
		body["given"], body["readings"] = t.given, t.readings
		if len(t.series) > 0 {
			body["series"] = t.series
		}
	} else {
		body["result"] = t.result
	}
	if p.ask.Past {
		body["day"] = t.day
	} else {
		d.At = moment(t.day, t.clock, t.site.Location(), p.now)
	}
	for name, text := range map[string]string{"read_by": t.readBy, "typed_by": t.typedBy, "note": strings.ToValidUTF8(strings.Join(t.notes, "\n"), "\uFFFD")} {
		if text != "" {
			body[name] = text
		}
	}
	return d
}

func (p *planner) outcome(t *test, state string, r *row) Outcome {
	return Outcome{Sheet: r.sheet.name, Row: r.n, State: state, Column: t.head, Tag: t.Tag, Place: placeText(t.Place), Task: t.task, Day: t.day.String(), Result: t.result}
}

func (p *planner) kind() string {
	if p.ask.Past {
		return "entry.imported"
	}
	return "entry.made"
}

func (t *test) measured() bool { return len(t.readings) > 0 || len(t.series) > 0 }

// placeText is a place in one line.
func placeText(p store.Place) string {
	parts := slices.DeleteFunc([]string{p.Context(), p.Name}, func(s string) bool { return s == "" })
	return strings.Join(parts, " · ")
}
