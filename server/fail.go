package server

import (
	"context"
	"crypto/rand"
	"errors"
	"fmt"
	"net/http"
	"strconv"
	"strings"

	"github.com/labstack/echo/v4"

	"tripwell/store"
)

// The codes on the wire: a closed list, append only. A client decides by code, never by text.
const (
	codeInvalid     = "invalid"
	codeNotSignedIn = "not_signed_in"
	codeForbidden   = "forbidden"
	codeNotFound    = "not_found"
	codeConflict    = "conflict"
	codeStale       = "stale"
	codeTooLarge    = "too_large"
	codeBusy        = "busy"
	codeUnavailable = "unavailable"
	codeInternal    = "internal"
)

// statuses is the one table from code to status.
var statuses = map[string]int{
	codeInvalid:     http.StatusBadRequest,
	codeNotSignedIn: http.StatusUnauthorized,
	codeForbidden:   http.StatusForbidden,
	codeNotFound:    http.StatusNotFound,
	codeConflict:    http.StatusConflict,
	codeStale:       http.StatusConflict,
	codeTooLarge:    http.StatusRequestEntityTooLarge,
	codeBusy:        http.StatusTooManyRequests,
	codeUnavailable: http.StatusServiceUnavailable,
	codeInternal:    http.StatusInternalServerError,
}

// retryAfterSeconds is what a busy or unavailable answer asks a client to wait.
const retryAfterSeconds = 2

// Wrong is an error as it stands on the wire: {"error": Wrong}.
type Wrong struct {
	Code  string `json:"code"`
	Field string `json:"field,omitempty"`
	Text  string `json:"text"`
	Ref   string `json:"ref,omitempty"` // finds the full text in the log
}

type wrongBody struct {
	Error Wrong `json:"error"`
}

func refuse(code, field, text string) error {
	return &store.Error{Code: code, Field: field, Text: text}
}

func tooLarge(limit int64) error {
	return refuse(codeTooLarge, "", fmt.Sprintf("This is more than the %d KiB taken at once. Send it in smaller parts.", limit>>10))
}

// refusedAs answers a refusal of the store with another code and text, and passes every other error on as it is.
func refusedAs(err error, code, text string) error {
	if isRefusal(err) {
		return refuse(code, "", text)
	}
	return err
}

// isRefusal tells a refusal a person can act on from a fault of ours.
func isRefusal(err error) bool {
	var refusal *store.Error
	return errors.As(err, &refusal)
}

// wrongOf sorts an error: what is told, and whether the cause is a fault to be logged.
func wrongOf(err error) (w Wrong, fault bool) {
	var refusal *store.Error
	if errors.As(err, &refusal) {
		if _, known := statuses[refusal.Code]; known && refusal.Code != codeInternal {
			return Wrong{Code: refusal.Code, Field: refusal.Field, Text: refusal.Text}, false
		}
	}
	var large *http.MaxBytesError
	if errors.As(err, &large) {
		return wrongOf(tooLarge(large.Limit))
	}
	var web *echo.HTTPError
	if errors.As(err, &web) && web.Code < http.StatusInternalServerError {
		switch web.Code {
		case http.StatusMethodNotAllowed, http.StatusNotFound:
			return Wrong{Code: codeNotFound, Text: "There is nothing at this address. Check it, or begin at the first page."}, false
		case http.StatusRequestEntityTooLarge:
			return Wrong{Code: codeTooLarge, Text: "This is more than is taken at once. Send it in smaller parts."}, false
		}
		return Wrong{Code: codeInvalid, Text: "This request cannot be read. Check it and send it again."}, false
	}
	ref := rand.Text()[:8]
	return Wrong{Code: codeInternal, Ref: ref, Text: "Something went wrong here. Reference " + ref + "."}, true
}

// told is what the caller is told of an error; a fault goes to the log with its reference.
func (s *Server) told(c echo.Context, err error) Wrong {
	w, fault := wrongOf(err)
	if fault {
		s.log.Error("fault", "ref", w.Ref, "method", c.Request().Method, "route", c.Path(), "err", err)
	}
	return w
}

// fail answers every error a handler returned.
func (s *Server) fail(err error, c echo.Context) {
	if c.Response().Committed {
		s.log.Error("fault after the answer began", "method", c.Request().Method, "route", c.Path(), "err", err)
		return
	}
	if errors.Is(err, context.Canceled) && c.Request().Context().Err() != nil {
		return // nobody is listening any more
	}
	w := s.told(c, err)
	c.Response().Header().Set("Cache-Control", "no-store")
	if w.Code == codeBusy || w.Code == codeUnavailable {
		c.Response().Header().Set("Retry-After", strconv.Itoa(retryAfterSeconds))
	}
	status := statuses[w.Code]
	if !wantsPage(c.Request()) {
		err = s.sendJSON(c, status, wrongBody{w})
	} else if w.Code == codeNotSignedIn {
		err = s.toSignIn(c)
	} else {
		err = s.page(c, status, "error.html", errorPage{Frame: s.frame(c, s.words.Say("access.error_"+w.Code), ""), Text: w.Text})
	}
	if err != nil && !c.Response().Committed {
		s.log.Error("answer an error", "err", err)
		_ = c.String(http.StatusInternalServerError, "Something went wrong here.")
	}
}

// errorPage is what a person sees instead of a page.
type errorPage struct {
	Frame
	Text string
}

// wantsPage tells a browser opening a page from a program: browsers ask for text/html by name when they navigate.
func wantsPage(r *http.Request) bool {
	return !strings.HasPrefix(r.URL.Path, "/exchange/") && !strings.HasPrefix(r.URL.Path, "/own/") && strings.Contains(r.Header.Get("Accept"), "text/html")
}
