package server

import (
	"compress/gzip"
	"io"
	"net/http"
	"net/http/httptest"
	"path"
	"regexp"
	"strings"
	"testing"
)

func get200(t *testing.T, h http.Handler, address string, header ...string) *httptest.ResponseRecorder {
	t.Helper()
	req := httptest.NewRequest(http.MethodGet, address, nil)
	for i := 0; i+1 < len(header); i += 2 {
		req.Header.Set(header[i], header[i+1])
	}
	rec := httptest.NewRecorder()
	h.ServeHTTP(rec, req)
	if rec.Code != http.StatusOK {
		t.Fatalf("GET %s: got %d %s, want 200", address, rec.Code, rec.Body)
	}
	return rec
}

func TestAssets_EveryFileIsServedWithItsTypeForEver(t *testing.T) {
	s, err := New(nil, Options{})
	if err != nil {
		t.Fatal(err)
	}
	h := s.Handler()
	for name, file := range s.assets.files {
		address, err := s.assets.path(name)
		if err != nil {
			t.Fatal(err)
		}
		rec := get200(t, h, address)
		if got := rec.Header().Get("Content-Type"); got != file.kind {
			t.Errorf("%s: got type %q, want %q", name, got, file.kind)
		}
		if got := rec.Header().Get("Cache-Control"); !strings.Contains(got, "immutable") {
			t.Errorf("%s: got Cache-Control %q, want immutable", name, got)
		}
		packed := get200(t, h, address, "Accept-Encoding", "gzip")
		if packed.Header().Get("Content-Encoding") != "gzip" {
			continue
		}
		r, err := gzip.NewReader(packed.Body)
		if err != nil {
			t.Fatal(err)
		}
		unpacked, err := io.ReadAll(r)
		if err != nil || string(unpacked) != rec.Body.String() {
			t.Errorf("%s: the packed file differs from the plain one (%v)", name, err)
		}
	}
}

// Every module a module imports by a relative name must be there under the same hash.
func TestAssets_RelativeImportsResolve(t *testing.T) {
	s, err := New(nil, Options{})
	if err != nil {
		t.Fatal(err)
	}
	imports := regexp.MustCompile(`(?:from|import)\s*\(?\s*["'](\.{1,2}/[^"']+)["']`)
	seen := 0
	for name, file := range s.assets.files {
		if path.Ext(name) != ".mjs" {
			continue
		}
		for _, m := range imports.FindAllStringSubmatch(string(file.plain), -1) {
			seen++
			if want := path.Join(path.Dir(name), m[1]); s.assets.files[want].kind == "" {
				t.Errorf("%s imports %s, which is not embedded", name, m[1])
			}
		}
	}
	t.Logf("%d imports", seen)
}

func TestAssets_AnotherHashIsNotFound(t *testing.T) {
	s, err := New(nil, Options{})
	if err != nil {
		t.Fatal(err)
	}
	rec := httptest.NewRecorder()
	s.Handler().ServeHTTP(rec, httptest.NewRequest(http.MethodGet, "/assets/0123456789abcdef/tokens.css", nil))
	if rec.Code != http.StatusNotFound || strings.Contains(rec.Header().Get("Cache-Control"), "immutable") {
		t.Errorf("got %d, Cache-Control %q; want 404 that is not kept", rec.Code, rec.Header().Get("Cache-Control"))
	}
}
