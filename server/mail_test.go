package server

import (
	"bytes"
	"context"
	"crypto/ecdsa"
	"crypto/elliptic"
	"crypto/rand"
	"crypto/tls"
	"crypto/x509"
	"encoding/pem"
	"errors"
	"io"
	"log/slog"
	"math/big"
	"mime"
	"mime/multipart"
	"mime/quotedprintable"
	"net"
	"net/mail"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"sync"
	"testing"
	"time"

	"github.com/emersion/go-sasl"
	"github.com/emersion/go-smtp"

	"tripwell/store"
)

// postOffice is a real SMTP server on loopback that keeps what it takes.
type postOffice struct {
	mu      sync.Mutex
	taken   []string
	to      []string
	refuse  string // said instead of taking a message
	user    string // "" asks for nobody
	secret  string
	port    int
	trust   string // its certificate, PEM
	tlsUsed int
}

func newPostOffice(t *testing.T, user, secret string, implicit bool) *postOffice {
	t.Helper()
	p := &postOffice{user: user, secret: secret}
	cert := p.certificate(t)
	s := smtp.NewServer(p)
	s.Domain, s.AllowInsecureAuth = "localhost", false
	s.TLSConfig = &tls.Config{Certificates: []tls.Certificate{cert}, MinVersion: tls.VersionTLS12}
	l, err := net.Listen("tcp", "127.0.0.1:0")
	must(t, err)
	p.port = l.Addr().(*net.TCPAddr).Port
	if implicit {
		l = tls.NewListener(l, s.TLSConfig)
	}
	ended := make(chan error, 1)
	go func() { ended <- s.Serve(l) }()
	t.Cleanup(func() {
		must(t, s.Close())
		if err := <-ended; err != nil && !errors.Is(err, smtp.ErrServerClosed) {
			t.Error(err)
		}
	})
	return p
}

// certificate makes one for 127.0.0.1 that nobody trusts by itself.
func (p *postOffice) certificate(t *testing.T) tls.Certificate {
	key, err := ecdsa.GenerateKey(elliptic.P256(), rand.Reader)
	must(t, err)
	made := &x509.Certificate{SerialNumber: big.NewInt(1), NotBefore: time.Now().Add(-time.Hour), NotAfter: time.Now().Add(24 * time.Hour), IPAddresses: []net.IP{net.IPv4(127, 0, 0, 1)}, IsCA: true, BasicConstraintsValid: true, KeyUsage: x509.KeyUsageCertSign | x509.KeyUsageDigitalSignature}
	raw, err := x509.CreateCertificate(rand.Reader, made, made, &key.PublicKey, key)
	must(t, err)
	p.trust = string(pem.EncodeToMemory(&pem.Block{Type: "CERTIFICATE", Bytes: raw}))
	return tls.Certificate{Certificate: [][]byte{raw}, PrivateKey: key}
}

func (p *postOffice) NewSession(c *smtp.Conn) (smtp.Session, error) {
	return &visitor{p: p, conn: c}, nil
}

type visitor struct {
	p    *postOffice
	conn *smtp.Conn
	in   bool
}

func (v *visitor) AuthMechanisms() []string { return []string{sasl.Plain} }
func (v *visitor) Auth(string) (sasl.Server, error) {
	return sasl.NewPlainServer(func(_, user, secret string) error {
		if user != v.p.user || secret != v.p.secret {
			return &smtp.SMTPError{Code: 535, EnhancedCode: smtp.EnhancedCode{5, 7, 8}, Message: "Authentication credentials invalid"} // RFC 4954 6
		}
		v.in = true
		return nil
	}), nil
}
func (v *visitor) Reset()        {}
func (v *visitor) Logout() error { return nil }
func (v *visitor) Mail(string, *smtp.MailOptions) error {
	if v.p.user != "" && !v.in {
		return smtp.ErrAuthRequired
	}
	return nil
}
func (v *visitor) Rcpt(to string, _ *smtp.RcptOptions) error {
	v.p.mu.Lock()
	defer v.p.mu.Unlock()
	if v.p.refuse != "" {
		return &smtp.SMTPError{Code: 450, EnhancedCode: smtp.EnhancedCode{4, 2, 1}, Message: v.p.refuse}
	}
	v.p.to = append(v.p.to, to)
	return nil
}
func (v *visitor) Data(r io.Reader) error {
	raw, err := io.ReadAll(r)
	v.p.mu.Lock()
	defer v.p.mu.Unlock()
	v.p.taken = append(v.p.taken, string(raw))
	if _, secured := v.conn.TLSConnectionState(); secured {
		v.p.tlsUsed++
	}
	return err
}

