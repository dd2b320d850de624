package server

import (
	"crypto/ecdsa"
	"crypto/elliptic"
	"crypto/rand"
	"crypto/sha256"
	"crypto/x509"
	"crypto/x509/pkix"
	"encoding/pem"
	"errors"
	"fmt"
	"io/fs"
	"math/big"
	"net"
	"net/netip"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"time"

	"tripwell/store"
)

// The authority of a house that has no public name: made once, it vouches for the names and addresses of this machine and
// for nothing a browser goes to elsewhere. Phones that were told to trust it keep that trust as long as this file is kept.
const (
	authorityFile = "authority.pem" // its certificate and its key in one file, so that a power cut leaves both or neither
	authorityLife = 10 * 365 * 24 * time.Hour
	// leafLife: systems refuse certificates that hold longer, those of own authorities too in part.
	leafLife = 397*24*time.Hour - time.Second
	// leafBack is how far clocks of phones may go behind ours.
	leafBack = 24 * time.Hour
)

// privateDomains are names no public authority vouches for: RFC 6762 (local), RFC 8375 (home.arpa), RFC 6761 (localhost), the
// reserved internal, and lan, which many routers use.
var privateDomains = []string{"localhost", "local", "home.arpa", "internal", "lan"}

// privateAddresses: RFC 1918, RFC 6598, RFC 3927, RFC 4193, RFC 4291.
var privateAddresses = []netip.Prefix{
	netip.MustParsePrefix("10.0.0.0/8"), netip.MustParsePrefix("172.16.0.0/12"), netip.MustParsePrefix("192.168.0.0/16"), netip.MustParsePrefix("100.64.0.0/10"),
	netip.MustParsePrefix("169.254.0.0/16"), netip.MustParsePrefix("127.0.0.0/8"), netip.MustParsePrefix("::1/128"), netip.MustParsePrefix("fc00::/7"), netip.MustParsePrefix("fe80::/10"),
}

// hosts are names and addresses a certificate is for.
type hosts struct {
	names     []string
	addresses []netip.Addr
}

func (h *hosts) add(texts ...string) error {
	for _, text := range texts {
		text = strings.TrimSuffix(strings.ToLower(strings.TrimSpace(text)), ".")
		if addr, err := netip.ParseAddr(strings.Trim(text, "[]")); err == nil {
			h.addAddress(addr)
			continue
		}
		if !isHostName(text) {
			return fmt.Errorf("%q is neither a name nor an address of a machine: write it as tests.lan or 192.168.1.20", text)
		}
		if !slices.Contains(h.names, text) {
			h.names = append(h.names, text)
		}
	}
	return nil
}

func (h *hosts) addAddress(addr netip.Addr) {
	if addr = addr.Unmap().WithZone(""); !slices.Contains(h.addresses, addr) {
		h.addresses = append(h.addresses, addr)
	}
}

// isHostName holds a name to RFC 1123.
func isHostName(name string) bool {
	if len(name) == 0 || len(name) > 253 {
		return false
	}
	for label := range strings.SplitSeq(name, ".") {
		if len(label) == 0 || len(label) > 63 || strings.HasPrefix(label, "-") || strings.HasSuffix(label, "-") ||
			strings.ContainsFunc(label, func(r rune) bool { return !(r >= 'a' && r <= 'z' || r >= '0' && r <= '9' || r == '-') }) {
			return false
		}
	}
	return true
}

// thisMachine gives the machine's own name, with and without the domain of multicast DNS, and its addresses.
func thisMachine() hosts {
	h := hosts{names: []string{"localhost"}, addresses: []netip.Addr{netip.MustParseAddr("127.0.0.1"), netip.IPv6Loopback()}}
	if name, err := os.Hostname(); err == nil && h.add(name) == nil {
		if short, _, _ := strings.Cut(strings.ToLower(name), "."); isHostName(short) {
			_ = h.add(short + ".local")
		}
	}
	addresses, _ := net.InterfaceAddrs()
	for _, a := range addresses {
		if p, err := netip.ParsePrefix(a.String()); err == nil && p.Addr().IsGlobalUnicast() {
			h.addAddress(p.Addr())
		}
	}
	return h
}

// openAuthority reads the authority of a store, or makes it for these hosts. made says that it is new.
func openAuthority(s *store.Store, of hosts, now time.Time) (cert *x509.Certificate, key *ecdsa.PrivateKey, made bool, err error) {
	path := filepath.Join(s.KeysDir(), authorityFile)
	raw, err := os.ReadFile(path)
	if errors.Is(err, fs.ErrNotExist) {
		made = true
		if raw, err = makeAuthority(of, now); err == nil {
			err = s.WriteKey(authorityFile, raw)
		}
	}
	if err != nil {
		return nil, nil, false, fmt.Errorf("the authority: %w", err)
	}
	cert, key, err = parseAuthority(raw)
	if err != nil {
		return nil, nil, false, fmt.Errorf("the authority in %s: %w; put a copy of it back, or move the file away to have another made, which every phone must be told to trust anew", path, err)
	}
	if now.After(cert.NotAfter) {
		return nil, nil, false, fmt.Errorf("the authority in %s ended on %s: move the file away to have another made, which every phone must be told to trust", path, cert.NotAfter.Format(time.DateOnly))
	}
	return cert, key, made, nil
}

