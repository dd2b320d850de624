package server

import (
	"cmp"
	"encoding/json"
	"fmt"
	"slices"
	"strconv"
	"strings"

	"github.com/labstack/echo/v4"

	"tripwell/forms"
	"tripwell/store"
)

// limitsEdit asks what the next revision of a limit set says; with ?copy it asks for a set of another name.
func (s *Server) limitsEdit(c echo.Context) error {
	held, err := s.limitSetNow(c)
	if err != nil {
		return err
	}
	set := held.set
	f, err := s.editForm(limitValues(set), nil)
	if err != nil {
		return err
	}
	f.Set("in_force", forms.DayOf(s.store.Now()).String())
	f.Set("site", c.QueryParam("site"))
	if c.QueryParam("copy") != "" {
		f.Set("copy", "yes")
		f.Del("stands_for")
	} else {
		f.Values["stands_for"] = set.StandsFor
	}
	return s.formBack(c, f, s.limitsForm(c, held, f))
}

// limitsHeld is what a revision starts from.
type limitsHeld struct {
	set   *forms.LimitSet
	sites []store.Site
	own   map[string]string // what forms call the checks an organisation added
}

// limitSetNow reads the newest revision of a set, of the site asked for where it has one of its own.
func (s *Server) limitSetNow(c echo.Context) (held limitsHeld, err error) {
	id, site := c.Param("set"), cmp.Or(c.FormValue("site"), c.QueryParam("site"))
	err = s.store.View(scope(c), func(v *store.View) error {
		var all []store.Revision
		if site != "" {
			if all, err = v.LimitRevisions(site, id); err != nil {
				return err
			}
		}
		if len(all) == 0 {
			if all, err = v.LimitRevisions("", id); err != nil {
				return err
			}
		}
		if len(all) == 0 {
			return refuse(codeNotFound, "", s.words.Say("office.limits.unknown"))
		}
		held.set = newestRevisions(all)[0].LimitSet
		if held.sites, err = v.Sites(); err != nil {
			return err
		}
		asked, err := v.Forms()
		held.own = forms.OwnNamesUnder(held.set, asked)
		return err
	})
	return held, err
}

// limitValues are the figures of a set as its form shows them.
func limitValues(set *forms.LimitSet) map[string]string {
	values := map[string]string{"name": set.Name}
	for i := range set.Limits {
		l := &set.Limits[i]
		values["level."+l.ID] = l.Level
		if bounded(l) {
			values["min."+l.ID], values["max."+l.ID] = typedFigure(l.Min), typedFigure(l.Max)
		}
	}
	return values
}

// bounded reports whether a limit is a least and a most, which people may change as figures.
func bounded(l *forms.Limit) bool { return l.Min != nil || l.Max != nil }

func typedFigure(v *float64) string {
	if v == nil {
		return ""
	}
	return strconv.FormatFloat(*v, 'f', -1, 64)
}

// limitsPreview shows what a revision would change before it is accepted.
func (s *Server) limitsPreview(c echo.Context) error {
	held, err := s.limitSetNow(c)
	if err != nil {
		return err
	}
	f, err := s.typedForm(c)
	if err != nil {
		return err
	}
	set := held.set
	draft, id := s.limitsDraft(f, set), set.ID
	if f.Get("copy") == "yes" {
		id = strings.TrimSpace(f.Get("id"))
	}
	if f.ok() {
		err := s.revisionPage(c, f, revisionAsked{heading: s.setName(set), back: "/limits/" + c.Param("set") + "/edit", done: "/limits/" + id, day: f.date("in_force"), drafts: []store.RuleDraft{draft}})
		if err == nil || !s.refusedInto(f, err, set) {
			return err
		}
	}
	return s.formBack(c, f, s.limitsForm(c, held, f))
}

// refusedInto puts a refusal of a revision beside the field that caused it; false for any other error.
func (s *Server) refusedInto(f *typedForm, err error, set *forms.LimitSet) bool {
	w, fault := wrongOf(err)
	if fault {
		return false
	}
	parts := strings.Split(w.Field, ".")
	if len(parts) >= 2 && parts[0] == "limits" {
		last := parts[len(parts)-1]
		if name := last + "." + parts[1]; f.Has(name) {
			f.refuse(name, w.Text)
			return true
		}
		for i := range set.Limits {
			if set.Limits[i].ID == parts[1] {
				f.refuse("max."+parts[1], w.Text)
				return true
			}
		}
		f.refuse("add.reading", w.Text)
		return true
	}
	if w.Field != "" && f.Has(w.Field) {
		f.refuse(w.Field, w.Text)
		return true
	}
	f.text = w.Text
	return true
}

