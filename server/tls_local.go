package server

import (
	"crypto/ecdsa"
	"crypto/elliptic"
	"crypto/rand"
	"crypto/sha256"
	"crypto/tls"
	"crypto/x509"
	"crypto/x509/pkix"
	"fmt"
	"net"
	"net/http"
	"net/netip"
	"strings"
	"sync"
	"time"

	"tripwell/store"
)

// Authority serves certificates made by the house's own authority, and the page that tells how to trust it. The
// certificate in use lives in memory: it is made anew when the server starts, when it grows old, and when the machine is
// reached at an address it did not have before.
type Authority struct {
	cert *x509.Certificate
	key  *ecdsa.PrivateKey
	Made bool // just now, by this start

	asked   []string // names given, beyond the machine's own
	machine func() hosts
	now     func() time.Time

	mu     sync.Mutex
	leaf   *tls.Certificate
	looked time.Time // when the machine was last asked for its names
}

const (
	renewBefore = 60 * 24 * time.Hour
	lookAgain   = time.Hour
)

// OpenAuthority reads the authority of the folder, or makes one. names must be covered by it; they come first.
func OpenAuthority(s *store.Store, names []string, now func() time.Time) (*Authority, error) {
	return openAuthorityOf(s, names, now, thisMachine)
}

func openAuthorityOf(s *store.Store, names []string, now func() time.Time, machine func() hosts) (*Authority, error) {
	a := &Authority{asked: names, machine: machine, now: now}
	var want hosts
	if err := want.add(names...); err != nil {
		return nil, err
	}
	all, err := a.hosts()
	if err != nil {
		return nil, err
	}
	if a.cert, a.key, a.Made, err = openAuthority(s, all, now()); err != nil {
		return nil, err
	}
	if err := a.make(want); err != nil {
		return nil, fmt.Errorf("the authority of this folder may not vouch for %s, and phones would refuse it: leave that name out, or move keys/%s away to have another authority made, which every phone must be told to trust anew (%w)",
			strings.Join(names, ", "), authorityFile, err)
	}
	return a, a.make(hosts{})
}

// hosts are the names asked for, then the machine's own.
func (a *Authority) hosts() (h hosts, err error) {
	if err := h.add(a.asked...); err != nil {
		return h, err
	}
	own := a.machine()
	for _, addr := range own.addresses {
		h.addAddress(addr)
	}
	return h, h.add(own.names...)
}

// make makes the certificate for exactly these hosts; for none, for those of this moment that the authority may vouch for.
func (a *Authority) make(only hosts) error {
	key, err := ecdsa.GenerateKey(elliptic.P256(), rand.Reader)
	if err != nil {
		return err
	}
	h := only
	if len(h.names)+len(h.addresses) == 0 {
		if h, err = a.hosts(); err != nil {
			return err
		}
		h = a.permitted(h)
		a.looked = a.now()
	}
	from := a.now().Add(-leafBack)
	t := &x509.Certificate{
		SerialNumber: serial(), NotBefore: from, NotAfter: earlier(from.Add(leafLife), a.cert.NotAfter),
		Subject: pkix.Name{Organization: []string{"Tripwell"}, CommonName: h.first()}, BasicConstraintsValid: true,
		KeyUsage: x509.KeyUsageDigitalSignature, ExtKeyUsage: []x509.ExtKeyUsage{x509.ExtKeyUsageServerAuth},
		SubjectKeyId: keyID(key), DNSNames: h.names,
	}
	for _, addr := range h.addresses {
		t.IPAddresses = append(t.IPAddresses, addr.AsSlice())
	}
	der, err := x509.CreateCertificate(rand.Reader, t, a.cert, key.Public(), a.key)
	if err != nil {
		return err
	}
	leaf, err := x509.ParseCertificate(der)
	if err != nil {
		return err
	}
	if err := a.holds(leaf); err != nil {
		return err
	}
	a.leaf = &tls.Certificate{Certificate: [][]byte{der, a.cert.Raw}, PrivateKey: key, Leaf: leaf}
	return nil
}

// holds verifies a certificate as a browser that trusts the authority does.
func (a *Authority) holds(leaf *x509.Certificate) error {
	roots := x509.NewCertPool()
	roots.AddCert(a.cert)
	_, err := leaf.Verify(x509.VerifyOptions{Roots: roots, CurrentTime: a.now()})
	return err
}

// permitted leaves out what the authority may not vouch for, as an address that came later and is a public one.
func (a *Authority) permitted(h hosts) hosts {
	var out hosts
	for _, name := range h.names {
		if inDomains(name, a.cert.PermittedDNSDomains) {
			_ = out.add(name)
		}
	}
	for _, addr := range h.addresses {
		for _, n := range a.cert.PermittedIPRanges {
			if n.Contains(addr.AsSlice()) {
				out.addAddress(addr)
				break
			}
		}
	}
	return out
}

func earlier(a, b time.Time) time.Time {
	if b.Before(a) {
		return b
	}
	return a
}

func (a *Authority) certificate(hello *tls.ClientHelloInfo) (*tls.Certificate, error) {
	a.mu.Lock()
	defer a.mu.Unlock()
	if !a.serves(hello.Conn) {
		if err := a.make(hosts{}); err != nil {
			return nil, fmt.Errorf("renew the certificate: %w", err)
		}
	}
	return a.leaf, nil
}

// serves reports whether the certificate in use is young enough and for the address the browser came to.
func (a *Authority) serves(c net.Conn) bool {
	now := a.now()
	if now.Before(a.leaf.Leaf.NotBefore) || now.After(a.leaf.Leaf.NotAfter.Add(-renewBefore)) || now.Sub(a.looked) >= lookAgain {
		return false
	}
	if c == nil {
		return true
	}
	here, err := netip.ParseAddrPort(c.LocalAddr().String())
	if err != nil || a.leaf.Leaf.VerifyHostname(here.Addr().Unmap().WithZone("").String()) == nil {
		return true
	}
	var h hosts
	h.addAddress(here.Addr())
	return len(a.permitted(h).addresses) == 0 // nothing to be gained by another one
}

func (a *Authority) config() *tls.Config {
	return &tls.Config{MinVersion: tls.VersionTLS12, GetCertificate: a.certificate}
}

// plain tells how to trust the authority; nothing else is answered over http.
func (a *Authority) plain(s *Server, _ string) http.Handler { return s.face(plainRoutes()) }

// strict is never right here: a browser that was told so and lost its trust could not even reach the page that restores it.
func (a *Authority) strict() bool { return false }

// Fingerprint is the SHA-256 of the authority's certificate as systems show it, in pairs of hexadecimal digits.
func (a *Authority) Fingerprint() string {
	sum := sha256.Sum256(a.cert.Raw)
	return strings.ReplaceAll(fmt.Sprintf("% X", sum[:]), " ", ":")
}

// Name is what systems list the authority under.
func (a *Authority) Name() string { return a.cert.Subject.CommonName }

// Hosts are the names and addresses the certificate in use is for.
func (a *Authority) Hosts() []string {
	a.mu.Lock()
	defer a.mu.Unlock()
	out := append([]string{}, a.leaf.Leaf.DNSNames...)
	for _, ip := range a.leaf.Leaf.IPAddresses {
		out = append(out, ip.String())
	}
	return out
}
