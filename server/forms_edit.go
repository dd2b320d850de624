package server

import (
	"cmp"
	"net/http"
	"slices"

	"github.com/labstack/echo/v4"

	"tripwell/forms"
	"tripwell/store"
)

// formShownPage lists what a form asks, step by step, in its newest revision.
type formShownPage struct {
	Frame
	Crumbs         []link
	Heading, Under string
	By, Reason     string
	Actions        []link
	Steps          []stepShown
}

type stepShown struct {
	Name string
	Asks []askShown
}

type askShown struct{ Name, Need, Answers string }

func formHref(f *forms.Form) string { return "/forms/" + f.ID }

// formName names a form by its task and kinds.
func (s *Server) formName(f *forms.Form) string {
	return joined(s.ink().named("task", f.Task), s.kinds(f.Kinds[:min(len(f.Kinds), 1)]))
}

// formNow reads the newest revision of the form a path names.
func (s *Server) formNow(v *store.View, c echo.Context) (store.Revision, error) {
	all, err := v.FormRevisions(c.Param("kind") + "/" + c.Param("task"))
	if err == nil && len(all) == 0 {
		err = refuse(codeNotFound, "", s.words.Say("config.form_unknown"))
	}
	if err != nil {
		return store.Revision{}, err
	}
	return newestRevisions(all)[0], nil
}

func (s *Server) formShow(c echo.Context) error {
	k := s.ink()
	var view formShownPage
	err := s.store.View(scope(c), func(v *store.View) error {
		r, err := s.formNow(v, c)
		if err != nil {
			return err
		}
		name := s.formName(r.Form)
		view = formShownPage{Frame: s.frame(c, name, "set-up"), Crumbs: []link{{Href: "/set-up", Text: k.say("office.setup.title")}}, Heading: name,
			Under: joined(k.say("office.limits.for", "kinds", s.kinds(r.Form.Kinds)), k.say("office.limits.revision", "rev", r.Revision, "day", k.day(r.InForce))), Reason: r.Reason}
		if r.By != "" {
			view.By = k.say("config.set_by", "by", s.personName(v, r.By), "day", k.day(forms.DayOf(r.At)))
		}
		if view.Change {
			view.Actions = []link{{Href: formHref(r.Form) + "/edit", Text: k.say("config.form_change"), Here: true}}
		}
		for _, step := range r.Form.Steps {
			shown := stepShown{Name: k.named("step", step.Step)}
			for i := range step.Asks {
				shown.Asks = append(shown.Asks, s.askShown(&step.Asks[i]))
			}
			if len(shown.Asks) > 0 {
				view.Steps = append(view.Steps, shown)
			}
		}
		return nil
	})
	if err != nil {
		return err
	}
	return s.page(c, http.StatusOK, "form_shown.html", view)
}

func (s *Server) askShown(a *forms.Ask) askShown {
	k := s.ink()
	out := askShown{Name: cmp.Or(a.Name, k.say("reading."+a.Reading+".ask")), Need: k.say("config.need_" + need(a))}
	switch {
	case a.Type == forms.TypeNumber:
		out.Answers = k.named("unit", unitOf(a.Reading))
	default:
		options := a.Options
		if a.Type == forms.TypeYesNo {
			options = []string{"yes", "no"}
		}
		for _, o := range options {
			out.Answers = joined(out.Answers, k.answer(a.Reading, o))
		}
	}
	return out
}

// need is required, expected or optional.
func need(a *forms.Ask) string {
	switch {
	case a.Required:
		return "required"
	case a.Expected:
		return "expected"
	}
	return "optional"
}

func (s *Server) formEdit(c echo.Context) error { return s.formRevise(c, false) }

func (s *Server) formPreview(c echo.Context) error { return s.formRevise(c, true) }

