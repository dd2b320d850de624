package server

import (
	"fmt"
	"log/slog"
	"net/http"
	"runtime/debug"
	"strings"
	"time"

	"github.com/labstack/echo/v4"
)

// contentPolicy allows what our own files need and nothing else; nothing inline.
var contentPolicy = strings.Join([]string{
	"default-src 'none'", "script-src 'self'", "style-src 'self'", "connect-src 'self'", "img-src 'self' blob: data:", "font-src 'self'",
	"worker-src 'self'", "manifest-src 'self'", "object-src 'none'", "form-action 'self'", "base-uri 'none'", "frame-ancestors 'none'",
	// No text becomes markup or an address of a script; the field client names its worker through two policies of its own.
	"require-trusted-types-for 'script'", "trusted-types tripwell-boot tripwell-version",
}, "; ")

// permissions are what a page may ask of a phone: its camera, for labels and photos. Everything else is off, in frames and in
// whatever somebody might smuggle into a page.
const permissions = "camera=(self), accelerometer=(), bluetooth=(), browsing-topics=(), display-capture=(), encrypted-media=(), geolocation=(), gyroscope=(), hid=(), magnetometer=(), microphone=(), midi=(), payment=(), serial=(), usb=(), xr-spatial-tracking=()"

// headers are the same on every answer. The referrer stays within this server: none at all would make browsers send
// "Origin: null" with our own forms, which then look like another site's.
func (s *Server) headers(next echo.HandlerFunc) echo.HandlerFunc {
	return func(c echo.Context) error {
		h := c.Response().Header()
		h.Set("Content-Security-Policy", contentPolicy)
		h.Set("X-Content-Type-Options", "nosniff")
		h.Set("Referrer-Policy", "same-origin")
		h.Set("Permissions-Policy", permissions)
		h.Set("X-Frame-Options", "DENY") // for browsers that do not know frame-ancestors
		h.Set("Cross-Origin-Opener-Policy", "same-origin")
		h.Set("Cross-Origin-Resource-Policy", "same-origin")
		return next(c)
	}
}

// logged writes one line per request. It names the route, never the address asked: sign-in links carry their secret there.
func (s *Server) logged(next echo.HandlerFunc) echo.HandlerFunc {
	return func(c echo.Context) error {
		began := time.Now()
		if err := next(c); err != nil {
			c.Error(err)
		}
		level := slog.LevelInfo
		switch {
		case c.Response().Status >= http.StatusInternalServerError:
			level = slog.LevelError
		case strings.HasPrefix(c.Path(), "/assets/"):
			level = slog.LevelDebug
		}
		s.log.LogAttrs(c.Request().Context(), level, "request",
			slog.String("method", c.Request().Method), slog.String("route", c.Path()), slog.Int("status", c.Response().Status),
			slog.Int64("bytes", c.Response().Size), slog.Duration("took", time.Since(began)), slog.String("person", person(c).ID),
			slog.String("ip", c.RealIP()))
		return nil
	}
}

// recovered makes a panic one failed request instead of a stopped server.
func (s *Server) recovered(next echo.HandlerFunc) echo.HandlerFunc {
	return func(c echo.Context) (err error) {
		defer func() {
			p := recover()
			if p == nil {
				return
			}
			if p == http.ErrAbortHandler {
				panic(p)
			}
			err = fmt.Errorf("panic: %v\n%s", p, debug.Stack())
		}()
		return next(c)
	}
}
