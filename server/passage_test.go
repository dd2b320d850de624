package server

import (
	"net/http"
	"net/http/httptest"
	"net/netip"
	"strings"
	"testing"
)

// came is what stands behind the door of a request from an address with some headers.
func came(t testing.TB, s *Server, remote string, headers ...string) (r *http.Request, a passage) {
	t.Helper()
	req := httptest.NewRequest(http.MethodGet, "http://inside:8080/", nil)
	req.RemoteAddr = remote
	for i := 0; i < len(headers); i += 2 {
		req.Header.Add(headers[i], headers[i+1])
	}
	s.arrived(http.HandlerFunc(func(_ http.ResponseWriter, got *http.Request) { r = got })).ServeHTTP(httptest.NewRecorder(), req)
	return r, passageOf(r)
}

func TestPassage_OnlyTrustedProxiesAreBelieved(t *testing.T) {
	s := &Server{behind: []netip.Prefix{netip.MustParsePrefix("127.0.0.1/32"), netip.MustParsePrefix("10.0.0.0/8")}}
	const proxy = "127.0.0.1:4000"
	cases := []struct {
		name, remote string
		headers      []string
		from, host   string
		secure       bool
	}{
		{"nobody between", "192.0.2.7:5000", nil, "192.0.2.7", "inside:8080", false},
		{"a stranger who claims", "192.0.2.7:5000", []string{"X-Forwarded-For", "198.51.100.1", "X-Forwarded-Proto", "https", "X-Forwarded-Host", "tests.example.org"}, "192.0.2.7", "inside:8080", false},
		{"a proxy", proxy, []string{"X-Forwarded-For", "198.51.100.1", "X-Forwarded-Proto", "https", "X-Forwarded-Host", "tests.example.org"}, "198.51.100.1", "tests.example.org", true},
		{"a proxy that adds to what the browser sent", proxy, []string{"X-Forwarded-For", "203.0.113.5, 198.51.100.1", "X-Forwarded-Proto", "https"}, "198.51.100.1", "inside:8080", true},
		{"two proxies of ours", proxy, []string{"X-Forwarded-For", "203.0.113.5, 198.51.100.1, 10.1.2.3", "X-Forwarded-Proto", "https"}, "198.51.100.1", "inside:8080", true},
		{"nonsense in the list", proxy, []string{"X-Forwarded-For", "198.51.100.1, unknown, 10.1.2.3"}, "10.1.2.3", "inside:8080", false},
		{"http through a proxy", proxy, []string{"X-Forwarded-For", "198.51.100.1", "X-Forwarded-Proto", "http"}, "198.51.100.1", "inside:8080", false},
		{"a host that is none", proxy, []string{"X-Forwarded-Host", "evil.example/path?"}, "127.0.0.1", "inside:8080", false},
		// RFC 7239, section 4 and 7.1, examples of the syntax.
		{"the standard header", proxy, []string{"Forwarded", `For="[2001:db8:cafe::17]:4711";proto=https;host=tests.example.org`}, "2001:db8:cafe::17", "tests.example.org", true},
		{"a list of it", proxy, []string{"Forwarded", "for=192.0.2.43, for=198.51.100.17;by=203.0.113.60;proto=https;host=tests.example.org"}, "198.51.100.17", "tests.example.org", true},
		{"two proxies of ours by it", proxy, []string{"Forwarded", "for=192.0.2.43;proto=https", "Forwarded", "for=10.9.9.9;proto=http"}, "192.0.2.43", "inside:8080", true},
		{"somebody hidden", proxy, []string{"Forwarded", `for="_gazonk";proto=https`}, "127.0.0.1", "inside:8080", true},
		{"a comma within quotes", proxy, []string{"Forwarded", `for=198.51.100.17;host="a,b";proto=https`}, "198.51.100.17", "inside:8080", true},
		{"both ways, alike", proxy, []string{"Forwarded", "for=198.51.100.1;proto=https", "X-Forwarded-For", "198.51.100.1", "X-Forwarded-Proto", "https"}, "198.51.100.1", "inside:8080", true},
		{"both ways, one let through from the browser", proxy, []string{"Forwarded", "for=203.0.113.99;proto=https;host=evil.example", "X-Forwarded-For", "198.51.100.1", "X-Forwarded-Proto", "https"}, "127.0.0.1", "inside:8080", false},
	}
	for _, c := range cases {
		r, a := came(t, s, c.remote, c.headers...)
		if from := bareHost(r.RemoteAddr); from != c.from || r.Host != c.host || a.secure != c.secure {
			t.Errorf("%s: got from %s at %s, secure %v; want %s at %s, %v", c.name, from, r.Host, a.secure, c.from, c.host, c.secure)
		}
		for _, h := range proxyHeaders {
			if r.Header.Get(h) != "" {
				t.Errorf("%s: %s is still there for others to believe", c.name, h)
			}
		}
	}
}

