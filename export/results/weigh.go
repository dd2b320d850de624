package results

import (
	"cmp"
	"errors"
	"fmt"
	"slices"
	"strings"

	"tripwell/export/paper"
	"tripwell/forms"
	"tripwell/store"
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
