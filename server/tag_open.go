package server

import (
	"net/http"
	"net/url"

	"github.com/labstack/echo/v4"

	"tripwell/store"
)

// tagOpen answers the address printed on a label. Signed out, a known and an unknown tag look alike: the store is not
// even asked.
func (s *Server) tagOpen(c echo.Context) error {
	p := person(c)
	if p.ID == "" {
		return s.toSignIn(c)
	}
	tag := c.Param("tag")
	if p.Role == "crew" {
		return toPage(c, "/field#tag="+url.QueryEscape(tag))
	}
	var device string
	err := s.store.View(scope(c), func(v *store.View) error {
		holders, err := v.Tag(tag)
		if err != nil {
			return err
		}
		for _, h := range holders {
			if h.Device != "" {
				device = h.Device
				return nil
			}
		}
		return refuse(codeNotFound, "tag", "No device on your sites has this tag. Check its seven characters, or bind it to a device first.")
	})
	if err != nil {
		return refusedAs(err, codeNotFound, "No device on your sites has this tag. Check its seven characters, or bind it to a device first.")
	}
	return toPage(c, "/devices/"+device)
}

// fieldShow is the field client's shell; the client reads the rest of the address itself. The shell holds nothing of
// anybody's: an enrolled phone works by its own token long after the browser's session has ended, and a phone that is not
// enrolled is told 401 by the exchange and sends its reader to /in?next=/field.
func (s *Server) fieldShow(c echo.Context) error {
	return s.page(c, http.StatusOK, "field.html", s.frame(c, "Tripwell", "field"))
}
