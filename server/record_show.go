package server

import (
	"net/http"

	"github.com/labstack/echo/v4"

	"tripwell/store"
)

// recordShow gives the exact bytes a record was received as, for whoever checks them against a leaf.
func (s *Server) recordShow(c echo.Context) error {
	var raw []byte
	err := s.store.View(scope(c), func(v *store.View) (err error) {
		raw, _, err = v.Record(c.Param("record"))
		return err
	})
	if err != nil {
		return err
	}
	return sendBytes(c, http.StatusOK, "text/plain; charset=utf-8", raw)
}
