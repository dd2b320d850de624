package server

import (
	"cmp"
	"fmt"
	"net/url"
	"slices"
	"strconv"
	"strings"

	"github.com/labstack/echo/v4"

	"tripwell/forms"
	"tripwell/store"
)

// planNew asks for a plan of another name.
func (s *Server) planNew(c echo.Context) error {
	f, err := s.blankForm(nil)
	if err != nil {
		return err
	}
	s.planValues(f, &forms.Plan{Task: forms.TaskButton, Every: "P1M", Duty: forms.OnceEachPeriod})
	f.Set("new", "yes")
	return s.planBack(c, f, nil)
}

// planEdit asks what the next revision of a plan says.
func (s *Server) planEdit(c echo.Context) error {
	all, site, err := s.planNow(c)
	if err != nil {
		return err
	}
	f, err := s.blankForm(nil)
	if err != nil {
		return err
	}
	was := newestRevisions(all)[0].Plan
	s.planValues(f, was)
	f.Set("site", site.ID)
	return s.planBack(c, f, was)
}

// planPreview shows what a revision would change before it is accepted.
func (s *Server) planPreview(c echo.Context) error {
	f, err := s.typedForm(c)
	if err != nil {
		return err
	}
	was := &forms.Plan{}
	if f.Get("new") != "yes" {
		all, _, err := s.planNow(c)
		if err != nil {
			return err
		}
		was = newestRevisions(all)[0].Plan
	}
	draft, plan := s.planDraft(f, was)
	if f.ok() {
		err := s.planPreviewPage(c, f, draft, plan)
		if err == nil || !planRefused(f, err) {
			return err
		}
	}
	return s.planBack(c, f, was)
}

// planRefused puts a refusal of a plan beside the field that caused it; false for any other error.
func planRefused(f *typedForm, err error) bool {
	w, fault := wrongOf(err)
	if fault {
		return false
	}
	names := map[string]string{"every": "every_n", "grace": "grace_n", "lead": "lead_n", "start": "start_new", "first_round": "first_within", "plan": "id"}
	member := strings.TrimPrefix(w.Field, "plan.")
	if name := cmp.Or(names[member], member); f.Has(name) || names[member] != "" || member == "marks" || member == "occasions" {
		f.refuse(name, w.Text)
	} else {
		f.text = w.Text
	}
	return true
}

// planValues are the members of a plan as its form shows them.
func (s *Server) planValues(f *typedForm, p *forms.Plan) {
	split := func(name, duration string) {
		if n, unit, ok := splitDuration(duration); ok {
			f.Set(name+"_n", n)
			f.Set(name+"_unit", unit)
		}
	}
	split("every", p.Every)
	f.Set("grace_n", daysOf(p.Grace))
	f.Set("lead_n", daysOf(p.Lead))
	if p.Start != nil {
		f.Set("start_new", daysOf(p.Start.New))
		f.Set("start_replaced", daysOf(p.Start.Replaced))
		f.Set("start_imported", daysOf(p.Start.Imported))
	}
	if p.FirstRound != nil {
		f.Set("first_from", p.FirstRound.From.String())
		f.Set("first_within", daysOf(p.FirstRound.Within))
	}
	if p.Marks != nil {
		if n, unit, ok := splitDuration(p.Marks.Every); ok && unit == "M" {
			f.Set("marks_every", n)
		}
		var lines []string
		for _, m := range p.Marks.List {
			lines = append(lines, strings.TrimSpace(m.Word+", "+m.Colour))
		}
		f.Set("marks", strings.Join(lines, "\n"))
	}
	for name, v := range map[string]string{"name": p.Name, "task": p.Task, "duty": p.Duty, "count": cmp.Or(p.Count, countOf(p.Duty)), "source": p.Source, "in_force": forms.DayOf(s.store.Now()).String()} {
		f.Set(name, v)
	}
	f.Values["kinds"] = p.Kinds
	within := ""
	for _, cause := range forms.Causes() {
		if i, ok := p.Answers(cause); ok {
			f.Add("occasions", cause)
			if !i.Zero() {
				within = strconv.Itoa(int(forms.Day(0).Add(i)))
			}
		}
	}
	f.Set("occasions_n", within)
}

