package server

import (
	"context"
	"net/http"
	"path/filepath"

	"github.com/labstack/echo/v4"

	"tripwell/store"
)

// ownSealing says what sealing a record would do. Query: id.
func (s *Server) ownSealing(c echo.Context) error {
	var what store.Sealing
	err := s.store.View(ownerScope, func(v *store.View) (err error) {
		what, err = v.Sealing(c.QueryParam("id"))
		return err
	})
	if err != nil {
		return err
	}
	return s.sendJSON(c, http.StatusOK, what)
}

// ownSeal drops the bytes of a record. Query: id, reason.
func (s *Server) ownSeal(c echo.Context) error {
	return s.work(c, func(ctx context.Context, _ func(done, total int64)) (any, error) {
		return s.store.Seal(context.WithoutCancel(ctx), ownerScope, c.QueryParam("id"), c.QueryParam("reason"))
	})
}

// BooksBefore names the books that restores kept in a store's folder; a sealing does not reach them.
func BooksBefore(dir string) []string {
	found, _ := filepath.Glob(filepath.Join(dir, store.BookFile+".before-epoch-*")) // the pattern is a good one
	return found
}
