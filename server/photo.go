package server

import (
	"net/http"

	"github.com/labstack/echo/v4"

	"tripwell/store"
)

// photoAnswer says which store has the photo now; Store and Epoch tell a phone later whether that store was restored.
type photoAnswer struct {
	SHA256 string `json:"sha256"`
	Store  string `json:"store"`
	Epoch  int    `json:"epoch"`
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
	return s.sendJSON(c, http.StatusOK, photoAnswer{SHA256: name, Store: s.store.ID(), Epoch: s.store.Epoch(), Now: s.now()})
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
type photoShown struct{ Href, Alt, Refused string }

func (s *Server) photosShown(v *store.View, e store.Entry) []photoShown {
	var out []photoShown
	for i, name := range e.Photos {
		p := photoShown{Alt: s.words.Say("photo.of_entry", "n", i+1)}
		if v.HasPhoto(name) {
			p.Href = "/entries/" + e.ID + "/photos/" + name
		} else if text := v.PhotoRefusal(e.ID, name); text != "" {
			p.Refused = s.words.Say("photo.refused_there", "text", text)
		}
		out = append(out, p)
	}
	return out
}
