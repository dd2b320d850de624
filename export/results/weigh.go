package results

import (
	"cmp"
	"errors"
	"fmt"
	"maps"
	"reflect"
	"slices"
	"strings"

	"github.com/go-json-experiment/json"

	"tripwell/export/paper"
	"tripwell/forms"
	"tripwell/store"
	"tripwell/store/record"
)

// weigh settles which test of its device a row states and takes it, or says why not.
func (p *planner) weigh(t *test) {
	if len(t.faults) > 0 {
		for _, f := range t.faults {
			p.holdTest(t, f)
		}
		return
	}
	left := func(column, value, text string) { p.holdTest(t, cellFault{column, value, text, false}) }
	if why := p.taskOf(t); why != "" {
		left(t.row.head(paper.AboutTask), t.row.text(paper.AboutTask), why)
		return
	}
	if t.day > t.site.today {
		left(cmp.Or(t.head, t.row.head(paper.AboutDay)), cmp.Or(t.value, t.day.String()), "This day is still to come. Correct the date.")
		return
	}
	form := p.rules.forms[t.form]
	if why := t.answers(form, p.ask.Past); why != "" {
		left(t.head, t.value, why)
		return
	}
	if t.doubt == nil {
		t.doubt = t.unlikelyDay()
	}
	if t.doubt != nil && !p.ask.Doubted {
		p.holdTest(t, *t.doubt)
		return
	}
	if why := p.describe(t, form); why != nil {
		p.holdTest(t, *why)
		return
	}
	p.join(t)
}

func (p *planner) holdTest(t *test, f cellFault) { p.hold(t.row, f.state(), f.column, f.value, f.text) }

// taskOf settles the task: as the column or the row says, as the whole file is said to be, or the one whose form asks
// most of what was read.
func (p *planner) taskOf(t *test) (why string) {
	tasks := forms.TasksOf(t.Kind)
	if t.task == "" {
		if text := t.row.text(paper.AboutTask); text != "" {
			if t.task = t.row.taskNamed(text); t.task == "" {
				return "This is no test that can be made. Write button, instrument or receptacle."
			}
		}
	}
	t.task = cmp.Or(t.task, p.ask.Task)
	switch {
	case t.task != "":
	case len(tasks) == 1:
		t.task = tasks[0]
	case t.result != "" && t.head != "" && slices.Contains(tasks, forms.TaskButton) && t.underMonth():
		t.task = forms.TaskButton // one column a month is how button tests are kept
	case t.head == aboutAllWell, t.pressedOnly() && slices.Contains(tasks, forms.TaskButton):
		t.task = forms.TaskButton
	case len(t.readings) == 0 && len(t.series) == 0:
		return "The row does not say which test was made. Add a column Test with button, instrument or receptacle, or say it for the whole file."
	default:
		t.task = p.mostAsked(t, tasks)
	}
	form, ok := forms.FormFor(t.Kind, t.task)
	if !ok || p.rules.forms[form] == nil {
		return fmt.Sprintf("A device of this kind has no %s test. Correct the test, or the tag.", t.task)
	}
	t.form = form
	return ""
}

func (t *test) underMonth() bool {
	at := slices.Index(t.row.sheet.heads, t.head)
	return at >= 0 && t.row.sheet.cols[at].about == aboutMonth
}

// pressedOnly reports that TEST or RESET was pressed and nothing measured.
func (t *test) pressedOnly() bool {
	pressed := false
	for code := range t.readings {
		known, _ := forms.CodeOf(code)
		if known.Type == forms.TypeNumber {
			return false
		}
		pressed = pressed || code == "button_trips" || code == "button_resets"
	}
	return pressed && len(t.series) == 0
}

// taskNamed reads a task as people write it.
func (r *row) taskNamed(text string) string {
	low := strings.ToLower(strings.Join(strings.Fields(text), " "))
	if _, i := r.cell(paper.AboutTask); i >= 0 {
		if task, ok := r.sheet.cols[i].options[low]; ok {
			return task
		}
	}
	for _, hint := range []struct{ word, task string }{
		{"button", forms.TaskButton}, {"month", forms.TaskButton}, {"push", forms.TaskButton}, {"instrument", forms.TaskInstrument}, {"annual", forms.TaskInstrument},
		{"year", forms.TaskInstrument}, {"trip", forms.TaskInstrument}, {"receptacle", forms.TaskReceptacle}, {"outlet", forms.TaskReceptacle}, {"retention", forms.TaskReceptacle},
	} {
		if strings.Contains(low, hint.word) {
			return hint.task
		}
	}
	return ""
}

