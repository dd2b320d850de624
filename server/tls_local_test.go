package server

import (
	"context"
	"crypto/tls"
	"crypto/x509"
	"encoding/pem"
	"net"
	"net/http"
	"net/netip"
	"os"
	"os/exec"
	"path/filepath"
	"slices"
	"strings"
	"testing"
	"time"

	"github.com/google/go-cmp/cmp"

	"tripwell/store"
)

// house is a store with an authority on a clock that tests turn, and a machine whose names they say.
type house struct {
	t     *testing.T
	store *store.Store
	now   time.Time
	own   hosts
}

func newHouse(t *testing.T) *house {
	t.Helper()
	s, err := store.Open(t.TempDir(), store.Options{Now: time.Now, Create: true})
	must(t, err)
	t.Cleanup(func() { must(t, s.Close()) })
	return &house{t: t, store: s, now: time.Now(), own: hosts{names: []string{"localhost", "basement", "basement.local"}, addresses: []netip.Addr{netip.MustParseAddr("127.0.0.1"), netip.MustParseAddr("192.168.7.20")}}}
}

func (h *house) open(names ...string) (*Authority, error) {
	return openAuthorityOf(h.store, names, func() time.Time { return h.now }, func() hosts { return h.own })
}

// leaf is the certificate a browser gets that came to an address.
func (h *house) leaf(a *Authority, came string) *x509.Certificate {
	h.t.Helper()
	c, err := a.certificate(&tls.ClientHelloInfo{Conn: cameTo(came)})
	must(h.t, err)
	return c.Leaf
}

// cameTo is a connection that arrived at an address.
type cameTo string

func (c cameTo) LocalAddr() net.Addr {
	return net.TCPAddrFromAddrPort(netip.MustParseAddrPort(string(c)))
}
func (cameTo) RemoteAddr() net.Addr             { return nil }
func (cameTo) Read([]byte) (int, error)         { return 0, net.ErrClosed }
func (cameTo) Write([]byte) (int, error)        { return 0, net.ErrClosed }
func (cameTo) Close() error                     { return nil }
func (cameTo) SetDeadline(time.Time) error      { return nil }
func (cameTo) SetReadDeadline(time.Time) error  { return nil }
func (cameTo) SetWriteDeadline(time.Time) error { return nil }

func TestAuthority_IsMadeOnceAndKeptFromOthers(t *testing.T) {
	h := newHouse(t)
	a, err := h.open("tests.lan")
	must(t, err)
	again, err := h.open("tests.lan")
	must(t, err)
	if !a.Made || again.Made || !again.cert.Equal(a.cert) {
		t.Errorf("got made %v, then %v: want it made once", a.Made, again.Made)
	}
	for path, want := range map[string]os.FileMode{h.store.KeysDir(): 0o700, filepath.Join(h.store.KeysDir(), authorityFile): 0o600} {
		info, err := os.Stat(path)
		must(t, err)
		if got := info.Mode().Perm(); got != want {
			t.Errorf("%s: got mode %o, want %o", path, got, want)
		}
	}
	must(t, os.WriteFile(filepath.Join(h.store.KeysDir(), authorityFile), []byte("-----BEGIN"), 0o600))
	if _, err := h.open("tests.lan"); err == nil || !strings.Contains(err.Error(), "put a copy of it back") {
		t.Errorf("a damaged authority: got %v, want to be told, and no new one", err)
	}
}