func TestPassage_WhatIsNotSecureIsSaid(t *testing.T) {
	s := &Server{behind: []netip.Prefix{netip.MustParsePrefix("127.0.0.1/32")}}
	for _, c := range []struct {
		name, remote, host string
		headers            []string
		want               bool
	}{
		{"http in the house", "192.168.1.9:1", "tests.lan", nil, true},
		{"this machine", "127.0.0.1:1", "localhost:8080", nil, false},
		{"a browser that takes it for secure", "192.168.1.9:1", "tests.lan", []string{"Sec-Fetch-Site", "none"}, false},
		{"a proxy nobody told us of", "192.168.1.2:1", "tests.lan", []string{"X-Forwarded-Proto", "https"}, false},
		{"a trusted proxy with TLS", "127.0.0.1:1", "tests.lan", []string{"X-Forwarded-Proto", "https"}, false},
		{"a trusted proxy without", "127.0.0.1:1", "tests.lan", []string{"X-Forwarded-For", "192.168.1.9", "X-Forwarded-Proto", "http"}, true},
	} {
		r, _ := came(t, s, c.remote, c.headers...)
		r.Host = c.host
		if got := insecure(r); got != c.want {
			t.Errorf("%s: got insecure %v, want %v", c.name, got, c.want)
		}
	}
}

// The throttle of wrong links counts by the browser's address, not by the proxy's, and only where the proxy is trusted.
func TestPassage_TheThrottleCountsTheBrowser(t *testing.T) {
	r := newRig(t, 0)
	for _, trusted := range []bool{true, false} {
		o := Options{}
		if trusted {
			o.Behind = []netip.Prefix{netip.MustParsePrefix("127.0.0.0/8")}
		}
		public, _ := r.serveWith(o)
		try := func(from string) int {
			req, err := http.NewRequest(http.MethodGet, "http://"+public+"/in/"+strings.Repeat("A", 26), nil)
			must(t, err)
			req.Header.Set("X-Forwarded-For", from)
			return r.do(browser(t), req).status
		}
		for range 20 {
			try("198.51.100.1")
		}
		if got, want := try("198.51.100.2"), map[bool]int{true: 404, false: 429}[trusted]; got != want {
			t.Errorf("trusted %v: another browser after 20 wrong links of one got %d, want %d", trusted, got, want)
		}
	}
}

func FuzzPassage(f *testing.F) {
	f.Add("for=192.0.2.43, for=198.51.100.17;by=203.0.113.60", "198.51.100.1, 10.0.0.1", "tests.example.org")
	f.Add(`for="[2001:db8::1]:99";proto=https;host="a,b"`, "unknown", "[::1]:8080")
	f.Add(`for="a\`, ",,", "x:99999999")
	s := &Server{behind: []netip.Prefix{netip.MustParsePrefix("192.0.2.1/32"), netip.MustParsePrefix("10.0.0.0/8")}}
	f.Fuzz(func(t *testing.T, standard, list, host string) {
		r, _ := came(t, s, "192.0.2.1:1", "Forwarded", standard, "X-Forwarded-For", list, "X-Forwarded-Host", host)
		if _, err := netip.ParseAddrPort(r.RemoteAddr); err != nil {
			t.Errorf("the address is %q", r.RemoteAddr)
		}
		if strings.ContainsAny(r.Host, "/\\?#@ \r\n\"<>") {
			t.Errorf("the host is %q", r.Host)
		}
	})
}
