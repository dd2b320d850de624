package server

import (
	"bytes"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"mime"
	"net/http"
	"strings"
	"time"

	"github.com/klauspost/compress/gzip"
	"github.com/labstack/echo/v4"
)

// sendJSON encodes v first and sends it whole, so that a failure half-way can still be answered as an error. Text keeps
// its < > & as they are.
func (s *Server) sendJSON(c echo.Context, status int, v any) error {
	body, err := encodeJSON(c, v)
	if err != nil {
		return err
	}
	return sendBytes(c, status, "application/json", body)
}

// sendLongJSON is sendJSON for answers that grow with a site: packed, they reach a phone on one bar of signal in a fifth
// of the time.
func (s *Server) sendLongJSON(c echo.Context, status int, v any) error {
	body, err := encodeJSON(c, v)
	if err != nil {
		return err
	}
	return sendPacked(c, status, "application/json", body)
}

func encodeJSON(c echo.Context, v any) ([]byte, error) {
	var b bytes.Buffer
	enc := json.NewEncoder(&b)
	enc.SetEscapeHTML(false)
	if err := enc.Encode(v); err != nil {
		return nil, fmt.Errorf("encode answer of %s: %w", c.Path(), err)
	}
	return b.Bytes(), nil
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
	return sendPacked(c, status, "text/html; charset=utf-8", b.Bytes())
}

// worthPacking is the size from which packing saves a phone at least one packet.
const worthPacking = 1400

func sendPacked(c echo.Context, status int, kind string, body []byte) error {
	c.Response().Header().Set("Vary", "Accept-Encoding")
	if len(body) < worthPacking || !strings.Contains(c.Request().Header.Get("Accept-Encoding"), "gzip") {
		return sendBytes(c, status, kind, body)
	}
	packed, err := gzipped(body, gzip.BestSpeed)
	if err != nil {
		return fmt.Errorf("pack answer of %s: %w", c.Path(), err)
	}
	c.Response().Header().Set("Content-Encoding", "gzip")
	return sendBytes(c, status, kind, packed)
}

func gzipped(raw []byte, level int) ([]byte, error) {
	var b bytes.Buffer
	w, err := gzip.NewWriterLevel(&b, level)
	if err != nil {
		return nil, err
	}
	if _, err := w.Write(raw); err != nil {
		return nil, err
	}
	if err := w.Close(); err != nil {
		return nil, err
	}
	return b.Bytes(), nil
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

// flowing moves the deadlines on with every write: a large download may take long, a stalled one may not. The read
// deadline counts too: when it passes, net/http takes the caller for gone.
type flowing struct {
	w   io.Writer
	ctl *http.ResponseController
}

func (f *flowing) Write(p []byte) (int, error) {
	until := time.Now().Add(writeTimeout)
	for _, move := range []func(time.Time) error{f.ctl.SetWriteDeadline, f.ctl.SetReadDeadline} {
		if err := move(until); err != nil && !errors.Is(err, http.ErrNotSupported) {
			return 0, err
		}
	}
	return f.w.Write(p)
}
