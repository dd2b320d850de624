package server

import (
	"cmp"
	"net/http"
	"net/url"
	"slices"
	"strings"
	"unicode/utf8"

	"github.com/google/uuid"
	"github.com/labstack/echo/v4"

	"tripwell/forms"
	"tripwell/store"
	"tripwell/store/record"
)

// formPage is every page that changes something. It carries the id of the record it will make, so that sending it twice
// makes one record, and it comes back with what was typed and with the message beside the field.
type formPage struct {
	Frame
	Crumbs                 []link
	Heading, Lead          string
	WrongHead              string
	Wrong                  []link
	Action, Submit, Cancel string
	Said                   string // what was just done
	Grave                  bool   // the button takes something away
	Upload                 bool   // it may carry a file
	Hidden                 []hidden
	Groups                 []fieldGroup
}

type hidden struct{ Name, Value string }

type fieldGroup struct {
	Legend, Note string
	Fields       []field
}

// field is one question of a form. Type is an input's type, or number | text-area | check | checks | photo; Options make a list.
type field struct {
	Name, Label, Type, Value, Hint, Unit, Error string
	Required, Wide                              bool
	Accept                                      string // kinds of file
	Auto                                        string // what a browser may fill in; "" = nothing
	Options                                     []option
	Known                                       []string // values to choose from while typing
	ID                                          string   // where two forms of a page ask by the same name; else the name serves
}

// Element is the id of the field's element.
func (f field) Element() string { return "f-" + cmp.Or(f.ID, f.Name) }

// Described names the elements that explain the field to a screen reader.
func (f field) Described() string {
	var ids []string
	if f.Hint != "" {
		ids = append(ids, f.Element()+"-h")
	}
	if f.Error != "" {
		ids = append(ids, f.Element()+"-e")
	}
	return strings.Join(ids, " ")
}

// What forms carry unseen: the id of the record a form makes, the subject's where it is new, the stamp of the moment the
// page was made, and the fields with concurrent losers, which are set even where nothing is changed, so that saving
// settles them.
const (
	recordField  = "record"
	subjectField = "subject"
	seenField    = "seen"
	settleField  = "settle"
	wasPrefix    = "was."
)

// typedForm is what came back from a form page.
type typedForm struct {
	url.Values
	ink   ink
	wrong map[string]string // message by field
	named []string          // fields with a message, in the order of asking
	text  string            // a message about the whole form
}

func (s *Server) typedForm(c echo.Context) (*typedForm, error) {
	values, err := decodeForm(c)
	return &typedForm{Values: values, ink: s.ink(), wrong: map[string]string{}}, err
}

// blankForm is the form of something new: it holds the ids of what it will make.
func (s *Server) blankForm(values map[string]string) (*typedForm, error) {
	f := &typedForm{Values: url.Values{}, ink: s.ink(), wrong: map[string]string{}}
	for _, name := range []string{recordField, subjectField} {
		id, err := uuid.NewV7()
		if err != nil {
			return nil, err
		}
		f.Set(name, id.String())
	}
	for name, value := range values {
		f.Set(name, value)
	}
	return f, nil
}

// editForm is the form of something that is there: it also holds what stood when it was made, and when that was.
func (s *Server) editForm(values map[string]string, lost []store.Conflict) (*typedForm, error) {
	f, err := s.blankForm(values)
	if err != nil {
		return nil, err
	}
	for name, value := range values {
		f.Set(wasPrefix+name, value)
	}
	f.Set(seenField, record.ClockText(uint64(s.store.Now().UnixMilli())<<16))
	for _, c := range lost {
		f.Add(settleField, c.Field)
	}
	return f, nil
}

// meanwhile refuses what somebody else changed after the page was made: the field then shows what was typed, says what
// stands now, and saving once more is a decision made in knowledge of it.
func (f *typedForm) meanwhile(now map[string]string) {
	for name, value := range now {
		if f.Has(wasPrefix+name) && f.changed(name) && f.Get(wasPrefix+name) != value && strings.TrimSpace(f.Get(name)) != value {
			f.refuse(name, f.ink.say("office.form.meanwhile", "value", cmp.Or(value, f.ink.say("office.form.nothing"))))
			f.Set(wasPrefix+name, value)
		}
	}
}

func (f *typedForm) refuse(name, message string) {
	if f.wrong[name] == "" {
		f.wrong[name] = message
		f.named = append(f.named, name)
	}
}

// takeRefusal puts a refusal of the store beside its field, or over the form; other errors are passed on.
func (f *typedForm) takeRefusal(err error) error {
	w, fault := wrongOf(err)
	if fault {
		return err
	}
	if w.Field != "" && f.Has(w.Field) {
		f.refuse(w.Field, w.Text)
	} else {
		f.text = w.Text
	}
	return nil
}

func (f *typedForm) ok() bool { return len(f.wrong) == 0 && f.text == "" }

// line reads a line of text of at most max characters.
func (f *typedForm) line(name string, max int) string {
	v := strings.TrimSpace(f.Get(name))
	if utf8.RuneCountInString(v) > max {
		f.refuse(name, f.ink.say("office.form.long", "n", max))
	}
	return v
}

func (f *typedForm) needed(name, label string, max int) string {
	v := f.line(name, max)
	if v == "" {
		f.refuse(name, f.ink.say("office.form.need", "name", label))
	}
	return v
}

