package server

import (
	"net/http"

	"github.com/labstack/echo/v4"

	"tripwell/store"
)

type photoAnswer struct {
	SHA256 string `json:"sha256"`
	Now    string `json:"now"`
}

// exchangePhoto takes one photo from a phone, after the entry that names it.
func (s *Server) exchangePhoto(c echo.Context) error {
	raw, err := readBody(c.Request())
	if err != nil {
		return err
	}
	name := c.QueryParam("sha256")
	if err := s.store.KeepPhoto(scope(c), c.QueryParam("entry"), name, raw); err != nil {
		return err
	}
	return s.sendJSON(c, http.StatusOK, photoAnswer{SHA256: name, Now: s.now()})
}

// photoShow gives a photo through its entry: who may see the entry may see it.
func (s *Server) photoShow(c echo.Context) error {
	var raw []byte
	var kind string
	err := s.store.View(scope(c), func(v *store.View) (err error) {
		raw, kind, err = v.Photo(c.Param("entry"), c.Param("photo"))
		return err
	})
	if err != nil {
		return err
	}
	h := c.Response().Header()
	h.Set("Cache-Control", "private, max-age=3600")
	h.Set("Content-Disposition", "inline")
	return c.Blob(http.StatusOK, kind, raw)
}

// photoShown is a photo on the page of its entry; Href is empty while it has not arrived.
type photoShown struct{ Href, Alt string }

func (s *Server) photosShown(v *store.View, e store.Entry) []photoShown {
	var out []photoShown
	for i, name := range e.Photos {
		p := photoShown{Alt: s.words.Say("photo.of_entry", "n", i+1)}
		if v.HasPhoto(name) {
			p.Href = "/entries/" + e.ID + "/photos/" + name
		}
		out = append(out, p)
	}
	return out
}