func (p *postOffice) count() int {
	p.mu.Lock()
	defer p.mu.Unlock()
	return len(p.taken)
}

func (p *postOffice) turn(refuse string) {
	p.mu.Lock()
	defer p.mu.Unlock()
	p.refuse = refuse
}

// bureau is a store with a clock of its own, behind a server that logs into a buffer.
type bureau struct {
	*Server
	dir  string
	now  time.Time
	log  bytes.Buffer
	boss store.Person
}

func newBureau(t *testing.T, now time.Time) *bureau {
	t.Helper()
	b := &bureau{dir: t.TempDir(), now: now}
	b.start(t)
	var err error
	b.boss, err = b.store.PutPerson(t.Context(), "", store.Person{Name: "Manager 1", Role: "manager", All: true, Active: true})
	must(t, err)
	t.Cleanup(func() { must(t, b.store.Close()) })
	return b
}

func (b *bureau) start(t *testing.T) {
	t.Helper()
	s, err := store.Open(b.dir, store.Options{Now: func() time.Time { return b.now }, Create: true})
	must(t, err)
	b.Server, err = New(s, Options{Log: slog.New(slog.NewTextHandler(&b.log, nil))})
	must(t, err)
}

func (b *bureau) settle(t *testing.T, p *postOffice, how string, user, secret string) {
	t.Helper()
	must(t, b.store.SetMailSettings(t.Context(), store.MailSettings{Host: "127.0.0.1", Port: p.port, TLS: how, User: user, From: "tests@example.org", Link: "https://tests.example", Trust: p.trust}, &secret))
}

// parts gives the plain and the HTML part of a message as they are read.
func parts(t *testing.T, raw string) (head mail.Header, text, page string) {
	t.Helper()
	m, err := mail.ReadMessage(strings.NewReader(raw))
	must(t, err)
	kind, params, err := mime.ParseMediaType(m.Header.Get("Content-Type"))
	must(t, err)
	if kind != "multipart/alternative" { // RFC 2046 5.1.4: the plain part first, the richest last
		t.Fatalf("got %s", kind)
	}
	r := multipart.NewReader(m.Body, params["boundary"])
	for {
		part, err := r.NextRawPart()
		if errors.Is(err, io.EOF) {
			return m.Header, text, page
		}
		must(t, err)
		body, err := io.ReadAll(quotedprintable.NewReader(part))
		must(t, err)
		if strings.HasPrefix(part.Header.Get("Content-Type"), "text/html") {
			page = string(body)
		} else {
			text = string(body)
			if page != "" {
				t.Error("the plain part comes after the other")
			}
		}
	}
}

// stock gives the bureau a site where something failed and is still in use, and something is overdue.
func (b *bureau) stock(t *testing.T) {
	t.Helper()
	ctx := t.Context()
	site := newID()
	put := func(drafts ...store.Draft) {
		for i := range drafts {
			drafts[i].By = b.boss.ID
		}
		_, err := b.store.Append(ctx, drafts...)
		must(t, err)
	}
	put(store.Draft{Kind: "site.registered", Log: site, Subject: site, Body: set{"set": set{"code": "ELM", "name": "Elm House", "zone": "America/Chicago", "standard": "NEC"}}},
		store.Draft{Kind: "instrument.set", Log: "org", Subject: newID(), Body: set{"set": set{"name": "Analyser 2", "calibration_due": "2026-12-10"}}})
	for range 3 {
		device := newID()
		put(store.Draft{Kind: "device.registered", Log: site, Subject: device, Body: set{"set": set{"kind": "gfci-receptacle", "where": "Pump pit", "make": "Make A"}}})
		b.now = b.now.Add(time.Second)
	}
	var first string
	must(t, b.store.View(store.Scope{All: true, Role: "owner"}, func(v *store.View) error {
		for d, err := range v.Devices(site) {
			if err != nil {
				return err
			}
			first = d.ID
		}
		return nil
	}))
	b.now = time.Date(2026, 12, 3, 18, 0, 0, 0, time.UTC)
	put(store.Draft{Kind: "entry.made", Log: site, Subject: first, Body: set{"form": "gfci-receptacle/button", "given": set{"kind": "gfci-receptacle"}, "source": "office",
		"readings": set{"condition": "sound", "found": "on", "button_trips": "no"}}})
}

