package server

import (
	"fmt"
	"strings"

	"github.com/labstack/echo/v4"

	"tripwell/forms"
	"tripwell/store"
	"tripwell/store/record"
)

// usualMore is how many kinds of place a form has room for beside those on the list.
const usualMore = 2

// usualAt reads the list a form is about: a site's where the address names one, else the organisation's; own tells whether the
// site has a list of its own.
func (s *Server) usualAt(c echo.Context) (list forms.UsualPlaces, site *store.Site, own bool, revision int, err error) {
	err = s.store.View(scope(c), func(v *store.View) error {
		id, today := "", forms.DayOf(s.store.Now())
		if name := c.Param("site"); name != "" {
			one, err := v.Site(name)
			if err != nil {
				return err
			}
			site, id, today = &one, one.ID, s.today(one)
		}
		in, of, err := v.UsualPlaces(id, today)
		if err != nil {
			return err
		}
		if list = (forms.UsualPlaces{ID: forms.UsualPlacesID}); in != nil {
			list = *in
		}
		own = of == store.BySite
		revision, err = v.NextUsual(id)
		return err
	})
	return list, site, own, revision, err
}

func (s *Server) usualEdit(c echo.Context) error {
	list, site, own, _, err := s.usualAt(c)
	if err != nil {
		return err
	}
	f, err := s.editForm(usualValues(list), nil)
	if err != nil {
		return err
	}
	return s.formBack(c, f, s.usualForm(c, site, own, list))
}

func (s *Server) usualUpdate(c echo.Context) error {
	list, site, own, revision, err := s.usualAt(c)
	if err != nil {
		return err
	}
	f, err := s.typedForm(c)
	if err != nil {
		return err
	}
	first := f.id(recordField)
	f.meanwhile(usualValues(list))
	next, log, back := s.usualInput(f, list), record.Org, "/set-up"
	if next.Revision, next.InForce = revision, forms.DayOf(s.store.Now()); site != nil {
		log, back, next.InForce = site.ID, siteHref(*site)+"/protection", s.today(*site)
	}
	if own && f.Get("follow") == "yes" {
		next.Places, next.Follows = []forms.UsualPlace{}, true
	}
	reason := f.needed("reason", s.words.Say("office.protection.reason"), 300)
	if f.ok() {
		if err = s.append(c, store.Draft{ID: first, Kind: "usual.set", Log: log, Subject: store.UsualSubject(), Body: map[string]any{"usual": next, "reason": reason}}); err == nil {
			return toPage(c, back)
		}
		if err := f.takeRefusal(err); err != nil {
			return err
		}
	}
	return s.formBack(c, f, s.usualForm(c, site, own, list))
}

func usualValues(list forms.UsualPlaces) map[string]string {
	out := map[string]string{}
	for _, p := range list.Places {
		out["name."+p.Place], out["words."+p.Place], out["source."+p.Place] = p.Name, strings.Join(p.Words, ", "), p.Source
		if out["on."+p.Place] = "yes"; p.Off {
			out["on."+p.Place] = ""
		}
	}
	return out
}

// usualInput is the list as the form has it: what was there, and what was added with a name.
func (s *Server) usualInput(f *typedForm, list forms.UsualPlaces) forms.UsualPlaces {
	out := forms.UsualPlaces{ID: forms.UsualPlacesID, Standard: list.Standard}
	ids := []string{}
	for _, p := range list.Places {
		ids = append(ids, p.Place)
	}
	for i := range usualMore {
		if id := fmt.Sprintf("own-%d", len(list.Places)+i+1); strings.TrimSpace(f.Get("name."+id)) != "" {
			ids = append(ids, id)
		}
	}
	for _, id := range ids {
		p := forms.UsualPlace{Place: id, Name: f.needed("name."+id, s.words.Say("office.protection.kind"), 100), Source: f.line("source."+id, 200), Off: f.Get("on."+id) != "yes"}
		for word := range strings.SplitSeq(f.line("words."+id, 1000), ",") {
			if word = strings.TrimSpace(word); word != "" {
				p.Words = append(p.Words, word)
			}
		}
		out.Places = append(out.Places, p)
	}
	return out
}

func (s *Server) usualForm(c echo.Context, site *store.Site, own bool, list forms.UsualPlaces) formPage {
	k := s.ink()
	p := formPage{Frame: s.frame(c, k.say("office.protection.list"), "set-up"), Crumbs: []link{{Href: "/set-up", Text: k.say("office.nav.setup")}},
		Heading: k.say("office.protection.list"), Lead: k.say("office.protection.list_lead") + " " + k.say("office.protection.prevails"), Action: "/usual-places", Submit: k.say("office.protection.list_save"), Cancel: "/set-up"}
	if site != nil {
		p.Crumbs = []link{{Href: siteHref(*site), Text: site.Name}, {Href: siteHref(*site) + "/protection", Text: k.say("office.protection.title")}}
		p.Heading, p.Action, p.Cancel = k.say("office.protection.list_at", "site", site.Name), siteHref(*site)+"/usual-places", siteHref(*site)+"/protection"
	}
	group := func(id, legend string) fieldGroup {
		return fieldGroup{Legend: legend, Fields: []field{{Name: "on." + id, Label: k.say("office.protection.on"), Type: "check"}, {Name: "name." + id, Label: k.say("office.protection.kind")},
			{Name: "words." + id, Label: k.say("office.protection.words"), Hint: k.say("office.protection.words_hint")}, {Name: "source." + id, Label: k.say("office.protection.source")}}}
	}
	if own {
		p.Groups = append(p.Groups, fieldGroup{Fields: []field{{Name: "follow", Label: k.say("office.protection.follow"), Type: "check", Hint: k.say("office.protection.follow_hint")}}})
	}
	for _, place := range list.Places {
		p.Groups = append(p.Groups, group(place.Place, place.Name))
	}
	for i := range usualMore {
		p.Groups = append(p.Groups, group(fmt.Sprintf("own-%d", len(list.Places)+i+1), k.say("office.protection.another")))
	}
	p.Groups = append(p.Groups, fieldGroup{Fields: []field{{Name: "reason", Label: k.say("office.protection.reason"), Required: true, Wide: true}}})
	return p
}
