package server

import (
	"slices"
	"strings"

	"github.com/labstack/echo/v4"

	"tripwell/forms"
	"tripwell/store"
)

// accessWords says in one line what a read-only person may see: of which sites, which test days, and until when. It stands on
// every page and on the cover of what they take. "" for everybody else.
func (s *Server) accessWords(p store.Person) string {
	if p.Role != "auditor" {
		return ""
	}
	k := s.ink()
	parts := []string{k.say("access.only_all")}
	if !p.All {
		var names []string
		_ = s.store.View(p.Scope(), func(v *store.View) error { // a store being closed: the page itself says so
			sites, err := v.Sites()
			for _, site := range sites {
				names = append(names, site.Name)
			}
			return err
		})
		slices.Sort(names)
		parts[0] = k.and(names)
	}
	if p.Period != nil {
		parts = append(parts, k.say("access.only_period", "from", k.day(p.Period.From), "to", k.day(p.Period.To)))
	}
	if p.Until != nil {
		parts = append(parts, k.say("access.only_until", "day", k.day(*p.Until)))
	}
	return k.say("access.only", "what", strings.Join(slices.DeleteFunc(parts, func(t string) bool { return t == "" }), ", "))
}

// and joins names as a sentence does; of more than four it counts the rest.
func (k ink) and(names []string) string {
	switch n := len(names); {
	case n == 0:
		return ""
	case n == 1:
		return names[0]
	case n > 4:
		return k.say("access.only_more", "names", strings.Join(names[:3], ", "), "n", n-3)
	default:
		return k.say("access.only_and", "names", strings.Join(names[:n-1], ", "), "last", names[n-1])
	}
}

// opened notes that a read-only person opened something: once a day, site and kind of page, under an id made of these, so that it
// is written once however often they look.
func (s *Server) opened(c echo.Context, r route) error {
	who, _ := c.Get(callerKey).(*caller)
	if who == nil || who.person.Role != "auditor" || r.method != get || c.Response().Status >= 400 {
		return nil
	}
	what := openedWords[r.path]
	if what == "" {
		what = strings.Split(strings.Trim(r.path, "/"), "/")[0]
	}
	if what == "" {
		what = "overview"
	}
	if what == "me" || what == "assets" {
		return nil
	}
	on := forms.DayOf(s.store.Now().UTC())
	key := strings.Join([]string{who.person.ID, on.String(), what, c.Request().URL.RequestURI()}, "|")
	if !s.seen.first(key) {
		return nil
	}
	return s.store.NoteUsed(c.Request().Context(), who.person.ID, on, what, s.siteOpened(c, who.person))
}

// openedWords names what a page is about, where the first part of its address does not.
var openedWords = map[string]string{
	"/sites/:site": "register", "/sites/:site/circuits": "circuits", "/sites/:site/protection": "protection", "/sites/:site/calendar": "compliance", "/sites/:site/asked": "plans",
	"/workbook.xlsx": "workbook", "/bundle.zip": "bundle", "/sample.pdf": "sample", "/labels.pdf": "labels", "/label": "labels", "/records/:entry/photos/:photo": "entries", "/forms/:kind/:task": "set-up",
	"/limits/:set": "set-up", "/usual-places": "set-up", "/reminders": "dates", "/t/:tag": "devices", "/T/:tag": "devices",
}

// siteOpened finds the site of what was opened, "" where it is of several.
func (s *Server) siteOpened(c echo.Context, p store.Person) (site string) {
	_ = s.store.View(p.Scope(), func(v *store.View) error { // what cannot be found was not shown
		on := forms.DayOf(s.store.Now().UTC())
		if ref := c.QueryParam("site"); ref != "" {
			if at, err := v.Site(ref); err == nil {
				site = at.ID
			}
		}
		for _, name := range c.ParamNames() {
			id := c.Param(name)
			switch name {
			case "site":
				if at, err := v.Site(id); err == nil {
					site = at.ID
				}
			case "device":
				if d, err := v.Device(id, on); err == nil {
					site = d.Site
				}
			case "entry":
				if e, err := v.Entry(id); err == nil {
					site = e.Site
				}
			case "defect":
				if d, err := v.Defect(id, on); err == nil {
					site = d.Site
				}
			case "round":
				if r, err := v.Round(id); err == nil {
					site = r.Site
				}
			case "circuit":
				if _, at, _, err := v.Circuit(id); err == nil {
					site = at.ID
				}
			case "panel":
				if _, at, err := v.Panel(id); err == nil {
					site = at.ID
				}
			}
		}
		return nil
	})
	return site
}
