package server

import (
	"net/http"
	"strings"

	"github.com/labstack/echo/v4"

	"tripwell/forms"
	"tripwell/store"
)

// protectionPage lists what of a site's ground-fault protection somebody should look at.
type protectionPage struct {
	Frame
	Crumbs              []link
	Heading, Lead, Calm string
	Actions             []link
	Groups              []gapGroup
	ListNote            string
	ListHref            string
}

// gapGroup is one reason with the outlets it is said of.
type gapGroup struct {
	Mark  mark
	Text  string
	Print bool // the markings it needs can be printed here
	More  string
	more  int
	Rows  []gapRow
}

// gapRow is one outlet of a gap.
type gapRow struct {
	Href, Spot, Tag, Where, Kind, Circuit, Critical string
	Why                                             string // the sentence about this one
	By                                              link   // the protector meant
	marking                                         bool   // it needs one
}

func (s *Server) protectionShow(c echo.Context) error {
	view := protectionPage{Frame: s.frame(c, s.words.Say("office.protection.title"), "sites")}
	err := s.store.View(scope(c), func(v *store.View) error {
		site, err := v.Site(c.Param("site"))
		if err != nil {
			return err
		}
		gaps, p, err := v.ProtectionGaps(site.ID, s.today(site))
		if err != nil {
			return err
		}
		usual, of, err := v.UsualPlaces(site.ID, s.today(site))
		if err != nil {
			return err
		}
		s.buildProtection(site, gaps, p, &view)
		s.usualNote(site, usual, of, &view)
		return nil
	})
	if err != nil {
		return err
	}
	if view.Change {
		view.ListHref += "/usual-places"
	} else {
		view.ListHref = ""
	}
	if may(c, office) {
		for i := range view.Groups {
			g := &view.Groups[i]
			g.Print = g.Rows[0].marking
		}
	}
	return s.page(c, http.StatusOK, "protection.html", view)
}

func (s *Server) buildProtection(site store.Site, gaps []store.ProtectionGap, p *store.Protection, view *protectionPage) {
	k := s.ink()
	outlets := map[string]bool{}
	for _, g := range gaps {
		if n := len(view.Groups); n == 0 || view.Groups[n-1].Mark.Word != k.say("office.protection.gap."+g.Why) {
			view.Groups = append(view.Groups, gapGroup{Mark: mark{gapShape(g.Why), k.say("office.protection.gap." + g.Why)}, Text: k.say("office.protection.text." + g.Why)})
		}
		group := &view.Groups[len(view.Groups)-1]
		if len(group.Rows) < registerRows {
			group.Rows = append(group.Rows, s.gapRow(p, g))
		} else {
			group.more++
			group.More = k.say("office.protection.more", "n", group.more)
		}
		outlets[g.Device.ID] = true
	}
	view.Title = k.say("office.protection.title_of", "site", site.Name)
	view.Crumbs = []link{{Href: siteHref(site), Text: site.Name}, {Href: siteHref(site) + "/circuits", Text: k.say("office.circuit.list")}}
	if view.Heading = k.say("office.protection.heading", "n", len(outlets), "site", site.Name); len(outlets) == 0 {
		view.Heading, view.Calm = k.say("office.protection.calm", "site", site.Name), k.say("office.protection.calm_text")
	}
	view.Lead = k.say("office.protection.lead")
}

// usualNote says which list of places the page looked for, and leads to it.
func (s *Server) usualNote(site store.Site, usual *forms.UsualPlaces, of string, view *protectionPage) {
	k := s.ink()
	view.ListHref = siteHref(site)
	if usual == nil || usual.Standard != "" && site.Standard != "" && usual.Standard != site.Standard {
		view.ListNote = k.say("office.protection.list_other", "standard", site.Standard)
		return
	}
	var names []string
	for _, p := range usual.Places {
		if !p.Off {
			names = append(names, lowerFirst(p.Name))
		}
	}
	key := "office.protection.list_organisation"
	if of == store.BySite {
		key = "office.protection.list_site"
	}
	view.ListNote = k.say(key, "places", strings.Join(names, "; "))
}

func gapShape(why string) string {
	switch why {
	case store.GapUntested:
		return "none"
	case store.GapOverdue, store.GapMarking, store.GapLoop:
		return "watch"
	}
	return "fail"
}

func (s *Server) gapRow(p *store.Protection, g store.ProtectionGap) gapRow {
	k, d := s.ink(), g.Device
	row := gapRow{Href: "/devices/" + d.ID, Spot: s.spot(d.DeviceRow), Tag: k.tag(d.Tag), Where: d.Place.Context(), Kind: k.named("kind", d.Kind), Circuit: circuit(d.DeviceRow), Critical: d.Place.CriticalLoad, marking: g.Marking != ""}
	if by, ok := p.Device(g.By); ok && g.By != d.ID {
		row.By = link{Href: "/devices/" + by.ID, Text: joined(s.spot(by.DeviceRow), circuit(by.DeviceRow))}
	}
	switch {
	case g.Why == store.GapMarking:
		row.Why = k.say("office.protection.marking." + g.Marking)
	case g.Why == store.GapNone && g.Usual.Place == "":
		row.Why = k.say("office.protection.by_what")
	case g.Why == store.GapNone && g.ByName:
		row.Why = k.say("office.protection.usual_by_name", "place", lowerFirst(g.Usual.Name), "source", g.Usual.Source)
	case g.Why == store.GapNone:
		row.Why = k.say("office.protection.usual", "place", lowerFirst(g.Usual.Name), "source", g.Usual.Source)
	}
	return row
}