// mostAsked gives the task whose form asks most of the readings; of equals the first, which asks least besides.
func (p *planner) mostAsked(t *test, tasks []string) string {
	best, most := "", -1
	for _, task := range tasks {
		id, _ := forms.FormFor(t.Kind, task)
		form := p.rules.forms[id]
		if form == nil {
			continue
		}
		n := 0
		for _, step := range form.Steps {
			for _, ask := range step.Asks {
				if _, ok := t.readings[ask.Reading]; ok {
					n++
				}
				if ask.Series {
					n += len(t.series)
				}
			}
		}
		if n > most {
			best, most = task, n
		}
	}
	return best
}

// answers brings the readings into the form's own shape: the one-tap answer spelt out, conditions in columns of their own
// turned into the series the form asks for.
func (t *test) answers(form *forms.Form, past bool) (why string) {
	if t.head == aboutAllWell {
		if form.Quick == nil {
			return "This test has no answer for everything at once. Fill in its readings."
		}
		for code, value := range form.Quick.Readings {
			if _, given := t.readings[code]; !given {
				t.readings[code] = forms.Answer(value)
			}
		}
		t.head = ""
	}
	if len(t.readings) == 0 && len(t.series) == 0 && !past {
		return "The row says what came out and not what was read. Fill in the readings, or take the file in as past results."
	}
	if form.Series == nil || len(form.Series.Conditions) == 0 {
		return ""
	}
	at := map[string]any{}
	for key := range form.Series.Conditions[0].At {
		v, ok := t.readings[key].Float()
		if !ok {
			return ""
		}
		at[key] = v
	}
	item := forms.SeriesReading{At: at, Readings: map[string]forms.Reading{}}
	for _, step := range form.Steps {
		for _, ask := range step.Asks {
			if r, ok := t.readings[ask.Reading]; ok && ask.Series {
				item.Readings[ask.Reading] = r
				delete(t.readings, ask.Reading)
			}
		}
	}
	if len(item.Readings) == 0 {
		return ""
	}
	for key := range at {
		delete(t.readings, key)
	}
	t.series, t.long = append(t.series, item), true
	return ""
}

// longestNote is the most bytes of a note: a record holds 64 KiB with everything.
const longestNote = 8000

// longAgo is how many days back a test is doubted rather than believed; common practice, no source.
const longAgo = 40 * 365

// unlikelyDay names a day that can hardly be the day of this test.
func (t *test) unlikelyDay() *cellFault {
	doubt := func(text string) *cellFault {
		return &cellFault{cmp.Or(t.head, t.row.head(paper.AboutDay)), cmp.Or(t.value, t.day.String()), text, true}
	}
	switch {
	case t.Installed != forms.NoDay && t.day < t.Installed:
		return doubt(fmt.Sprintf("The device was installed on %s, after this day. Correct one of the dates, or take the row in as it stands.", t.Installed))
	case t.site.today-t.day > longAgo:
		return doubt("This day lies more than 40 years back. Correct the date, or take the row in as it stands.")
	}
	return nil
}

// describe adds what the judgement needs, and holds the whole against the form.
func (p *planner) describe(t *test, form *forms.Form) *cellFault {
	set, err := p.rules.limitSetOf(t.device, form, t.day)
	if err != nil {
		return &cellFault{text: "The limits of this test cannot be read. Try again."}
	}
	var in *store.Instrument
	if t.instrument != "" && t.task != forms.TaskButton {
		var why string
		if in, why = p.rules.instrument(t.instrument); why != "" {
			if !p.ask.Past {
				return &cellFault{column: t.row.head(paper.AboutInstrument), value: t.instrument, text: why}
			}
			t.notes = append(t.notes, t.row.head(paper.AboutInstrument)+": "+brief(t.instrument))
		}
	}
	if len(strings.Join(t.notes, "")) > longestNote {
		return &cellFault{column: t.row.head(paper.AboutNote), text: "The note is longer than an entry keeps. Shorten it."}
	}
	if err := p.finder.findRound(t); err != nil {
		return &cellFault{text: "The rounds of this site cannot be read. Try again."}
	}
	t.given = t.device.given(form, set, in)
	e := t.entry()
	if err := forms.Check(form, &e); err != nil {
		var refused *forms.Error
		if !errors.As(err, &refused) {
			return &cellFault{text: "This test cannot be taken in: " + err.Error()}
		}
		return &cellFault{column: t.headOf(refused.Field), text: refused.Text}
	}
	return nil
}

