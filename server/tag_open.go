package server

import (
	"net/http"
	"net/url"
	"strings"

	"github.com/labstack/echo/v4"

	"tripwell/store"
	"tripwell/store/record"
)

// tagOpen answers the address printed on a label. Signed out, a known and an unknown tag look alike: the store is not
// even asked.
func (s *Server) tagOpen(c echo.Context) error {
	p := person(c)
	if p.ID == "" {
		return s.toSignIn(c)
	}
	if p.Role == "crew" {
		return toPage(c, fieldTag(c.Param("tag")))
	}
	tag, ok := record.ParseTag(c.Param("tag"))
	if !ok {
		return errNoTag
	}
	device, err := s.deviceOfTag(scope(c), tag)
	if err != nil {
		return err
	}
	return toPage(c, "/devices/"+device)
}

// fieldTag is where the field client opens a tag, as it was printed where it is none of ours.
func fieldTag(text string) string {
	if tag, ok := record.ParseTag(text); ok {
		text = tag
	}
	return "/field#tag=" + url.PathEscape(text)
}

var errNoTag = refuse(codeNotFound, "tag", "No device on your sites has this tag. Check its seven characters, or bind it to a device first.")

// deviceOfTag gives the device a tag leads to. Where two hold the same tag the page of the first shows the clash.
func (s *Server) deviceOfTag(sc store.Scope, tag string) (device string, err error) {
	err = s.store.View(sc, func(v *store.View) error {
		holders, err := v.Tag(tag)
		if err != nil {
			return refusedAs(err, codeNotFound, errNoTag.Error())
		}
		for _, h := range holders {
			if h.Device != "" {
				device = h.Device
				return nil
			}
		}
		return errNoTag
	})
	return device, err
}

// fieldShow is the field client's shell; the client reads the rest of the address itself. The shell holds nothing of
// anybody's: an enrolled phone works by its own token long after the browser's session has ended, and a phone that is not
// enrolled is told 401 by the exchange and sends its reader to /in?next=/field.
func (s *Server) fieldShow(c echo.Context) error {
	return s.page(c, http.StatusOK, "field.html", s.shellFrame())
}

// shellFrame is the same for everybody: phones keep the shell and open it for whoever holds them.
func (s *Server) shellFrame() shellPage {
	p := shellPage{Frame: Frame{Title: "Tripwell", Here: "field"}}
	if s.store != nil {
		p.Secure = strings.ToLower(s.store.URL())
	}
	return p
}

// shellPage is the field client's page. Secure is the address on the labels, for a browser that came another way.
type shellPage struct {
	Frame
	Secure string
}
