package server

import (
	"crypto/tls"
	"net"
	"net/http"
	"strings"

	"github.com/labstack/echo/v4"
)

// Certificates are what the public face speaks TLS with: CertificateFiles, Authority or PublicNames. Beside them a second
// address may answer plain http, with what each kind needs there and nothing else.
type Certificates interface {
	// config is the server's side of TLS. Versions and ciphers are Go's defaults, from TLS 1.2.
	config() *tls.Config
	// plain answers http beside the TLS of s, whose port is port.
	plain(s *Server, port string) http.Handler
	// strict says whether browsers may be told to come by https alone. They obey for a year and offer no way round, so it is
	// right only where every browser trusts the certificate.
	strict() bool
}

// strictTransport is RFC 6797's promise for one year, for this name alone: what else the domain serves is not ours to decide.
const strictTransport = "max-age=31536000"

// toSecure sends a browser that came over http to the same path over https.
func toSecure(port string, host func(asked string) string) http.Handler {
	return http.HandlerFunc(func(w http.ResponseWriter, r *http.Request) {
		w.Header().Set("Connection", "close")
		if r.Method != http.MethodGet && r.Method != http.MethodHead {
			http.Error(w, "This address answers over https only.", http.StatusBadRequest)
			return
		}
		to := "https://" + withPort(host(bareHost(r.Host)), port) + r.URL.RequestURI()
		http.Redirect(w, r, to, http.StatusTemporaryRedirect)
	})
}

// bareHost is a host without its port and brackets.
func bareHost(hostport string) string {
	if h, _, err := net.SplitHostPort(hostport); err == nil {
		return h
	}
	return strings.Trim(hostport, "[]")
}

// withPort writes a host with its port, the way an address of https needs it.
func withPort(host, port string) string {
	switch {
	case port != "" && port != "443":
		return net.JoinHostPort(host, port)
	case strings.Contains(host, ":"):
		return "[" + host + "]"
	}
	return host
}

// secured sets what is only right over TLS of our own; a proxy in front sets its own.
func (s *Server) secured(next echo.HandlerFunc) echo.HandlerFunc {
	return func(c echo.Context) error {
		if s.certificates != nil && s.certificates.strict() && c.Request().TLS != nil {
			c.Response().Header().Set("Strict-Transport-Security", strictTransport)
		}
		return next(c)
	}
}
