package server

import (
	"net/http"
	"strings"

	"github.com/labstack/echo/v4"

	"tripwell/store"
)

// sealPage says what sealing a record would do and by which command. Sealing itself is the owner's, through the folder's
// socket: no session of a browser can do what nobody can undo.
type sealPage struct {
	Frame
	Heading, Made   string
	Sealed          string // it was sealed before
	First           string // what has to be done before
	Restated, Files string
	Command         string
	Back            link
}

func (s *Server) sealShow(c echo.Context) error {
	k := s.ink()
	view := sealPage{Frame: s.frame(c, k.say("office.seal.title"), "set-up"), Heading: k.say("office.seal.title")}
	err := s.store.View(scope(c), func(v *store.View) error {
		what, err := v.Sealing(c.Param("record"))
		if err != nil {
			return err
		}
		s.buildSeal(v, what, &view)
		return nil
	})
	if err != nil {
		return err
	}
	return s.page(c, http.StatusOK, "seal.html", view)
}

func (s *Server) buildSeal(v *store.View, what store.Sealing, view *sealPage) {
	k, zone := s.ink(), s.store.Now().Location()
	if site, err := v.Site(what.Log); err == nil { // the organisation's log has none
		zone = site.Location()
	}
	view.Back = link{Href: "/records/" + what.ID, Text: k.say("office.entry.raw")}
	if strings.HasPrefix(what.Kind, "entry.") && what.Kind != "entry.corrected" && what.Kind != "entry.withdrawn" {
		view.Back = link{Href: "/entries/" + what.ID, Text: k.say("office.entry.title")}
	}
	view.Made = k.say("office.seal.made", "time", k.at(what.At, zone), "by", s.personName(v, what.By))
	if what.Sealed != nil {
		view.Sealed = s.sealedText(v, what.Sealed, zone)
		return
	}
	if view.First = what.First; view.First != "" {
		return
	}
	names := make([]string, len(what.Restated))
	for i, name := range what.Restated {
		names[i] = lowerFirst(s.fieldName(name))
	}
	if len(names) > 0 {
		view.Restated = k.say("office.seal.restated", "fields", strings.Join(names, ", "))
	}
	if n := len(what.Photos); n > 0 {
		view.Files = k.say("office.seal.photos", "n", n)
	}
	view.Command = "tripwell seal " + what.ID + ` --reason "…" --data DIR`
}