func countOf(duty string) string {
	if duty == forms.NotToExceed {
		return forms.Rolling
	}
	return forms.Calendar
}

// splitDuration gives a duration of one unit as its figure and unit (D, W, M or Y).
func splitDuration(duration string) (n, unit string, ok bool) {
	i, err := forms.ParseInterval(duration)
	switch {
	case err != nil || i.Zero() || i.Months != 0 && i.Days != 0:
		return "", "", false
	case i.Months != 0 && i.Months%12 == 0 && strings.HasSuffix(duration, "Y"):
		return strconv.Itoa(i.Months / 12), "Y", true
	case i.Months != 0:
		return strconv.Itoa(i.Months), "M", true
	case i.Days%7 == 0:
		return strconv.Itoa(i.Days / 7), "W", true
	}
	return strconv.Itoa(i.Days), "D", true
}

// daysOf gives a duration in days, of months 31 each: a form's figure, never shorter than what stands.
func daysOf(duration string) string {
	i, err := forms.ParseInterval(duration)
	if duration == "" || err != nil {
		return ""
	}
	return strconv.Itoa(31*i.Months + i.Days)
}

// planDraft is the revision a form asks for.
func (s *Server) planDraft(f *typedForm, was *forms.Plan) (store.RuleDraft, *forms.Plan) {
	k := s.ink()
	p := *was
	if f.Get("new") == "yes" {
		p.ID, p.Task, p.Status = f.needed("id", k.say("config.id"), 60), f.choice("task", forms.Tasks()...), k.say("config.own_status")
		if p.ID != "" && !slices.Contains([]string{"", p.ID}, url.PathEscape(p.ID)) {
			f.refuse("id", k.say("config.id_hint"))
		}
	}
	p.Revision, p.Name = max(p.Revision, 1), f.line("name", 80)
	if p.Kinds = f.Values["kinds"]; len(p.Kinds) == 0 {
		f.refuse("kinds", k.say("plans.need_kind"))
	}
	p.Every = "P" + f.whole("every_n", 1) + f.choice("every_unit", "D", "W", "M", "Y")
	p.Duty, p.Count = f.choice("duty", forms.NotToExceed, forms.OnceEachPeriod), f.choice("count", forms.Rolling, forms.Calendar)
	p.Grace, p.Lead = f.inDays("grace_n", was.Grace), f.inDays("lead_n", was.Lead)
	start := forms.Start{}
	if was.Start != nil {
		start = *was.Start
	}
	start = forms.Start{New: f.inDays("start_new", start.New), Replaced: f.inDays("start_replaced", start.Replaced), Imported: f.inDays("start_imported", start.Imported)}
	if p.Start = &start; start == (forms.Start{}) {
		p.Start = nil
	}
	p.FirstRound = nil
	if from, within := f.date("first_from"), f.inDays("first_within", ""); from != forms.NoDay || within != "" {
		if p.FirstRound = (&forms.FirstRound{From: from, Within: within}); from == forms.NoDay || within == "" {
			f.refuse("first_within", k.say("plans.need_first"))
		}
	}
	p.Occasions = map[string]string{}
	for _, cause := range f.Values["occasions"] {
		p.Occasions[cause] = cmp.Or(f.inDays("occasions_n", ""), "P0D")
	}
	p.Marks = f.marks()
	p.Source = cmp.Or(f.line("source", 200), k.say("config.own_source"))
	if p.InForce = f.date("in_force"); p.InForce == forms.NoDay && f.wrong["in_force"] == "" {
		f.refuse("in_force", k.say("office.form.need", "name", k.say("config.in_force")))
	}
	draft := store.RuleDraft{Kind: "plan.set", Site: f.Get("site"), Reason: f.needed("reason", k.say("config.reason"), 300)}
	raw, err := encodeRule(p)
	if err != nil {
		f.text = k.say("office.form.broken")
	}
	draft.JSON = raw
	return draft, &p
}

