package server

import (
	"net"
	"net/http"
	"net/netip"
	"net/url"
	"strings"
	"time"

	"tripwell/store"
)

// The session cookie. Over plain http on loopback a browser does not send cookies with Secure in every case, and the
// demo must work there; everywhere else the browser itself holds both promises of the prefix.
const (
	cookieName      = "__Host-tripwell"
	cookieNameLocal = "tripwell"
	cookieAge       = store.SessionLife
)

// plainLoopback reports a request over plain http from this machine to a loopback address, with no proxy between: a
// proxy on this machine also arrives from loopback, but says for whom.
func plainLoopback(r *http.Request) bool {
	a := passageOf(r)
	return !a.secure && !a.passed && loopback(r.RemoteAddr) && loopback(r.Host)
}

func loopback(hostport string) bool {
	host := hostport
	if h, _, err := net.SplitHostPort(hostport); err == nil {
		host = h
	}
	if strings.EqualFold(host, "localhost") {
		return true
	}
	addr, err := netip.ParseAddr(strings.Trim(host, "[]"))
	return err == nil && addr.IsLoopback()
}

func sessionCookie(r *http.Request) string {
	if c, err := r.Cookie(cookieName); err == nil {
		return c.Value
	}
	if !plainLoopback(r) {
		return ""
	}
	c, err := r.Cookie(cookieNameLocal)
	if err != nil {
		return ""
	}
	return c.Value
}

// newSessionCookie makes the cookie for a token; an empty token clears it.
func newSessionCookie(r *http.Request, token string) *http.Cookie {
	c := &http.Cookie{Name: cookieName, Value: token, Path: "/", HttpOnly: true, Secure: true, SameSite: http.SameSiteLaxMode, MaxAge: int(cookieAge / time.Second)}
	if plainLoopback(r) {
		c.Name, c.Secure = cookieNameLocal, false
	}
	if token == "" {
		c.MaxAge = -1
	}
	return c
}

// ownPath gives next when it is a path of this server, else "": one leading slash, no scheme, no host, nothing a browser
// would read as another place.
func ownPath(next string) string {
	if len(next) > 512 || !strings.HasPrefix(next, "/") || strings.HasPrefix(next, "//") || strings.ContainsAny(next, "\\\r\n\t\x00") {
		return ""
	}
	u, err := url.Parse(next)
	if err != nil || u.Scheme != "" || u.Host != "" || u.Opaque != "" || u.User != nil {
		return ""
	}
	return next
}
