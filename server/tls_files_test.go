package server

import (
	"crypto/ecdsa"
	"crypto/elliptic"
	"crypto/rand"
	"crypto/tls"
	"crypto/x509"
	"encoding/pem"
	"log/slog"
	"math/big"
	"net/http"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"
)

// pair writes a self-signed certificate for a name, valid until then, and its key.
func pair(t *testing.T, dir, name string, until time.Time) (cert, key string) {
	t.Helper()
	k, err := ecdsa.GenerateKey(elliptic.P256(), rand.Reader)
	must(t, err)
	c := &x509.Certificate{SerialNumber: big.NewInt(time.Now().UnixNano()), DNSNames: []string{name}, NotBefore: until.Add(-100 * 24 * time.Hour), NotAfter: until}
	der, err := x509.CreateCertificate(rand.Reader, c, c, k.Public(), k)
	must(t, err)
	secret, err := x509.MarshalPKCS8PrivateKey(k)
	must(t, err)
	cert, key = filepath.Join(dir, "cert.pem"), filepath.Join(dir, "key.pem")
	must(t, os.WriteFile(cert, pem.EncodeToMemory(&pem.Block{Type: "CERTIFICATE", Bytes: der}), 0o600))
	must(t, os.WriteFile(key, pem.EncodeToMemory(&pem.Block{Type: "PRIVATE KEY", Bytes: secret}), 0o600))
	return cert, key
}

func TestCertificateFiles_AreReadAgainAndBadOnesKeepTheOld(t *testing.T) {
	dir, later := t.TempDir(), time.Now().Add(90*24*time.Hour)
	cert, key := pair(t, dir, "first.example", later)
	var said strings.Builder
	f, err := ReadCertificateFiles(cert, key, time.Now, slog.New(slog.NewTextHandler(&said, nil)))
	must(t, err)
	serves := func(want string) {
		t.Helper()
		c, err := f.certificate(&tls.ClientHelloInfo{})
		must(t, err)
		if err := c.Leaf.VerifyHostname(want); err != nil {
			t.Errorf("%v", err)
		}
	}
	serves("first.example")
	was, err := os.ReadFile(cert)
	must(t, err)
	pair(t, dir, "second.example", later.Add(time.Hour))
	serves("second.example")

	// Half of a change: the certificate of before with the key of now.
	must(t, os.WriteFile(cert, was, 0o600))
	serves("second.example")
	serves("second.example")
	if n := strings.Count(said.String(), "the one before stays in use"); n != 1 {
		t.Errorf("it was said %d times, want once:\n%s", n, said.String())
	}
	must(t, os.WriteFile(cert, []byte("nothing"), 0o600))
	serves("second.example")
	must(t, os.Remove(cert))
	serves("second.example")
	serves("second.example")
	pair(t, dir, "ended.example", time.Now().Add(-time.Hour))
	serves("second.example")
	if !strings.Contains(said.String(), "it ended on") {
		t.Errorf("nothing was said of a certificate out of date:\n%s", said.String())
	}
	pair(t, dir, "third.example", later)
	serves("third.example")
	if f.strict() {
		t.Error("a certificate no browser trusts by itself calls for HSTS")
	}
}

func TestCertificateFiles_AMissingOneIsTold(t *testing.T) {
	dir := t.TempDir()
	cert, key := pair(t, dir, "first.example", time.Now().Add(time.Hour))
	for _, files := range [][2]string{{cert, filepath.Join(dir, "no.pem")}, {key, key}, {cert, cert}} {
		if _, err := ReadCertificateFiles(files[0], files[1], time.Now, slog.New(slog.DiscardHandler)); err == nil {
			t.Errorf("%v was taken", files)
		}
	}
}

// Plain http beside a certificate's https only leads there, and only with what a browser opens.
func TestCertificateFiles_PlainLeadsToHTTPS(t *testing.T) {
	r := newRig(t, 0)
	cert, key := pair(t, t.TempDir(), "first.example", time.Now().Add(time.Hour))
	f, err := ReadCertificateFiles(cert, key, time.Now, slog.New(slog.DiscardHandler))
	must(t, err)
	public, plain := r.serveWith(Options{Certificates: f})
	req, err := http.NewRequest(http.MethodGet, "http://"+plain+"/t/K7QM2P3?a=b", nil)
	must(t, err)
	if res := r.do(browser(t), req); res.status != 307 || res.header.Get("Location") != "https://"+public+"/t/K7QM2P3?a=b" {
		t.Errorf("got %d to %q", res.status, res.header.Get("Location"))
	}
	req, err = http.NewRequest(http.MethodPost, "http://"+plain+"/exchange/push", strings.NewReader("{}"))
	must(t, err)
	if res := r.do(browser(t), req); res.status != 400 {
		t.Errorf("a POST over http: got %d, want 400", res.status)
	}
}
