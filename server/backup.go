package server

import (
	"context"
	"fmt"
	"io"
	"net/http"
	"os"

	"github.com/labstack/echo/v4"

	"tripwell/store"
)

// ownBackup makes a checked copy of the book beside it and answers as work does; its report is store.Image. The command
// then takes the bytes with ownBackupTake and says with ownBackupKept that they are safe.
func (s *Server) ownBackup(c echo.Context) error {
	return s.work(c, func(ctx context.Context, progress func(done, total int64)) (any, error) {
		image, err := s.store.CheckedImage(ctx, progress)
		if err != nil {
			return nil, err
		}
		if old := s.image.Swap(&image); old != nil {
			if err := old.Discard(); err != nil && !os.IsNotExist(err) {
				return nil, fmt.Errorf("back up: %w", err)
			}
		}
		return image, nil
	})
}

// imageAsked is the copy made last, which must be the one asked for.
func (s *Server) imageAsked(c echo.Context) (*store.Image, error) {
	image := s.image.Load()
	if image == nil || image.SHA256 != c.QueryParam("sha256") {
		return nil, refuse(codeConflict, "", "Another backup was begun meanwhile. Start this one again.")
	}
	return image, nil
}

// ownBackupTake sends the bytes of the copy.
func (s *Server) ownBackupTake(c echo.Context) error {
	image, err := s.imageAsked(c)
	if err != nil {
		return err
	}
	f, err := os.Open(image.Path)
	if err != nil {
		return fmt.Errorf("back up: %w", err)
	}
	defer f.Close()
	return s.stream(c, "application/octet-stream", func(w io.Writer) error {
		_, err := io.Copy(w, f)
		return err
	})
}

// ownPhotos lists the photos that have arrived, one name a line in JSON.
func (s *Server) ownPhotos(c echo.Context) error {
	return s.lines(c, func(send func(any) error) error {
		for name, err := range s.store.Photos() {
			if err != nil {
				return err
			}
			if err := send(PhotoLine{Name: name}); err != nil {
				return err
			}
		}
		return nil
	})
}

// PhotoLine is one line of GET /own/photos.
type PhotoLine struct {
	Name string `json:"name"` // SHA-256 of its bytes
}

// ownPhoto sends the bytes of one photo; ones that went bad on the disk are refused.
func (s *Server) ownPhoto(c echo.Context) error {
	raw, err := s.store.PhotoBytes(c.Param("photo"))
	if err != nil {
		return err
	}
	return c.Blob(http.StatusOK, "application/octet-stream", raw)
}

// ownBackupKept notes that the copy is safe elsewhere, so that phones need not keep what it holds, and removes it here.
func (s *Server) ownBackupKept(c echo.Context) error {
	image, err := s.imageAsked(c)
	if err != nil {
		return err
	}
	if err := s.store.NoteBackup(c.Request().Context(), image.Logs); err != nil {
		return err
	}
	s.image.CompareAndSwap(image, nil)
	if err := image.Discard(); err != nil {
		return fmt.Errorf("back up: %w", err)
	}
	return s.sendJSON(c, http.StatusOK, image)
}
