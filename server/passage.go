package server

import (
	"context"
	"net"
	"net/http"
	"net/netip"
	"slices"
	"strings"
)

// passage is how a request came from its browser: through a proxy or straight, and whether over TLS. A proxy's headers are
// believed only where the connection comes from an address that was trusted with --behind; anybody may send them.
type passage struct {
	secure bool // the browser spoke TLS, with us or with a trusted proxy
	passed bool // some proxy says it passed this on
	says   bool // a proxy that nobody told us to trust says https
}

type passageKey struct{}

// proxyHeaders are what proxies write; none is left on a request for anybody further in.
var proxyHeaders = []string{"Forwarded", "X-Forwarded-For", "X-Forwarded-Proto", "X-Forwarded-Host", "X-Forwarded-Port", "X-Forwarded-Ssl", "X-Real-Ip"}

// passageOf is what arrived noted, or what the request itself says where it did not pass there.
func passageOf(r *http.Request) passage {
	if a, ok := r.Context().Value(passageKey{}).(passage); ok {
		return a
	}
	return plainPassage(r)
}

func plainPassage(r *http.Request) passage {
	return passage{
		secure: r.TLS != nil,
		passed: slices.ContainsFunc(proxyHeaders, func(h string) bool { return r.Header.Get(h) != "" }),
		says:   strings.EqualFold(r.Header.Get("X-Forwarded-Proto"), "https") || strings.Contains(strings.ToLower(r.Header.Get("Forwarded")), "proto=https"),
	}
}

// arrived stands before everything: behind it RemoteAddr and Host are the browser's own.
func (s *Server) arrived(next http.Handler) http.Handler {
	return http.HandlerFunc(func(w http.ResponseWriter, r *http.Request) {
		a := plainPassage(r)
		r = r.WithContext(r.Context()) // a copy: what net/http keeps of a request stays as it was
		if peer, err := netip.ParseAddrPort(r.RemoteAddr); err == nil && s.trusted(peer.Addr()) {
			a.passed, a.says = true, false
			if hop, ok := s.proxied(r.Header); ok {
				a.secure = a.secure || hop.proto == "https"
				if hop.from.IsValid() {
					r.RemoteAddr = netip.AddrPortFrom(hop.from, 0).String()
				}
				if hop.host != "" {
					r.Host = hop.host
				}
			}
		}
		for _, h := range proxyHeaders {
			r.Header.Del(h)
		}
		next.ServeHTTP(w, r.WithContext(context.WithValue(r.Context(), passageKey{}, a)))
	})
}

func (s *Server) trusted(addr netip.Addr) bool {
	addr = addr.Unmap()
	return slices.ContainsFunc(s.behind, func(p netip.Prefix) bool { return p.Contains(addr) })
}

// hop is what a proxy says of the connection it took.
type hop struct {
	from        netip.Addr
	proto, host string
}

// proxied reads what trusted proxies wrote, in either way. Where a request carries both ways and they differ, one of them was
// sent by the browser and let through: then neither is believed.
func (s *Server) proxied(h http.Header) (hop, bool) {
	standard, isStandard := s.forwarded(h.Values("Forwarded"))
	usual, isUsual := s.xForwarded(h)
	switch {
	case isStandard && isUsual:
		return usual, standard == usual
	case isStandard:
		return standard, true
	}
	return usual, isUsual
}

// xForwarded reads the X-Forwarded headers. For is a list to which each proxy adds at the end; of the others the last
// value is the nearest proxy's.
func (s *Server) xForwarded(h http.Header) (out hop, found bool) {
	list := splitList(h.Values("X-Forwarded-For"))
	proto, host := splitList(h.Values("X-Forwarded-Proto")), splitList(h.Values("X-Forwarded-Host"))
	if len(list)+len(proto)+len(host) == 0 {
		return out, false
	}
	for _, text := range slices.Backward(list) {
		addr, ok := hopAddr(text)
		if !ok {
			break // whatever stands before it was not written by a proxy we know
		}
		out.from = addr
		if !s.trusted(addr) {
			break
		}
	}
	if len(proto) > 0 {
		out.proto = strings.ToLower(proto[len(proto)-1])
	}
	if len(host) > 0 {
		out.host = hopHost(host[len(host)-1])
	}
	return out, true
}

