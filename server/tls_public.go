package server

import (
	"context"
	"crypto/tls"
	"errors"
	"fmt"
	"net/http"
	"os"
	"path/filepath"
	"slices"
	"strings"

	"golang.org/x/crypto/acme"
	"golang.org/x/crypto/acme/autocert"

	"tripwell/store"
)

// PublicNames gets certificates for public names from an ACME authority (RFC 8555) when somebody first comes by such a
// name, and renews them. Keys and certificates lie in DIR/keys/acme.
type PublicNames struct {
	manager *autocert.Manager
	names   []string
}

// ACME says whom to ask. Directory is the authority's address, "" for Let's Encrypt; Mail may be empty. Client is for an
// authority whose own certificate is not among the system's roots, else nil.
type ACME struct {
	Directory string
	Mail      string
	Client    *http.Client
}

// NewPublicNames answers for these names and no others: a certificate asked for by whoever points a name here would use up
// what the authority grants. Starting it accepts the authority's terms.
func NewPublicNames(s *store.Store, names []string, a ACME) (*PublicNames, error) {
	if len(names) == 0 {
		return nil, errors.New("an ACME authority vouches for names: give the name phones use with --name, or with --url")
	}
	cache := filepath.Join(s.KeysDir(), "acme")
	if err := os.MkdirAll(cache, 0o700); err != nil {
		return nil, fmt.Errorf("keep certificates: %w", err)
	}
	p := &PublicNames{names: names, manager: &autocert.Manager{
		Prompt: autocert.AcceptTOS, Cache: autocert.DirCache(cache), HostPolicy: only(names), Email: a.Mail,
	}}
	if a.Directory != "" || a.Client != nil {
		p.manager.Client = &acme.Client{DirectoryURL: a.Directory, HTTPClient: a.Client}
	}
	return p, nil
}

func only(names []string) autocert.HostPolicy {
	return func(_ context.Context, host string) error {
		if slices.ContainsFunc(names, func(name string) bool { return strings.EqualFold(name, host) }) {
			return nil
		}
		return fmt.Errorf("no certificate is asked for %q: it is not among the names given with --name", host)
	}
}

func (p *PublicNames) config() *tls.Config {
	c := p.manager.TLSConfig()
	c.MinVersion = tls.VersionTLS12
	return c
}

// plain answers the authority's question over http and sends everybody else to https.
func (p *PublicNames) plain(_ *Server, port string) http.Handler {
	return p.manager.HTTPHandler(toSecure(port, func(asked string) string {
		if slices.ContainsFunc(p.names, func(name string) bool { return strings.EqualFold(name, asked) }) {
			return asked
		}
		return p.names[0]
	}))
}

func (p *PublicNames) strict() bool { return true }