// formRevise asks what the next revision of a form asks, and shows what it would change.
func (s *Server) formRevise(c echo.Context, sent bool) error {
	var r store.Revision
	var sets []*forms.LimitSet
	err := s.store.View(scope(c), func(v *store.View) (err error) {
		if r, err = s.formNow(v, c); err != nil {
			return err
		}
		sets, err = setsOfForm(v, r.Form)
		return err
	})
	if err != nil {
		return err
	}
	var f *typedForm
	if !sent {
		values := map[string]string{"in_force": forms.DayOf(s.store.Now()).String(), "check.level": forms.Must, "check.need": "optional"}
		for _, a := range questions(r.Form) {
			values["need."+a.Reading] = need(a)
		}
		if f, err = s.blankForm(values); err != nil {
			return err
		}
		return s.formBack(c, f, s.formForm(c, r.Form))
	}
	if f, err = s.typedForm(c); err != nil {
		return err
	}
	drafts := s.formDrafts(f, r.Form, sets)
	if f.ok() {
		err := s.revisionPage(c, f, revisionAsked{heading: s.formName(r.Form), back: formHref(r.Form) + "/edit", done: formHref(r.Form), day: f.date("in_force"), drafts: drafts})
		if err == nil {
			return nil
		}
		if err := f.takeRefusal(err); err != nil {
			return err
		}
	}
	return s.formBack(c, f, s.formForm(c, r.Form))
}

// questions lists a form's questions, each reading once.
func questions(f *forms.Form) []*forms.Ask {
	var out []*forms.Ask
	for i := range f.Steps {
		for j := range f.Steps[i].Asks {
			if a := &f.Steps[i].Asks[j]; !slices.ContainsFunc(out, func(b *forms.Ask) bool { return b.Reading == a.Reading }) {
				out = append(out, a)
			}
		}
	}
	return out
}

// setsOfForm gives the newest revisions of the organisation's sets that judge any kind of a form.
func setsOfForm(v *store.View, f *forms.Form) ([]*forms.LimitSet, error) {
	all, err := v.LimitRevisions("", "")
	var out []*forms.LimitSet
	for _, r := range newestRevisions(all) {
		if slices.ContainsFunc(r.LimitSet.Kinds, func(kind string) bool { return slices.Contains(f.Kinds, kind) }) {
			out = append(out, r.LimitSet)
		}
	}
	return out, err
}

// formDrafts are the revision of a form and, where a check with a limit is added, of the sets that judge it.
func (s *Server) formDrafts(f *typedForm, was *forms.Form, sets []*forms.LimitSet) []store.RuleDraft {
	k := s.ink()
	form, err := copyOf(was)
	if err != nil {
		f.text = k.say("office.form.broken")
		return nil
	}
	for _, a := range questions(was) {
		is := f.choice("need."+a.Reading, "required", "expected", "optional")
		if is == need(a) {
			continue
		}
		for i := range form.Steps {
			for j := range form.Steps[i].Asks {
				if b := &form.Steps[i].Asks[j]; b.Reading == a.Reading {
					b.Required, b.Expected = is == "required", is == "expected"
				}
			}
		}
	}
	reason := f.needed("reason", k.say("config.reason"), 300)
	code := s.addCheck(f, form)
	day := f.date("in_force")
	if day == forms.NoDay {
		f.refuse("in_force", k.say("office.form.need", "name", k.say("config.in_force")))
	}
	form.InForce = day
	raw, err := encodeRule(form)
	if err != nil {
		f.text = k.say("office.form.broken")
	}
	drafts := []store.RuleDraft{{Kind: "forms.set", JSON: raw, Reason: reason}}
	limit, limited := s.checkLimit(f, code)
	for _, set := range sets {
		if !limited {
			break
		}
		next, err := copyOf(set)
		if err == nil {
			next.Limits, next.InForce = append(next.Limits, limit), day
			raw, err = encodeRule(next)
		}
		if err != nil {
			f.text = k.say("office.form.broken")
		}
		drafts = append(drafts, store.RuleDraft{Kind: "limits.set", JSON: raw, Reason: reason})
	}
	return drafts
}