// What systems ask of certificates: RFC 5280 4.2.1.1 to 4.2.1.12; at most 398 days for a server (the longest span browsers
// take of public ones, which some hold own authorities to as well).
func TestAuthority_ItsCertificatesAreWhatBrowsersAskFor(t *testing.T) {
	h := newHouse(t)
	a, err := h.open("tests.lan", "192.168.9.9")
	must(t, err)
	leaf := h.leaf(a, "192.168.7.20:443")
	if span := leaf.NotAfter.Sub(leaf.NotBefore); span > 397*24*time.Hour {
		t.Errorf("the certificate holds %v, want at most 397 days", span)
	}
	for _, host := range []string{"tests.lan", "basement", "basement.local", "localhost", "192.168.7.20", "192.168.9.9", "127.0.0.1"} {
		if err := leaf.VerifyHostname(host); err != nil {
			t.Errorf("%s: %v", host, err)
		}
	}
	if leaf.KeyUsage != x509.KeyUsageDigitalSignature || !slices.Equal(leaf.ExtKeyUsage, []x509.ExtKeyUsage{x509.ExtKeyUsageServerAuth}) || leaf.IsCA {
		t.Errorf("got usage %b, %v, authority %v", leaf.KeyUsage, leaf.ExtKeyUsage, leaf.IsCA)
	}
	if len(leaf.SubjectKeyId) != 20 || len(leaf.AuthorityKeyId) == 0 || string(leaf.AuthorityKeyId) != string(a.cert.SubjectKeyId) {
		t.Errorf("key ids: %x by %x, the authority's is %x", leaf.SubjectKeyId, leaf.AuthorityKeyId, a.cert.SubjectKeyId)
	}
	if !a.cert.IsCA || !a.cert.MaxPathLenZero || a.cert.KeyUsage&x509.KeyUsageCertSign == 0 || !a.cert.PermittedDNSDomainsCritical {
		t.Errorf("the authority: CA %v, path %d, usage %b", a.cert.IsCA, a.cert.MaxPathLen, a.cert.KeyUsage)
	}
	if err := a.make(hosts{names: []string{"bank.example"}}); err == nil {
		t.Error("the authority vouched for a public name it was not made for")
	}
	if err := a.make(hosts{addresses: []netip.Addr{netip.MustParseAddr("8.8.8.8")}}); err == nil {
		t.Error("the authority vouched for a public address")
	}
}

// The same certificate as another program reads it: OpenSSL's own verification, name constraints included.
func TestAuthority_OpenSSLAgrees(t *testing.T) {
	openssl, err := exec.LookPath("openssl")
	if err != nil {
		if os.Getenv("CI") != "" {
			t.Fatal("openssl is not installed, and in CI this test must run")
		}
		t.Skip("openssl is not installed: its view of the certificate is left out")
	}
	h := newHouse(t)
	a, err := h.open("tests.lan")
	must(t, err)
	dir := t.TempDir()
	write := func(name string, der []byte) string {
		path := filepath.Join(dir, name)
		must(t, os.WriteFile(path, pem.EncodeToMemory(&pem.Block{Type: "CERTIFICATE", Bytes: der}), 0o600))
		return path
	}
	root, leaf := write("root.pem", a.cert.Raw), write("leaf.pem", h.leaf(a, "127.0.0.1:1").Raw)
	for _, host := range [][]string{{"-verify_hostname", "tests.lan"}, {"-verify_ip", "192.168.7.20"}} {
		out, err := exec.Command(openssl, slices.Concat([]string{"verify", "-x509_strict", "-purpose", "sslserver", "-CAfile", root}, host, []string{leaf})...).CombinedOutput()
		if err != nil {
			t.Errorf("%v: %v\n%s", host, err, out)
		}
	}
	if out, err := exec.Command(openssl, "verify", "-CAfile", root, "-verify_hostname", "elsewhere.lan", leaf).CombinedOutput(); err == nil {
		t.Errorf("openssl takes it for another name:\n%s", out)
	}
}