// whole reads a whole number of at least least.
func (f *typedForm) whole(name string, least int) string {
	v := strings.TrimSpace(f.Get(name))
	n, err := strconv.Atoi(v)
	if err != nil || n < least || n > 9999 {
		f.refuse(name, f.ink.say("plans.whole", "n", least))
		return "1"
	}
	return strconv.Itoa(n)
}

// inDays reads a duration in days, "" where nothing was typed; what was not changed stays as it was written.
func (f *typedForm) inDays(name, was string) string {
	v := strings.TrimSpace(f.Get(name))
	switch {
	case v == "":
		return ""
	case v == daysOf(was):
		return was
	}
	return "P" + f.whole(name, 0) + "D"
}

// marks reads the marks of a form: a word a line, with its colour behind a comma.
func (f *typedForm) marks() *forms.Marks {
	m := &forms.Marks{}
	for line := range strings.Lines(f.Get("marks")) {
		word, colour, _ := strings.Cut(strings.TrimSpace(line), ",")
		if word = strings.TrimSpace(word); word != "" {
			m.List = append(m.List, forms.Mark{Word: word, Colour: strings.ToLower(strings.TrimSpace(colour))})
		}
	}
	if len(m.List) == 0 {
		return nil
	}
	m.Every = fmt.Sprintf("P%sM", f.whole("marks_every", 1))
	return m
}

// planBack sends the form of a plan: as new, or with its messages.
func (s *Server) planBack(c echo.Context, f *typedForm, was *forms.Plan) error {
	var sites []store.Site
	err := s.store.View(scope(c), func(v *store.View) (err error) {
		sites, err = v.Sites()
		return err
	})
	if err != nil {
		return err
	}
	return s.formBack(c, f, s.planForm(c, f, was, sites))
}

// planForm is the form of a revision.
func (s *Server) planForm(c echo.Context, f *typedForm, was *forms.Plan, sites []store.Site) formPage {
	k := s.ink()
	p := formPage{Frame: s.frame(c, k.say("plans.title"), "set-up"), Lead: k.say("plans.edit_lead"), Submit: k.say("plans.preview"),
		Crumbs: []link{{Href: "/set-up", Text: k.say("office.setup.title")}, {Href: "/plans", Text: k.say("plans.title")}}, Heading: k.say("plans.new_head"), Action: "/plans", Cancel: "/plans"}
	what := fieldGroup{Legend: k.say("plans.what"), Fields: []field{{Name: "name", Label: k.say("config.name"), Hint: k.say("plans.name_hint"), Wide: true}}}
	if f.Get("new") == "yes" {
		p.Hidden = append(p.Hidden, hidden{"new", "yes"})
		tasks := field{Name: "task", Label: k.say("plans.fact.task")}
		for _, task := range forms.Tasks() {
			tasks.Options = append(tasks.Options, option{Value: task, Text: k.named("task", task)})
		}
		what.Fields = append([]field{{Name: "id", Label: k.say("config.id"), Hint: k.say("plans.id_hint"), Required: true}, tasks}, what.Fields...)
	} else {
		name := s.planName(was)
		p.Crumbs = append(p.Crumbs, link{Href: planHref(was.ID, f.Get("site")), Text: name})
		p.Heading, p.Action, p.Cancel = k.say("config.change_head", "name", name), "/plans/"+url.PathEscape(was.ID)+"/edit", planHref(was.ID, f.Get("site"))
	}
	kinds := field{Name: "kinds", Label: k.say("plans.fact.kinds"), Type: "checks"}
	for _, kind := range forms.Kinds() {
		if was == nil || was.Task == "" || forms.HasTask(kind, was.Task) {
			kinds.Options = append(kinds.Options, option{Value: kind, Text: k.named("kind", kind)})
		}
	}
	what.Fields = append(what.Fields, kinds)
	p.Groups = []fieldGroup{s.planWhen(sites), what, s.planOften(), s.planFirst(), s.planOccasions(), {Legend: k.say("plans.marks"), Note: k.say("plans.marks_note"), Fields: []field{
		{Name: "marks", Label: k.say("plans.marks_list"), Type: "text-area", Hint: k.say("plans.marks_hint", "colours", strings.Join(forms.MarkColours(), ", ")), Wide: true},
		{Name: "marks_every", Label: k.say("plans.marks_every"), Type: "number", Unit: k.say("plans.months")}}}}
	return p
}