// figure reads a number above 0 with a point or a comma; nil where nothing was typed.
func (f *typedForm) figure(name string) *float64 {
	v := strings.TrimSpace(f.Get(name))
	if v == "" {
		return nil
	}
	n, err := forms.ParseFigure(v, false)
	switch {
	case err != nil:
		f.refuse(name, err.Error())
		return nil
	case n.Bound != "" || n.Unit != "" || n.Value > 1e9 || n.Value < -1e9:
		f.refuse(name, f.ink.say("office.form.number"))
		return nil
	case n.Value < 0:
		f.refuse(name, f.ink.say("office.form.positive"))
		return nil
	}
	return &n.Value
}

// date reads a day; NoDay where nothing was typed.
func (f *typedForm) date(name string) forms.Day {
	v := strings.TrimSpace(f.Get(name))
	if v == "" {
		return forms.NoDay
	}
	d, err := forms.ParseDay(v)
	if err != nil {
		f.refuse(name, f.ink.say("office.form.day"))
		return forms.NoDay
	}
	return d
}

// choice reads one of a list.
func (f *typedForm) choice(name string, allowed ...string) string {
	v := f.Get(name)
	if !slices.Contains(allowed, v) {
		f.refuse(name, f.ink.say("office.form.choice"))
	}
	return v
}

// id reads an id the page made; a form without it is not ours.
func (f *typedForm) id(name string) string {
	v := f.Get(name)
	if _, err := uuid.Parse(v); err != nil {
		f.text = f.ink.say("office.form.broken")
		return ""
	}
	return strings.ToLower(v)
}

// changed tells whether a field was given another value than the page showed, so that a form sets only what its reader
// changed and leaves what others changed meanwhile.
func (f *typedForm) changed(name string) bool {
	if slices.Contains(f.Values[settleField], name) {
		return true
	}
	return strings.TrimSpace(f.Get(name)) != strings.TrimSpace(f.Get(wasPrefix+name))
}

// setText puts a changed text into a set; an emptied field is cleared.
func (f *typedForm) setText(set map[string]any, key, name, value string) {
	if !f.changed(name) {
		return
	}
	if set[key] = value; value == "" {
		set[key] = nil
	}
}

func (f *typedForm) setFigure(set map[string]any, key, name string, value *float64) {
	if !f.changed(name) {
		return
	}
	if set[key] = nil; value != nil {
		set[key] = *value
	}
}

// setBody is the body of a record that sets fields.
func (f *typedForm) setBody(set map[string]any) map[string]any {
	body := map[string]any{"set": set}
	if seen := f.Get(seenField); seen != "" {
		body["seen"] = seen
	}
	return body
}

// fill puts values and messages into the fields of a page, and the hidden ones beside them.
func (f *typedForm) fill(p *formPage) {
	for _, name := range []string{recordField, subjectField, seenField} {
		if f.Has(name) {
			p.Hidden = append(p.Hidden, hidden{name, f.Get(name)})
		}
	}
	for _, name := range f.Values[settleField] {
		p.Hidden = append(p.Hidden, hidden{settleField, name})
	}
	labels := map[string]string{}
	for g := range p.Groups {
		for i := range p.Groups[g].Fields {
			q := &p.Groups[g].Fields[i]
			if q.Type == "photo" && q.Accept == "" {
				q.Accept = "image/jpeg,image/png"
			}
			if labels[q.Name] = q.Label; q.Type == "" {
				q.Type = "text"
			}
			q.Value, q.Error = f.Get(q.Name), f.wrong[q.Name]
			for o := range q.Options {
				q.Options[o].Chosen = slices.Contains(f.Values[q.Name], q.Options[o].Value) || len(f.Values[q.Name]) == 0 && q.Options[o].Value == ""
			}
			if f.Has(wasPrefix + q.Name) {
				p.Hidden = append(p.Hidden, hidden{wasPrefix + q.Name, f.Get(wasPrefix + q.Name)})
			}
		}
	}
	if f.text != "" {
		p.Wrong = append(p.Wrong, link{Text: f.text})
	}
	for _, name := range f.named {
		line := link{Text: f.wrong[name]}
		if labels[name] != "" {
			if line.Href = "#f-" + name; !strings.HasPrefix(line.Text, labels[name]) {
				line.Text = labels[name] + ": " + line.Text
			}
		}
		p.Wrong = append(p.Wrong, line)
	}
	p.WrongHead = f.ink.say("office.form.wrong", "n", len(p.Wrong))
}

// formBack sends a form page: as new, or with its messages.
func (s *Server) formBack(c echo.Context, f *typedForm, p formPage) error {
	f.fill(&p)
	status := http.StatusOK
	if !f.ok() {
		status = http.StatusUnprocessableEntity
	}
	return s.page(c, status, "form.html", p)
}

// append writes the drafts of a form in the name of whoever signed in.
func (s *Server) append(c echo.Context, drafts ...store.Draft) error {
	for i := range drafts {
		drafts[i].By = person(c).ID
	}
	_, err := s.store.Append(c.Request().Context(), drafts...)
	return err
}

// optional makes the options of a list that may be left open.
func optional(none string, pairs ...string) []option {
	return append([]option{{Value: "", Text: none}}, choices("", pairs...)...)
}