func TestAuthority_RenewsByItself(t *testing.T) {
	h := newHouse(t)
	a, err := h.open("tests.lan")
	must(t, err)
	first := h.leaf(a, "192.168.7.20:443")
	h.now = h.now.Add(30 * time.Minute)
	if h.leaf(a, "192.168.7.20:443") != first {
		t.Error("the certificate changed although nothing did")
	}
	h.own.addresses = append(h.own.addresses, netip.MustParseAddr("10.4.0.3"))
	moved := h.leaf(a, "10.4.0.3:443")
	if moved.VerifyHostname("10.4.0.3") != nil || moved == first {
		t.Errorf("at a new address: got a certificate for %v", moved.IPAddresses)
	}
	if again := h.leaf(a, "8.8.8.8:443"); again != moved {
		t.Error("an address the authority may not vouch for makes a new certificate each time")
	}
	h.now = first.NotAfter.Add(-renewBefore + time.Hour)
	young := h.leaf(a, "192.168.7.20:443")
	if !young.NotAfter.After(first.NotAfter) || a.holds(young) != nil {
		t.Errorf("near its end: got one until %v", young.NotAfter)
	}
	h.now = a.cert.NotAfter.Add(-24 * time.Hour)
	if last := h.leaf(a, "192.168.7.20:443"); last.NotAfter.After(a.cert.NotAfter) {
		t.Error("a certificate outlives its authority")
	}
	h.now = a.cert.NotAfter.Add(24 * time.Hour)
	if _, err := h.open("tests.lan"); err == nil || !strings.Contains(err.Error(), "ended on") {
		t.Errorf("an authority out of date: got %v", err)
	}
}

func TestAuthority_RefusesNamesItWasNotMadeFor(t *testing.T) {
	h := newHouse(t)
	if _, err := h.open("tests.lan"); err != nil {
		t.Fatal(err)
	}
	for _, name := range []string{"tests.example.org", "203.0.113.9"} {
		if _, err := h.open(name); err == nil || !strings.Contains(err.Error(), "may not vouch for "+name) {
			t.Errorf("%s: got %v, want to be told before phones refuse it", name, err)
		}
	}
	if _, err := h.open("other.lan", "10.0.0.7"); err != nil {
		t.Errorf("a private name and address: %v", err)
	}
	for _, wrong := range []string{"two words", "https://tests.lan", "-x.lan", ""} {
		if _, err := h.open(wrong); err == nil {
			t.Errorf("%q was taken for a name", wrong)
		}
	}
	h = newHouse(t)
	a, err := h.open("tests.example.org")
	must(t, err)
	if got := a.Hosts()[0]; got != "tests.example.org" {
		t.Errorf("a public name given from the beginning: got %v first", got)
	}
}

// Over http the page about trust is all there is: no route of the public face is answered there.
func TestAuthority_PlainHTTPTellsOnlyHowToTrust(t *testing.T) {
	r := newRig(t, 1)
	l, plain, a := r.serveLocal("tests.lan")
	base := "http://" + plain
	get := func(path, accept string) answer {
		req, err := http.NewRequest(http.MethodGet, base+path, nil)
		must(t, err)
		req.Header.Set("Accept", accept)
		return r.do(browser(t), req)
	}
	page := get("/", "text/html")
	print := a.Fingerprint()
	for _, want := range []string{print[:23], print[24:47], print[48:71], print[72:], "/" + certificateName, "/" + profileName, "<svg", "Android", "iPhone", "Windows", "Mac", "Linux", "tests.lan"} {
		if !strings.Contains(page.body, want) {
			t.Errorf("the page lacks %q", want)
		}
	}
	if page.status != 200 || page.header.Get("Strict-Transport-Security") != "" {
		t.Errorf("the page: got %d, HSTS %q", page.status, page.header.Get("Strict-Transport-Security"))
	}
	if got := get("/"+certificateName, "*/*"); got.body != string(a.cert.Raw) || got.header.Get("Content-Type") != "application/x-x509-ca-cert" {
		t.Errorf("the certificate: got %d bytes as %s", len(got.body), got.header.Get("Content-Type"))
	}
	for _, route := range publicRoutes() {
		path := strings.NewReplacer(":", "", "*", "x").Replace(route.path)
		if route.method != http.MethodGet || path == "/" || strings.HasPrefix(path, "/assets/") {
			continue
		}
		if res := get(path, "text/html"); res.status != 404 && (res.status != 303 || res.header.Get("Location") != "/") {
			t.Errorf("http %s: got %d, want nothing, or the way to the page about trust", path, res.status)
		}
		if res := get(path, "application/json"); res.status != 404 {
			t.Errorf("http %s for a program: got %d, want 404", path, res.status)
		}
	}
	if res, err := browser(t).Post(base+"/in/x", "application/x-www-form-urlencoded", nil); err != nil || res.StatusCode < 400 {
		t.Errorf("a POST over http: got %v, %v", res, err)
	}

	// Over https, with the authority trusted: everything, by HTTP/2 too, and never HSTS.
	roots := x509.NewCertPool()
	roots.AddCert(a.cert)
	transport := &http.Transport{TLSClientConfig: &tls.Config{RootCAs: roots}, ForceAttemptHTTP2: true}
	defer transport.CloseIdleConnections()
	res, err := (&http.Client{Transport: transport}).Get("https://" + l + "/in")
	must(t, err)
	defer res.Body.Close()
	if res.StatusCode != 200 || res.ProtoMajor != 2 || res.Header.Get("Strict-Transport-Security") != "" {
		t.Errorf("https: got %d over HTTP/%d, HSTS %q", res.StatusCode, res.ProtoMajor, res.Header.Get("Strict-Transport-Security"))
	}
	if _, err := http.Get("https://" + l + "/in"); err == nil {
		t.Error("who does not trust the authority was answered")
	}
	old := &tls.Config{RootCAs: roots, MaxVersion: tls.VersionTLS11, MinVersion: tls.VersionTLS10}
	if c, err := tls.Dial("tcp", l, old); err == nil {
		_ = c.Close()
		t.Error("TLS 1.1 was taken")
	}
}