// forwarded reads RFC 7239: a list of hops, the nearest last. The hop that counts is the first one a proxy of ours took
// from somebody else.
func (s *Server) forwarded(values []string) (out hop, found bool) {
	for _, element := range slices.Backward(splitList(values)) {
		pairs, ok := forwardedPairs(element)
		if !ok {
			break
		}
		found = true
		if proto := strings.ToLower(pairs["proto"]); proto != "" {
			out.proto = proto
		}
		if host := hopHost(pairs["host"]); host != "" {
			out.host = host
		}
		addr, ok := hopAddr(pairs["for"])
		if !ok {
			break
		}
		out.from = addr
		if !s.trusted(addr) {
			break
		}
	}
	return out, found
}

// forwardedPairs reads one element of the header: name=value with semicolons between, values bare or quoted.
func forwardedPairs(element string) (map[string]string, bool) {
	out := map[string]string{}
	for _, pair := range splitOutsideQuotes(element, ';') {
		name, value, ok := strings.Cut(strings.TrimSpace(pair), "=")
		name = strings.ToLower(strings.TrimSpace(name))
		if _, twice := out[name]; !ok || name == "" || twice {
			return nil, false
		}
		value = strings.TrimSpace(value)
		if strings.HasPrefix(value, `"`) {
			if len(value) < 2 || !strings.HasSuffix(value, `"`) {
				return nil, false
			}
			value = strings.ReplaceAll(value[1:len(value)-1], `\`, "")
		}
		out[name] = value
	}
	return out, len(out) > 0
}

func splitList(values []string) (out []string) {
	for _, v := range values {
		for _, part := range splitOutsideQuotes(v, ',') {
			if part = strings.TrimSpace(part); part != "" {
				out = append(out, part)
			}
		}
	}
	return out
}

func splitOutsideQuotes(text string, by byte) (out []string) {
	from, quoted := 0, false
	for i := 0; i < len(text); i++ {
		switch {
		case quoted && text[i] == '\\':
			i++
		case text[i] == '"':
			quoted = !quoted
		case text[i] == by && !quoted:
			out, from = append(out, text[from:i]), i+1
		}
	}
	return append(out, text[min(from, len(text)):])
}

// hopAddr reads an address with or without its port and brackets.
func hopAddr(text string) (netip.Addr, bool) {
	if ap, err := netip.ParseAddrPort(text); err == nil {
		return ap.Addr().Unmap().WithZone(""), true
	}
	addr, err := netip.ParseAddr(strings.Trim(text, "[]"))
	return addr.Unmap().WithZone(""), err == nil
}

// hopHost takes a host, with or without its port, that is a name or an address, else "".
func hopHost(text string) string {
	host := text
	if h, port, err := net.SplitHostPort(text); err == nil {
		host = h
		if strings.Trim(port, "0123456789") != "" || len(port) > 5 {
			return ""
		}
	}
	if _, err := netip.ParseAddr(strings.Trim(host, "[]")); err == nil || isHostName(strings.ToLower(host)) {
		return text
	}
	return ""
}

// secureElsewhere is where a browser that came by plain http should go: to the address on the labels, "?" where there is none.
func (s *Server) secureElsewhere() string {
	if url := s.store.URL(); url != "" {
		return strings.ToLower(url)
	}
	return "?"
}

// insecure reports that the browser which asks keeps nothing of this server for work without signal: it came by plain
// http, and not to its own machine. Fetch metadata is sent only to places a browser takes for secure, so a proxy that says
// nothing at all is seen by that.
func insecure(r *http.Request) bool {
	a := passageOf(r)
	return !a.secure && !a.says && r.Header.Get("Sec-Fetch-Site") == "" && !loopback(r.Host)
}