func (s *Server) planWhen(sites []store.Site) fieldGroup {
	k := s.ink()
	where := field{Name: "site", Label: k.say("config.where"), Hint: k.say("plans.where_hint"), Options: []option{{Value: "", Text: k.say("config.everywhere")}}}
	for _, site := range sites {
		where.Options = append(where.Options, option{Value: site.ID, Text: k.say("config.only_at", "site", site.Name)})
	}
	return fieldGroup{Fields: []field{
		{Name: "in_force", Label: k.say("config.in_force"), Type: "date", Hint: k.say("plans.in_force_hint"), Required: true},
		{Name: "reason", Label: k.say("config.reason"), Required: true, Wide: true}, where,
		{Name: "source", Label: k.say("plans.fact.source"), Hint: k.say("plans.source_hint"), Wide: true},
	}}
}

func (s *Server) planOften() fieldGroup {
	k := s.ink()
	return fieldGroup{Legend: k.say("plans.often"), Note: k.say("plans.often_note"), Fields: []field{
		{Name: "every_n", Label: k.say("plans.every"), Type: "number", Required: true},
		{Name: "every_unit", Label: k.say("plans.every_unit"), Options: choices("", "D", k.say("plans.days"), "W", k.say("plans.weeks"), "M", k.say("plans.months"), "Y", k.say("plans.years"))},
		{Name: "duty", Label: k.say("plans.fact.duty"), Options: choices("", forms.NotToExceed, k.say("plans.duty."+forms.NotToExceed), forms.OnceEachPeriod, k.say("plans.duty."+forms.OnceEachPeriod))},
		{Name: "count", Label: k.say("plans.count"), Options: choices("", forms.Rolling, k.say("plans.rolling"), forms.Calendar, k.say("plans.calendar"))},
		{Name: "grace_n", Label: k.say("plans.fact.grace"), Type: "number", Unit: k.say("plans.days"), Hint: k.say("plans.grace_hint")},
		{Name: "lead_n", Label: k.say("plans.lead"), Type: "number", Unit: k.say("plans.days"), Hint: k.say("plans.lead_hint")},
	}}
}

func (s *Server) planFirst() fieldGroup {
	k := s.ink()
	days := func(name, label string) field {
		return field{Name: name, Label: k.say(label), Type: "number", Unit: k.say("plans.days")}
	}
	return fieldGroup{Legend: k.say("plans.first_dates"), Note: k.say("plans.first_note"), Fields: []field{
		days("start_new", "plans.fact.new"), days("start_replaced", "plans.fact.replaced"), days("start_imported", "plans.fact.imported"),
		{Name: "first_from", Label: k.say("plans.first_from"), Type: "date", Hint: k.say("plans.first_from_hint")}, days("first_within", "plans.first_within"),
	}}
}

func (s *Server) planOccasions() fieldGroup {
	k := s.ink()
	causes := field{Name: "occasions", Label: k.say("plans.fact.occasions"), Type: "checks"}
	for _, cause := range forms.Causes() {
		causes.Options = append(causes.Options, option{Value: cause, Text: k.say("plans.cause." + cause)})
	}
	return fieldGroup{Legend: k.say("plans.at_once"), Fields: []field{causes,
		{Name: "occasions_n", Label: k.say("plans.occasions_within"), Type: "number", Unit: k.say("plans.days"), Hint: k.say("plans.occasions_hint")}}}
}