// serveLocal serves the rig's store a second time, with an authority, and gives both addresses.
func (r *rig) serveLocal(names ...string) (secure, plain string, a *Authority) {
	r.t.Helper()
	a, err := OpenAuthority(r.store, names, time.Now)
	must(r.t, err)
	secure, plain = r.serveWith(Options{Certificates: a})
	return secure, plain, a
}

func (r *rig) serveWith(o Options) (public, plain string) {
	r.t.Helper()
	listen := func() net.Listener {
		l, err := net.Listen("tcp", "127.0.0.1:0")
		must(r.t, err)
		return l
	}
	front := listen()
	if o.Certificates != nil {
		o.Plain = listen()
		plain = o.Plain.Addr().String()
	}
	srv, err := New(r.store, o)
	must(r.t, err)
	ctx, stop := context.WithCancel(context.Background())
	ended := make(chan error, 1)
	go func() { ended <- srv.Serve(ctx, front, nil) }()
	r.t.Cleanup(func() {
		stop()
		must(r.t, <-ended)
	})
	return front.Addr().String(), plain
}

func TestProfile_HoldsTheAuthority(t *testing.T) {
	h := newHouse(t)
	a, err := h.open("tests.lan")
	must(t, err)
	if cmp.Diff(a.profile(), a.profile()) != "" {
		t.Error("the same authority makes two profiles, and a phone would install both")
	}
	python, err := exec.LookPath("/usr/bin/python3")
	if err != nil {
		if os.Getenv("CI") != "" {
			t.Fatal("python3 is not installed, and in CI this test must run")
		}
		t.Skip("python3 is not installed: its reader of property lists is left out")
	}
	cmd := exec.Command(python, "-c", `import plistlib, sys
p = plistlib.loads(sys.stdin.buffer.read())
c = p["PayloadContent"][0]
assert p["PayloadType"] == "Configuration" and c["PayloadType"] == "com.apple.security.root", p
assert len({p["PayloadUUID"], c["PayloadUUID"]}) == 2
sys.stdout.buffer.write(c["PayloadContent"])`)
	cmd.Stdin = strings.NewReader(string(a.profile()))
	out, err := cmd.Output()
	if err != nil || string(out) != string(a.cert.Raw) {
		t.Errorf("python's plistlib reads %d bytes, want the certificate's %d (%v)", len(out), len(a.cert.Raw), err)
	}
}
