package server

import (
	"bytes"
	"crypto/sha256"
	"encoding/base64"
	"net/http"
	"strings"
	"time"

	"github.com/labstack/echo/v4"

	"tripwell/export/calendar"
	"tripwell/store"
)

const calendarKind = "text/calendar; charset=utf-8"

// feedShow gives the calendar of whoever a secret address belongs to. Calendars ask without signing in and without cookies, so
// the address is all there is; what it shows is what that person may see now, and a person who may not sign in any more sees none.
func (s *Server) feedShow(c echo.Context) error {
	p, err := s.store.FeedPerson(strings.TrimSuffix(c.Param("token"), ".ics"))
	if err != nil {
		return err
	}
	var feed calendar.Feed
	changed := s.store.Now()
	err = s.store.View(p.Scope(), func(v *store.View) (err error) {
		if feed, err = calendar.FeedOf(v, s.store.Now(), origin(c.Request())); err != nil {
			return err
		}
		changed, err = v.Changed()
		return err
	})
	if err != nil {
		return err
	}
	if feed.Stamp.After(changed) {
		changed = feed.Stamp // states change with the day
	}
	var b bytes.Buffer
	if err := calendar.Write(&b, feed); err != nil {
		return err
	}
	return sendFeed(c, b.Bytes(), changed)
}

// sendFeed answers 304 where the reader has these bytes already (RFC 9110 13.1.2 and 13.1.3).
func sendFeed(c echo.Context, body []byte, changed time.Time) error {
	sum := sha256.Sum256(body)
	tag := `"` + base64.RawURLEncoding.EncodeToString(sum[:12]) + `"`
	h, changed := c.Response().Header(), changed.UTC().Truncate(time.Second)
	h.Set("ETag", tag)
	h.Set("Last-Modified", changed.Format(http.TimeFormat))
	h.Set("Cache-Control", "private, max-age=0, must-revalidate")
	h.Set("X-Robots-Tag", "noindex")
	known := c.Request().Header.Get("If-None-Match")
	since, err := http.ParseTime(c.Request().Header.Get("If-Modified-Since"))
	if strings.Contains(known, tag) || known == "" && err == nil && !changed.After(since) {
		return c.NoContent(http.StatusNotModified)
	}
	return sendPacked(c, http.StatusOK, calendarKind, body)
}