func TestDigest_OnceAPersonAndDayAlsoOverARestart(t *testing.T) {
	b := newBureau(t, time.Date(2026, 11, 3, 8, 0, 0, 0, time.UTC))
	b.stock(t)
	p := newPostOffice(t, "office", "a secret, kept", false)
	b.settle(t, p, store.MailStartTLS, "office", "a secret, kept")
	must(t, b.store.PutDigest(t.Context(), store.Digest{Person: b.boss.ID, Every: "daily", Hour: 7, Zone: "America/Chicago", To: "boss@example.org"}))
	ctx := t.Context()

	b.now = time.Date(2026, 12, 4, 12, 59, 0, 0, time.UTC) // 06:59 in Chicago
	b.sendDue(ctx)
	if p.count() != 0 {
		t.Fatal("sent before its hour")
	}
	b.now = time.Date(2026, 12, 4, 13, 0, 0, 0, time.UTC)
	b.sendDue(ctx)
	b.sendDue(ctx)
	if p.count() != 1 || p.tlsUsed != 1 || p.to[0] != "boss@example.org" {
		t.Fatalf("got %d messages, %d secured, to %v, want one", p.count(), p.tlsUsed, p.to)
	}
	must(t, b.store.Close())
	b.start(t)
	b.now = b.now.Add(9 * time.Hour)
	b.sendDue(ctx)
	if p.count() != 1 {
		t.Fatal("sent twice on one day, over a restart")
	}
	b.now = time.Date(2026, 12, 5, 13, 5, 0, 0, time.UTC)
	b.sendDue(ctx)
	if p.count() != 2 {
		t.Fatal("nothing sent on the next day")
	}

	head, text, page := parts(t, p.taken[0])
	subject, err := new(mime.WordDecoder).DecodeHeader(head.Get("Subject"))
	must(t, err)
	if !strings.HasPrefix(subject, "1 failed and still in use. ") || head.Get("Message-ID") == "" || head.Get("Auto-Submitted") != "auto-generated" || !strings.Contains(head.Get("List-Unsubscribe"), "/reminders") {
		t.Errorf("subject %q, head %v", subject, head)
	}
	order := []string{"1 failed and still in use.", "for 19 hours", "Overdue", "Elm House: 2 × button test", "Certificates", "ends on 2026-12-10"}
	for _, body := range []string{text, page} {
		at := 0
		for _, want := range order {
			i := strings.Index(body[at:], want)
			if i < 0 {
				t.Fatalf("%q does not follow in %s", want, body)
			}
			at += i
		}
		if !strings.Contains(body, "https://tests.example/devices/") {
			t.Errorf("no link to the device: %s", body)
		}
	}

	// Nothing of the password in what is logged or in the book's file.
	book, err := os.ReadFile(filepath.Join(b.dir, store.BookFile))
	must(t, err)
	if strings.Contains(b.log.String(), "a secret") || bytes.Contains(book, []byte("a secret, kept")) {
		t.Error("the password stands in the log or in the book's file")
	}
}

func TestDigest_AFailureIsToldInTheServersWordsAndTriedAgain(t *testing.T) {
	b := newBureau(t, time.Date(2026, 12, 4, 5, 0, 0, 0, time.UTC))
	p := newPostOffice(t, "", "", true)
	b.settle(t, p, store.MailTLS, "", "")
	must(t, b.store.PutDigest(t.Context(), store.Digest{Person: b.boss.ID, Every: "weekly", Weekday: time.Friday, Hour: 6, Zone: "UTC", To: "boss@example.org"}))
	p.turn("Mailbox busy, come back later")
	b.now = time.Date(2026, 12, 4, 6, 30, 0, 0, time.UTC) // a Friday
	b.sendDue(t.Context())
	d, _, err := b.store.Digest(b.boss.ID)
	must(t, err)
	if said := b.digestSaid(d); len(said) != 1 || said[0].Shape != "fail" || !strings.Contains(said[0].Text, "Mailbox busy, come back later") {
		t.Fatalf("got %+v", said)
	}
	p.turn("")
	b.now = b.now.Add(5 * time.Minute)
	b.sendDue(t.Context())
	if p.count() != 0 {
		t.Error("tried again too soon")
	}
	b.now = b.now.Add(20 * time.Minute)
	b.sendDue(t.Context())
	if d, _, _ := b.store.Digest(b.boss.ID); p.count() != 1 || d.Fault != "" || d.Sent.IsZero() {
		t.Errorf("got %d messages, %+v", p.count(), d)
	}
	b.now = time.Date(2026, 12, 5, 7, 0, 0, 0, time.UTC) // Saturday
	b.sendDue(t.Context())
	if p.count() != 1 {
		t.Error("a weekly digest went out on another day")
	}
}

