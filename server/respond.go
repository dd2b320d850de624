package server

import (
	"bytes"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"mime"
	"net/http"
	"time"

	"github.com/labstack/echo/v4"
)

// sendJSON encodes v first and sends it whole, so that a failure half-way can still be answered as an error. Text keeps
// its < > & as they are.
func (s *Server) sendJSON(c echo.Context, status int, v any) error {
	var b bytes.Buffer
	enc := json.NewEncoder(&b)
	enc.SetEscapeHTML(false)
	if err := enc.Encode(v); err != nil {
		return fmt.Errorf("encode answer of %s: %w", c.Path(), err)
	}
	return sendBytes(c, status, "application/json", b.Bytes())
}

// page renders a page of server/pages and sends it whole. view is the page's own struct; it embeds Frame.
func (s *Server) page(c echo.Context, status int, name string, view any) error {
	t, ok := s.pages[name]
	if !ok {
		return fmt.Errorf("page %s: no such page", name)
	}
	var b bytes.Buffer
	if err := t.Execute(&b, view); err != nil {
		return fmt.Errorf("page %s: %w", name, err)
	}
	return sendBytes(c, status, "text/html; charset=utf-8", b.Bytes())
}

func sendBytes(c echo.Context, status int, kind string, body []byte) error {
	h := c.Response().Header()
	if h.Get("Cache-Control") == "" {
		h.Set("Cache-Control", "no-store")
	}
	return c.Blob(status, kind, body)
}

// toPage sends a browser to a path of ours after a form was taken.
func toPage(c echo.Context, path string) error { return c.Redirect(http.StatusSeeOther, path) }

// download sends a file as it is made.
func (s *Server) download(c echo.Context, kind, name string, write func(io.Writer) error) error {
	c.Response().Header().Set("Content-Disposition", mime.FormatMediaType("attachment", map[string]string{"filename": name}))
	return s.stream(c, kind, write)
}

// stream sends bytes as they are made. What fails before the first byte is answered as any error; what fails later breaks
// the connection, so that nobody takes half a file for a whole one.
func (s *Server) stream(c echo.Context, kind string, write func(io.Writer) error) error {
	h := c.Response().Header()
	h.Set("Content-Type", kind)
	h.Set("Cache-Control", "no-store")
	err := write(&flowing{w: c.Response(), ctl: http.NewResponseController(c.Response())})
	switch {
	case err == nil && !c.Response().Committed:
		c.Response().WriteHeader(http.StatusOK)
	case err != nil && c.Response().Committed:
		if c.Request().Context().Err() == nil {
			s.log.Error("answer broken off", "route", c.Path(), "err", err)
		}
		panic(http.ErrAbortHandler)
	case err != nil:
		h.Del("Content-Type")
		h.Del("Content-Disposition")
	}
	return err
}

// flowing moves the write deadline on with every write: a large download may take long, a stalled one may not.
type flowing struct {
	w   io.Writer
	ctl *http.ResponseController
}

func (f *flowing) Write(p []byte) (int, error) {
	if err := f.ctl.SetWriteDeadline(time.Now().Add(writeTimeout)); err != nil && !errors.Is(err, http.ErrNotSupported) {
		return 0, err
	}
	return f.w.Write(p)
}