// addCheck puts the check a form asks for at the end of its last step; it gives its code, "" where none is asked for.
func (s *Server) addCheck(f *typedForm, form *forms.Form) string {
	k, name := s.ink(), f.line("check.name", 120)
	if name == "" {
		return ""
	}
	typ := f.choice("check.type", forms.TypeYesNo, forms.TypeChoice, forms.TypeNumber)
	code := ""
	for _, free := range forms.OwnCodes(typ) {
		if !slices.ContainsFunc(questions(form), func(a *forms.Ask) bool { return a.Reading == free }) {
			code = free
			break
		}
	}
	if code == "" {
		f.refuse("check.type", k.say("config.check_full"))
		return ""
	}
	needs := f.choice("check.need", "required", "expected", "optional")
	a := forms.Ask{Reading: code, Name: name, Type: typ, Required: needs == "required", Expected: needs == "expected"}
	if typ == forms.TypeChoice {
		if a.Options = listOf(f.line("check.options", 200)); len(a.Options) < 2 {
			f.refuse("check.options", k.say("config.check_options_need"))
		}
	}
	last := &form.Steps[len(form.Steps)-1]
	last.Asks = append(last.Asks, a)
	if needs == "required" && form.Quick != nil {
		form.Quick = nil // one tap no longer answers all that is required
	}
	return code
}

// checkLimit reads what a new check is held against; ok is false where it is only asked.
func (s *Server) checkLimit(f *typedForm, code string) (forms.Limit, bool) {
	least, most, oneOf := f.figure("check.min"), f.figure("check.max"), listOf(f.line("check.pass", 200))
	if code == "" || least == nil && most == nil && len(oneOf) == 0 {
		return forms.Limit{}, false
	}
	return forms.Limit{ID: "check-" + code[len("own_"):][:2] + "-" + code[len(code)-1:], Reading: code, Min: least, Max: most, OneOf: oneOf,
		Level: f.choice("check.level", forms.Must, forms.WatchOnly), Source: s.words.Say("config.own_source"), Status: s.words.Say("config.own_status"),
		Text: cmp.Or(f.line("check.text", 300), s.words.Say("config.outside"))}, true
}

// formForm is the page of a form's revision.
func (s *Server) formForm(c echo.Context, form *forms.Form) formPage {
	k, name := s.ink(), s.formName(form)
	needs := choices("", "required", k.say("config.need_required"), "expected", k.say("config.need_expected"), "optional", k.say("config.need_optional"))
	p := formPage{
		Frame: s.frame(c, name, "set-up"), Crumbs: []link{{Href: "/set-up", Text: k.say("office.setup.title")}, {Href: formHref(form), Text: name}},
		Heading: k.say("config.change_head", "name", name), Lead: k.say("config.form_lead"),
		Action: formHref(form) + "/edit", Submit: k.say("config.preview"), Cancel: formHref(form),
	}
	p.Groups = append(p.Groups, fieldGroup{Fields: []field{
		{Name: "in_force", Label: k.say("config.in_force"), Type: "date", Required: true},
		{Name: "reason", Label: k.say("config.reason"), Required: true, Wide: true},
	}})
	asked := fieldGroup{Legend: k.say("config.questions"), Note: k.say("config.questions_note")}
	for _, a := range questions(form) {
		asked.Fields = append(asked.Fields, field{Name: "need." + a.Reading, Label: cmp.Or(a.Name, k.say("reading."+a.Reading+".ask")), Options: slices.Clone(needs)})
	}
	p.Groups = append(p.Groups, asked, fieldGroup{Legend: k.say("config.check"), Note: k.say("config.check_note"), Fields: []field{
		{Name: "check.name", Label: k.say("config.check_name"), Wide: true},
		{Name: "check.type", Label: k.say("config.check_type"), Options: choices("", forms.TypeYesNo, k.say("config.type_yes_no"), forms.TypeChoice, k.say("config.type_choice"), forms.TypeNumber, k.say("config.type_number"))},
		{Name: "check.options", Label: k.say("config.check_options"), Hint: k.say("config.check_options_hint")},
		{Name: "check.need", Label: k.say("config.check_need"), Options: slices.Clone(needs)},
		{Name: "check.pass", Label: k.say("config.one_of"), Hint: k.say("config.one_of_hint")},
		{Name: "check.min", Label: k.say("config.least"), Type: "number"},
		{Name: "check.max", Label: k.say("config.most"), Type: "number"},
		{Name: "check.level", Label: k.say("config.level"), Options: s.levels(false)},
		{Name: "check.text", Label: k.say("config.text"), Hint: k.say("config.text_hint"), Wide: true},
	}})
	return p
}
