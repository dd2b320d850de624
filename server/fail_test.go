package server

import (
	"encoding/json"
	"errors"
	"fmt"
	"net/http"
	"net/http/httptest"
	"strings"
	"testing"

	"github.com/labstack/echo/v4"

	"tripwell/store"
)

func TestFail_EveryCodeHasItsStatusAndWireShape(t *testing.T) {
	s, err := New(nil, Options{})
	if err != nil {
		t.Fatal(err)
	}
	// DEVELOPERS.md, error codes on the wire.
	want := map[string]int{"invalid": 400, "not_signed_in": 401, "forbidden": 403, "not_found": 404, "conflict": 409, "stale": 409,
		"too_large": 413, "busy": 429, "unavailable": 503, "internal": 500}
	if len(statuses) != len(want) {
		t.Errorf("got %d codes, want %d", len(statuses), len(want))
	}
	for code, status := range want {
		e := echo.New()
		rec := httptest.NewRecorder()
		c := e.NewContext(httptest.NewRequest(http.MethodGet, "/exchange/pull", nil), rec)
		s.fail(fmt.Errorf("wrapped: %w", &store.Error{Code: code, Field: "f", Text: "A sentence."}), c)
		if rec.Code != status {
			t.Errorf("%s: got %d, want %d", code, rec.Code, status)
		}
		var got wrongBody
		if err := json.Unmarshal(rec.Body.Bytes(), &got); err != nil {
			t.Fatalf("%s: %v in %s", code, err, rec.Body)
		}
		if got.Error.Code != code {
			t.Errorf("got code %q, want %q", got.Error.Code, code)
		}
		if waits := rec.Header().Get("Retry-After") != ""; waits != (code == "busy" || code == "unavailable") {
			t.Errorf("%s: Retry-After is %q", code, rec.Header().Get("Retry-After"))
		}
		if s.words.Say("access.error_"+code) == "access.error_"+code {
			t.Errorf("%s: the words catalogue has no heading for it", code)
		}
	}
}

func TestFail_InternalTextStaysHere(t *testing.T) {
	for _, err := range []error{errors.New("bucket secret-bucket: page 7 broken"), &store.Error{Code: "no_such_code", Text: "secret-bucket"}} {
		w, fault := wrongOf(err)
		if !fault || w.Code != "internal" || w.Ref == "" || !strings.Contains(w.Text, w.Ref) || strings.Contains(w.Text, "secret-bucket") {
			t.Errorf("%v: got %+v, fault %v; want an internal error with only a reference", err, w, fault)
		}
	}
}