func TestDigest_ABrokenOffTryIsNotRepeated(t *testing.T) {
	b := newBureau(t, time.Date(2026, 12, 4, 5, 0, 0, 0, time.UTC))
	p := newPostOffice(t, "", "", false)
	b.settle(t, p, store.MailStartTLS, "", "")
	must(t, b.store.PutDigest(t.Context(), store.Digest{Person: b.boss.ID, Every: "daily", Hour: 6, Zone: "UTC", To: "boss@example.org"}))
	b.now = time.Date(2026, 12, 4, 6, 30, 0, 0, time.UTC)
	_, begun, err := b.store.BeginDigest(context.Background(), b.boss.ID) // and then the machine stopped
	if err != nil || !begun {
		t.Fatal(begun, err)
	}
	must(t, b.store.Close())
	b.start(t)
	b.now = b.now.Add(2 * time.Hour)
	b.sendDue(t.Context())
	d, _, err := b.store.Digest(b.boss.ID)
	must(t, err)
	if said := b.digestSaid(d); p.count() != 0 || len(said) != 1 || said[0].Shape != "watch" {
		t.Errorf("got %d messages, %+v", p.count(), said)
	}
}

func TestMail_WrongPasswordAndUntrustedCertificate(t *testing.T) {
	r := newRig(t, 0)
	manager := r.signIn(r.manager)
	p := newPostOffice(t, "office", "right", false)
	form := setAll(r.openForm(manager, "/mail"), "host", "127.0.0.1", "port", strconv.Itoa(p.port), "tls", "starttls", "user", "office", "secret", "wrong", "from", "tests@example.org", "link", "https://tests.example", "test_to", "boss@example.org")
	page := r.submit(manager, "/mail", form.Encode())
	if !strings.Contains(page.body, "certificate") || p.count() != 0 {
		t.Errorf("a certificate nobody trusts: %s", messagesOf(page.body))
	}
	form.Set("trust", p.trust)
	page = r.submit(manager, "/mail", form.Encode())
	if !strings.Contains(page.body, "535") || !strings.Contains(page.body, "Authentication credentials invalid") || p.count() != 0 {
		t.Errorf("a wrong password: %s", messagesOf(page.body))
	}
	if strings.Contains(page.body, `value="wrong"`) {
		t.Error("the password comes back on the page")
	}
	form.Set("secret", "right")
	page = r.submit(manager, "/mail", form.Encode())
	if !strings.Contains(page.body, "The server took a test message") || p.count() != 1 {
		t.Errorf("got %d messages: %s", p.count(), messagesOf(page.body))
	}
	if back := r.open(manager, "/mail").body; strings.Contains(back, "right\"") || !strings.Contains(back, "One is kept") {
		t.Error("the page shows the password, or not that there is one")
	}
	form.Del("secret")
	if r.submit(manager, "/mail", form.Encode()); p.count() != 2 {
		t.Error("an empty password did not leave the one that is kept")
	}
	info, err := os.Stat(filepath.Join(r.dir, "keys", "mail.secret"))
	if err != nil || info.Mode().Perm() != 0o600 {
		t.Errorf("keys/mail.secret: %v %v", info, err)
	}
	some := r.person("Manager 2", "manager", r.site)
	if got := r.open(r.signIn(some), "/mail").status; got != 403 {
		t.Errorf("a manager of some sites: got %d, want 403", got)
	}
	if got := r.submit(r.signIn(r.crew), "/mail", form.Encode()).status; got != 403 {
		t.Errorf("crew: got %d, want 403", got)
	}
}