func parseAuthority(raw []byte) (cert *x509.Certificate, key *ecdsa.PrivateKey, err error) {
	for block, rest := pem.Decode(raw); block != nil && err == nil; block, rest = pem.Decode(rest) {
		switch block.Type {
		case "CERTIFICATE":
			cert, err = x509.ParseCertificate(block.Bytes)
		case "PRIVATE KEY":
			var parsed any
			parsed, err = x509.ParsePKCS8PrivateKey(block.Bytes)
			key, _ = parsed.(*ecdsa.PrivateKey)
		}
	}
	switch {
	case err != nil:
		return nil, nil, err
	case cert == nil || key == nil || !key.PublicKey.Equal(cert.PublicKey):
		return nil, nil, errors.New("holds no certificate with its key")
	}
	return cert, key, nil
}

// makeAuthority makes a certificate that may sign no others than for private names, private addresses and these hosts
// (RFC 5280, 4.2.1.10): whoever steals its key cannot stand in for a bank.
func makeAuthority(of hosts, now time.Time) ([]byte, error) {
	key, err := ecdsa.GenerateKey(elliptic.P256(), rand.Reader)
	if err != nil {
		return nil, err
	}
	t := &x509.Certificate{
		SerialNumber: serial(), NotBefore: now.Add(-leafBack), NotAfter: now.Add(authorityLife),
		Subject:               pkix.Name{Organization: []string{"Tripwell"}, CommonName: "Tripwell at " + of.first() + ", " + now.Format(time.DateOnly)},
		BasicConstraintsValid: true, IsCA: true, MaxPathLenZero: true, KeyUsage: x509.KeyUsageCertSign | x509.KeyUsageCRLSign,
		SubjectKeyId: keyID(key), PermittedDNSDomainsCritical: true, PermittedDNSDomains: slices.Clone(privateDomains),
	}
	for _, name := range of.names {
		if !inDomains(name, t.PermittedDNSDomains) {
			t.PermittedDNSDomains = append(t.PermittedDNSDomains, name)
		}
	}
	for _, p := range privateAddresses {
		t.PermittedIPRanges = append(t.PermittedIPRanges, ipNet(p))
	}
	for _, a := range of.addresses {
		if !slices.ContainsFunc(privateAddresses, func(p netip.Prefix) bool { return p.Contains(a) }) {
			t.PermittedIPRanges = append(t.PermittedIPRanges, ipNet(netip.PrefixFrom(a, a.BitLen())))
		}
	}
	der, err := x509.CreateCertificate(rand.Reader, t, t, key.Public(), key)
	if err != nil {
		return nil, err
	}
	secret, err := x509.MarshalPKCS8PrivateKey(key)
	if err != nil {
		return nil, err
	}
	return slices.Concat(pem.EncodeToMemory(&pem.Block{Type: "CERTIFICATE", Bytes: der}), pem.EncodeToMemory(&pem.Block{Type: "PRIVATE KEY", Bytes: secret})), nil
}

// first names an authority: the name that was asked for, else the machine's own.
func (h hosts) first() string {
	for _, name := range h.names {
		if name != "localhost" {
			return name
		}
	}
	return "localhost"
}

// inDomains reports whether a name is one of some domains or lies below one.
func inDomains(name string, domains []string) bool {
	return slices.ContainsFunc(domains, func(d string) bool { return name == d || strings.HasSuffix(name, "."+d) })
}

func ipNet(p netip.Prefix) *net.IPNet {
	return &net.IPNet{IP: p.Addr().AsSlice(), Mask: net.CIDRMask(p.Bits(), p.Addr().BitLen())}
}

// serial is random and positive (RFC 5280, 4.1.2.2).
func serial() *big.Int {
	b := make([]byte, 16)
	_, _ = rand.Read(b) // never fails: crypto/rand ends the program where it cannot read
	b[0] = b[0]&0x7f | 1
	return new(big.Int).SetBytes(b)
}

// keyID names a key by the first 160 bits of its SHA-256 (RFC 7093, method 1).
func keyID(key *ecdsa.PrivateKey) []byte {
	raw, err := key.PublicKey.Bytes()
	if err != nil {
		return nil
	}
	sum := sha256.Sum256(raw)
	return sum[:20]
}