// limitsDraft is the revision a form asks for.
func (s *Server) limitsDraft(f *typedForm, was *forms.LimitSet) store.RuleDraft {
	k := s.ink()
	set, err := copyOf(was)
	if err != nil {
		f.text = k.say("office.form.broken")
		return store.RuleDraft{}
	}
	set.Name, set.StandsFor = f.line("name", 80), f.Values["stands_for"]
	if f.Get("copy") == "yes" {
		set.ID = f.needed("id", k.say("config.id"), 60)
		set.Revision = 1
		if set.Name == "" {
			f.refuse("name", k.say("office.form.need", "name", k.say("config.name")))
		}
	}
	kept := set.Limits[:0]
	for _, l := range set.Limits {
		if f.Get("level."+l.ID) == "none" {
			continue
		}
		l.Level = f.choice("level."+l.ID, forms.Must, forms.WatchOnly)
		if bounded(&l) {
			least, most := f.figure("min."+l.ID), f.figure("max."+l.ID)
			if !sameFigure(least, l.Min) || !sameFigure(most, l.Max) {
				l.Min, l.Max, l.ByUnit = least, most, nil // the document's figures in other units are not these
			}
		}
		if changedLimit(f, l.ID) {
			l.Source, l.Status = k.say("config.own_source"), k.say("config.own_status")
		}
		kept = append(kept, l)
	}
	set.Limits = kept
	if l, ok := s.addedLimit(f, set); ok {
		set.Limits = append(set.Limits, l)
	}
	if f.date("in_force") == forms.NoDay && f.wrong["in_force"] == "" {
		f.refuse("in_force", k.say("office.form.need", "name", k.say("config.in_force")))
	}
	set.InForce = f.date("in_force")
	raw, err := encodeRule(set)
	if err != nil {
		f.text = k.say("office.form.broken")
	}
	return store.RuleDraft{Kind: "limits.set", Site: f.Get("site"), JSON: raw, Reason: f.needed("reason", k.say("config.reason"), 300)}
}

func changedLimit(f *typedForm, id string) bool {
	return f.Has("min."+id) && (f.changed("min."+id) || f.changed("max."+id))
}

func sameFigure(a, b *float64) bool { return a == nil && b == nil || a != nil && b != nil && *a == *b }

// copyOf gives a rule that may be changed.
func copyOf[T any](was *T) (*T, error) {
	raw, err := json.Marshal(was)
	if err != nil {
		return nil, err
	}
	out := new(T)
	return out, json.Unmarshal(raw, out)
}

func encodeRule(v any) (json.RawMessage, error) {
	raw, err := json.Marshal(v)
	return raw, err
}

// addedLimit reads the limit a form adds; ok is false where none was asked for.
func (s *Server) addedLimit(f *typedForm, set *forms.LimitSet) (l forms.Limit, ok bool) {
	code := f.Get("add.reading")
	if code == "" {
		return l, false
	}
	l = forms.Limit{Reading: code, Level: f.choice("add.level", forms.Must, forms.WatchOnly), Min: f.figure("add.min"), Max: f.figure("add.max"),
		OneOf: listOf(f.line("add.one_of", 200)), Unit: unitOf(code),
		Source: cmp.Or(f.line("add.source", 200), s.words.Say("config.own_source")), Status: s.words.Say("config.own_status"),
		Text: cmp.Or(f.line("add.text", 300), s.words.Say("config.outside"))}
	for n := 1; ; n++ {
		l.ID = fmt.Sprintf("own-%d", n)
		if !slices.ContainsFunc(set.Limits, func(have forms.Limit) bool { return have.ID == l.ID }) {
			return l, true
		}
	}
}

// listOf reads answers separated by commas.
func listOf(text string) []string {
	var out []string
	for part := range strings.SplitSeq(text, ",") {
		if part = strings.TrimSpace(part); part != "" {
			out = append(out, part)
		}
	}
	return out
}

// setName names a limit set: as its users call it, else as the catalogue does.
func (s *Server) setName(set *forms.LimitSet) string {
	if set.Name != "" {
		return set.Name
	}
	return s.ink().named("limit_set", set.ID)
}