// headOf gives the heading under which a reading that a refusal names stands.
func (t *test) headOf(field string) string {
	for _, part := range strings.Split(field, ".") {
		for i, c := range t.row.sheet.cols {
			if c.reading == part && part != "" {
				return t.row.sheet.heads[i]
			}
		}
	}
	return field
}

func (t *test) entry() forms.Entry {
	return forms.Entry{Form: t.form, Given: t.given, Readings: t.readings, Series: t.series}
}

// join keeps a test, or adds a row's condition to the test it belongs to.
func (p *planner) join(t *test) {
	if t.long {
		key := strings.Join([]string{t.ID, t.form, t.day.String(), t.readBy, t.row.sheet.name}, "\x1f")
		if first, ok := p.long[key]; ok && first.takes(t) {
			maps.Copy(first.readings, t.readings)
			first.series = append(first.series, t.series...)
			p.place(first, t.row)
			return
		}
		p.long[key] = t
	}
	kind := p.kind()
	t.id = record.NamedID(p.org, t.site.Code, kind, t.device.ID, t.form, t.day.String(), t.clock)
	first, ok := p.ids[t.id]
	switch {
	case !ok:
		p.ids[t.id] = t
		p.order = append(p.order, t)
		p.place(t, t.row)
	case first.same(t):
		p.note(p.outcome(t, There, t.row))
		p.report.There++
	default:
		p.holdTest(t, cellFault{column: t.head, value: t.value, text: fmt.Sprintf("%s gives another result for the same test. Write the time of day beside both, or leave one out.", first.row.where())})
	}
}

// place notes a row of a test; what became of it is filled in once the test is settled.
func (p *planner) place(t *test, r *row) {
	t.outcomes = append(t.outcomes, len(p.report.Outcomes))
	p.note(p.outcome(t, "", r))
}

func (r *row) where() string {
	if r.sheet.name == "" {
		return fmt.Sprintf("Row %d", r.n)
	}
	return fmt.Sprintf("Row %d of %s", r.n, r.sheet.name)
}

// takes reports whether a row's condition is one more of the same test: a condition it does not have yet, and nothing
// else that differs.
func (t *test) takes(o *test) bool {
	if t.long != o.long || t.clockDiffersByMuch(o) {
		return false
	}
	for _, have := range t.series {
		for _, item := range o.series {
			if reflect.DeepEqual(have.At, item.At) {
				return false
			}
		}
	}
	for code, r := range o.readings {
		if have, ok := t.readings[code]; ok && !reflect.DeepEqual(have, r) {
			return false
		}
	}
	return true
}

// clockDiffersByMuch keeps a morning's and an afternoon's test apart: one test takes minutes.
func (t *test) clockDiffersByMuch(o *test) bool {
	minutes := func(clock string) int {
		var h, m int
		if _, err := fmt.Sscanf(clock, "%d:%d", &h, &m); err != nil {
			return 0
		}
		return 60*h + m
	}
	d := minutes(o.clock) - minutes(t.clock)
	return t.clock != "" && o.clock != "" && (d > 30 || d < -30)
}

func (t *test) same(o *test) bool {
	return t.result == o.result && sameJSON(t.readings, o.readings) && sameJSON(t.series, o.series)
}

func sameJSON(a, b any) bool {
	x, errX := json.Marshal(a, json.Deterministic(true))
	y, errY := json.Marshal(b, json.Deterministic(true))
	return errX == nil && errY == nil && string(x) == string(y)
}

func (p *planner) kind() string {
	if p.ask.Past {
		return "entry.imported"
	}
	return "entry.made"
}

func (p *planner) outcome(t *test, state string, r *row) Outcome {
	return Outcome{Sheet: r.sheet.name, Row: r.n, State: state, Column: t.head, Tag: t.Tag, Place: placeText(t.Place), Task: t.task, Day: t.day.String(), Result: t.result}
}

// placeText is a place in one line.
func placeText(p store.Place) string {
	parts := slices.DeleteFunc([]string{p.Context(), p.Name}, func(s string) bool { return s == "" })
	return strings.Join(parts, " · ")
}

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

func (t *test) measured() bool { return len(t.readings) > 0 || len(t.series) > 0 }

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
	have := e.Original
	if !t.measured() {
		return true, len(have.Readings) > 0 || len(have.Series) > 0 || len(e.Corrections) == 0 && e.Withdrawn == nil && !e.Sealed && e.Verdict.Result != t.result, nil
	}
	return true, !sameJSON(have.Readings, t.readings) || !sameJSON(have.Series, t.series), nil
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
