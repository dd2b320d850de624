package server

import (
	"crypto/tls"
	"net/http"
	"net/http/httptest"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"

	"golang.org/x/crypto/acme"
)

// A certificate is asked for by no other name than those given, however a browser says it; what came is kept from others.
func TestPublicNames_AsksForItsOwnNamesOnly(t *testing.T) {
	h := newHouse(t)
	asked := 0
	directory := httptest.NewServer(http.HandlerFunc(func(w http.ResponseWriter, _ *http.Request) {
		asked++
		http.Error(w, "not today", http.StatusForbidden)
	}))
	defer directory.Close()
	p, err := NewPublicNames(h.store, []string{"tests.example.org"}, ACME{Directory: directory.URL, Client: directory.Client()})
	must(t, err)
	c := p.config()
	if c.MinVersion != tls.VersionTLS12 || !slices.Contains(c.NextProtos, "h2") || !slices.Contains(c.NextProtos, acme.ALPNProto) {
		t.Errorf("got TLS from %x, protocols %v", c.MinVersion, c.NextProtos)
	}
	for _, name := range []string{"other.example.org", "tests.example.org.evil.example", "192.0.2.1", ""} {
		if _, err := c.GetCertificate(&tls.ClientHelloInfo{ServerName: name, CipherSuites: []uint16{tls.TLS_ECDHE_ECDSA_WITH_AES_128_GCM_SHA256}}); err == nil || asked > 0 {
			t.Errorf("%q: got %v, %d questions to the authority; want none", name, err, asked)
		}
	}
	hello := &tls.ClientHelloInfo{ServerName: "TESTS.example.org", CipherSuites: []uint16{tls.TLS_ECDHE_ECDSA_WITH_AES_128_GCM_SHA256}, SignatureSchemes: []tls.SignatureScheme{tls.ECDSAWithP256AndSHA256}}
	if _, err := c.GetCertificate(hello); err == nil || asked == 0 {
		t.Errorf("its own name: got %v and %d questions, want the authority to be asked", err, asked)
	}
	info, err := os.Stat(filepath.Join(h.store.KeysDir(), "acme"))
	must(t, err)
	if info.Mode().Perm() != 0o700 {
		t.Errorf("the folder of keys has mode %o, want 700", info.Mode().Perm())
	}
	if _, err := NewPublicNames(h.store, nil, ACME{}); err == nil {
		t.Error("without a name anybody could have certificates asked for")
	}
}

// Over http only the authority's question is answered; browsers are sent to https at a name of ours.
func TestPublicNames_PlainLeadsToItsOwnNames(t *testing.T) {
	p, err := NewPublicNames(newHouse(t).store, []string{"tests.example.org"}, ACME{})
	must(t, err)
	plain := p.plain(nil, "443")
	for path, want := range map[string]string{"http://tests.example.org/t/K7QM2P3?x=1": "https://tests.example.org/t/K7QM2P3?x=1", "http://evil.example/in": "https://tests.example.org/in"} {
		w := httptest.NewRecorder()
		plain.ServeHTTP(w, httptest.NewRequest(http.MethodGet, path, nil))
		if got := w.Header().Get("Location"); got != want {
			t.Errorf("%s: got %q, want %q", path, got, want)
		}
	}
	w := httptest.NewRecorder()
	plain.ServeHTTP(w, httptest.NewRequest(http.MethodGet, "http://tests.example.org/.well-known/acme-challenge/nobody-asked", nil))
	if w.Code != http.StatusNotFound || strings.Contains(w.Body.String(), "Tripwell") {
		t.Errorf("a question nobody asked: got %d", w.Code)
	}
}

// HSTS goes with certificates every browser trusts, over TLS, and never without.
func TestCertificates_StrictOnlyWhereRight(t *testing.T) {
	r := newRig(t, 0)
	for _, c := range []struct {
		kind Certificates
		tls  bool
		want string
	}{{&PublicNames{}, true, strictTransport}, {&PublicNames{}, false, ""}, {&CertificateFiles{public: true}, true, strictTransport}, {&CertificateFiles{}, true, ""}, {&Authority{}, true, ""}, {nil, true, ""}} {
		srv, err := New(r.store, Options{Certificates: c.kind})
		must(t, err)
		req := httptest.NewRequest(http.MethodGet, "https://tests.example.org/in", nil)
		if !c.tls {
			req.TLS = nil
		}
		w := httptest.NewRecorder()
		srv.Handler().ServeHTTP(w, req)
		if got := w.Header().Get("Strict-Transport-Security"); got != c.want {
			t.Errorf("%T, TLS %v: got %q, want %q", c.kind, c.tls, got, c.want)
		}
	}
}