// limitsForm is the form of a revision.
func (s *Server) limitsForm(c echo.Context, held limitsHeld, f *typedForm) formPage {
	set := held.set
	k, name := s.ink().calling(held.own), s.setName(set)
	href := "/limits/" + c.Param("set")
	p := formPage{
		Frame: s.frame(c, name, "set-up"), Crumbs: []link{{Href: "/set-up", Text: k.say("office.setup.title")}, {Href: href, Text: name}},
		Heading: k.say("config.change_head", "name", name), Lead: k.say("config.change_lead"),
		Action: href + "/edit", Submit: k.say("config.preview"), Cancel: href,
	}
	where := []option{{Value: "", Text: k.say("config.everywhere")}}
	for _, site := range held.sites {
		where = append(where, option{Value: site.ID, Text: k.say("config.only_at", "site", site.Name)})
	}
	head := fieldGroup{Fields: []field{
		{Name: "in_force", Label: k.say("config.in_force"), Type: "date", Hint: k.say("config.in_force_hint"), Required: true},
		{Name: "reason", Label: k.say("config.reason"), Required: true, Wide: true},
		{Name: "site", Label: k.say("config.where"), Options: where, Hint: k.say("config.where_hint")},
		{Name: "name", Label: k.say("config.name"), Hint: k.say("config.name_hint")},
	}}
	if f.Get("copy") == "yes" {
		p.Heading = k.say("config.copy_head", "name", name)
		p.Hidden = append(p.Hidden, hidden{"copy", "yes"})
		head.Fields = append([]field{{Name: "id", Label: k.say("config.id"), Hint: k.say("config.id_hint"), Required: true}}, head.Fields...)
	}
	stands := field{Name: "stands_for", Label: k.say("config.stands_for"), Hint: k.say("config.stands_for_hint"), Type: "checks"}
	for _, kind := range set.Kinds {
		stands.Options = append(stands.Options, option{Value: kind, Text: k.named("kind", kind)})
	}
	head.Fields = append(head.Fields, stands)
	p.Groups = append(p.Groups, head)
	for i := range set.Limits {
		p.Groups = append(p.Groups, s.limitGroup(k, &set.Limits[i]))
	}
	p.Groups = append(p.Groups, s.addGroup(k))
	return p
}

// limitGroup asks for one limit's figures and level.
func (s *Server) limitGroup(k ink, l *forms.Limit) fieldGroup {
	name := k.reading(l.Reading)
	if l.Reading == "" {
		name = s.fieldName(l.Field)
	}
	g := fieldGroup{Legend: name, Note: joined(s.limitWords(*l), s.whenAndVoid(*l))}
	if unit := unitOf(l.Reading); bounded(l) {
		g.Note = s.whenAndVoid(*l)
		g.Fields = append(g.Fields,
			field{Name: "min." + l.ID, Label: k.say("config.least"), Type: "number", Unit: k.named("unit", unit)},
			field{Name: "max." + l.ID, Label: k.say("config.most"), Type: "number", Unit: k.named("unit", unit)})
	}
	g.Fields = append(g.Fields, field{Name: "level." + l.ID, Label: k.say("config.level"), Options: s.levels(true)})
	return g
}

func (s *Server) levels(none bool) []option {
	k := s.ink()
	out := choices("", forms.Must, k.say("config.must"), forms.WatchOnly, k.say("config.watch"))
	if none {
		out = append(out, option{Value: "none", Text: k.say("config.left_out")})
	}
	return out
}

// addGroup asks for a limit that is not there yet.
func (s *Server) addGroup(k ink) fieldGroup {
	readings := []option{{Value: "", Text: k.say("config.add_none")}}
	for _, code := range forms.Codes() {
		if forms.IsOwn(code.Code) && k.own[code.Code] == "" {
			continue // no form asks it
		}
		readings = append(readings, option{Value: code.Code, Text: k.reading(code.Code)})
	}
	return fieldGroup{Legend: k.say("config.add_limit"), Note: k.say("config.add_note"), Fields: []field{
		{Name: "add.reading", Label: k.say("office.col.reading"), Options: readings},
		{Name: "add.min", Label: k.say("config.least"), Type: "number"},
		{Name: "add.max", Label: k.say("config.most"), Type: "number"},
		{Name: "add.one_of", Label: k.say("config.one_of"), Hint: k.say("config.one_of_hint")},
		{Name: "add.level", Label: k.say("config.level"), Options: s.levels(false)},
		{Name: "add.source", Label: k.say("office.col.source")},
		{Name: "add.text", Label: k.say("config.text"), Hint: k.say("config.text_hint"), Wide: true},
	}}
}
