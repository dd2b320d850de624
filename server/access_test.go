package server

import (
	"net/http"
	"net/http/httptest"
	"net/url"
	"strings"
	"testing"
	"time"

	"tripwell/store"
)

func TestLink_OnlyPostSpendsItAndOnlyOnce(t *testing.T) {
	r := newRig(t, 0)
	token, err := r.store.NewLink(r.manager.ID, time.Hour)
	must(t, err)
	b := browser(t)
	for range 3 {
		if res := r.open(b, "/in/"+token); res.status != 200 || res.header.Get("Set-Cookie") != "" {
			t.Fatalf("GET: got %d, cookie %q; want the page and no cookie", res.status, res.header.Get("Set-Cookie"))
		}
	}
	res := r.submit(b, "/in/"+token, "")
	if res.status != 303 || res.header.Get("Location") != "/" {
		t.Fatalf("POST: got %d to %q, want 303 to /", res.status, res.header.Get("Location"))
	}
	cookie := res.header.Get("Set-Cookie")
	for _, want := range []string{"HttpOnly", "SameSite=Lax", "Path=/"} {
		if !strings.Contains(cookie, want) {
			t.Errorf("cookie %q lacks %s", cookie, want)
		}
	}
	if strings.Contains(cookie, token) {
		t.Error("the session is the link's own token")
	}
	if res := r.submit(browser(t), "/in/"+token, ""); res.status != 404 {
		t.Errorf("second POST: got %d, want 404", res.status)
	}
	if res := r.open(browser(t), "/in/"+token); res.status != 404 {
		t.Errorf("GET of a used link: got %d, want 404", res.status)
	}
}

func TestLink_CrewBeginsInTheFieldAndNextStaysHere(t *testing.T) {
	r := newRig(t, 0)
	for next, want := range map[string]string{"": "/field", "/t/K7QM2P3": "/t/K7QM2P3", "//evil.example/": "/field", "https://evil.example/": "/field", `/\evil.example`: "/field", "/\tx": "/field", "javascript:alert(1)": "/field"} {
		token, err := r.store.NewLink(r.crew.ID, time.Hour)
		must(t, err)
		res := r.submit(browser(t), "/in/"+token, url.Values{"next": {next}}.Encode())
		if got := res.header.Get("Location"); got != want {
			t.Errorf("next %q: got %q, want %q", next, got, want)
		}
	}
}

func TestLink_PastedLinkIsTaken(t *testing.T) {
	r := newRig(t, 0)
	token, err := r.store.NewLink(r.crew.ID, time.Hour)
	must(t, err)
	for _, pasted := range []string{token, " " + token + "\n", "https://tripwell.example/in/" + token, "https://tripwell.example/in/" + token + "?next=%2Ffield"} {
		res := r.submit(browser(t), "/in", url.Values{"link": {pasted}}.Encode())
		if got, want := res.header.Get("Location"), "/in/"+token; res.status != 303 || got != want {
			t.Errorf("%q: got %d %q, want %q", pasted, res.status, got, want)
		}
	}
	if res := r.submit(browser(t), "/in", url.Values{"link": {"hello"}}.Encode()); res.status != 400 || !strings.Contains(res.body, `aria-invalid="true"`) {
		t.Errorf("nonsense: got %d, want the page again with the problem beside the field", res.status)
	}
}

func TestLink_WrongOnesNeverLockACrewOut(t *testing.T) {
	r := newRig(t, 0)
	b := browser(t)
	var last answer
	for range 30 {
		last = r.submit(b, "/in/"+strings.Repeat("A", 26), "")
	}
	if last.status != http.StatusTooManyRequests || last.header.Get("Retry-After") == "" {
		t.Errorf("after 30 wrong links: got %d, want 429 with Retry-After", last.status)
	}
	r.signIn(r.crew) // from the same address
}

func TestSession_EndsOnSignOut(t *testing.T) {
	r := newRig(t, 0)
	b := r.signIn(r.crew)
	if res := r.open(b, "/in"); res.status != 303 {
		t.Fatalf("signed in: got %d, want to be sent on", res.status)
	}
	stolen := b.Jar.Cookies(mustURL(t, r.url))
	if res := r.submit(b, "/out", ""); res.status != 303 {
		t.Fatalf("sign out: got %d", res.status)
	}
	again := browser(t)
	again.Jar.SetCookies(mustURL(t, r.url), stolen)
	if res := r.open(again, "/in"); res.status != 200 {
		t.Errorf("the old cookie after signing out: got %d, want the sign-in page", res.status)
	}
}

func mustURL(t testing.TB, s string) *url.URL {
	u, err := url.Parse(s)
	must(t, err)
	return u
}

func TestSession_CookieKeepsItsPromisesBeyondLoopback(t *testing.T) {
	cases := []struct {
		name, remote, host string
		header             []string
		want               string
		secure             bool
	}{
		{"plain http on loopback", "127.0.0.1:5000", "127.0.0.1:8080", nil, cookieNameLocal, false},
		{"localhost by name", "[::1]:5000", "localhost:8080", nil, cookieNameLocal, false},
		{"another machine", "192.0.2.7:5000", "192.0.2.1:8080", nil, cookieName, true},
		{"loopback host from another machine", "192.0.2.7:5000", "127.0.0.1:8080", nil, cookieName, true},
		{"behind a proxy on this machine", "127.0.0.1:5000", "tripwell.example", nil, cookieName, true},
		{"behind a proxy that rewrites the host", "127.0.0.1:5000", "127.0.0.1:8080", []string{"X-Forwarded-Proto", "https"}, cookieName, true},
	}
	for _, c := range cases {
		req := httptest.NewRequest(http.MethodPost, "/in/x", nil)
		req.RemoteAddr, req.Host = c.remote, c.host
		if c.header != nil {
			req.Header.Set(c.header[0], c.header[1])
		}
		got := newSessionCookie(req, "secret")
		if got.Name != c.want || got.Secure != c.secure || !got.HttpOnly || got.SameSite != http.SameSiteLaxMode {
			t.Errorf("%s: got %s, want %s", c.name, got, c.want)
		}
	}
}

func TestGuard_AnotherSitesFormIsRefused(t *testing.T) {
	r := newRig(t, 0)
	b := r.signIn(r.manager)
	for _, header := range [][2]string{{"Sec-Fetch-Site", "cross-site"}, {"Origin", "https://evil.example"}} {
		req, err := http.NewRequest(http.MethodPost, r.url+"/out", nil)
		must(t, err)
		req.Header.Set(header[0], header[1])
		wantWrong(t, r.do(b, req), 403, "forbidden")
	}
	if res := r.open(b, "/in"); res.status != 303 {
		t.Errorf("still signed in: got %d, want to be sent on", res.status)
	}
}

func TestGuard_EveryAnswerCarriesTheHeaders(t *testing.T) {
	r := newRig(t, 0)
	for _, path := range []string{"/in", "/nothing-here", "/exchange/logs", "/t/K7QM2P3"} {
		res := r.open(browser(t), path)
		policy := res.header.Get("Content-Security-Policy")
		if !strings.Contains(policy, "default-src 'none'") || strings.Contains(policy, "unsafe") {
			t.Errorf("%s: got policy %q", path, policy)
		}
		if res.header.Get("X-Content-Type-Options") != "nosniff" {
			t.Errorf("%s: lacks nosniff", path)
		}
	}
	if got := r.open(browser(t), "/in").header.Get("Cache-Control"); got != "no-store" {
		t.Errorf("a page: got Cache-Control %q, want no-store", got)
	}
}

func TestTag_KnownAndUnknownLookAlikeSignedOut(t *testing.T) {
	r := newRig(t, 1)
	tags, err := r.store.MintTags(t.Context(), r.manager.ID, 1)
	must(t, err)
	known := r.open(browser(t), "/t/"+tags[0])
	unknown := r.open(browser(t), "/t/ZZZZZZZ")
	if known.status != unknown.status || strings.ReplaceAll(known.header.Get("Location"), tags[0], "ZZZZZZZ") != unknown.header.Get("Location") || known.body != unknown.body {
		t.Errorf("known: %d %v; unknown: %d %v", known.status, known.header, unknown.status, unknown.header)
	}
	page := r.open(browser(t), known.header.Get("Location"))
	if page.status != 200 || !strings.Contains(page.body, `action="/in"`) || !strings.Contains(page.body, `href="/field#tag=`+tags[0]+`"`) {
		t.Errorf("got %d, want the sign-in page with the way to the field form", page.status)
	}
}

func TestTag_LeadsEachRoleToItsOwnPage(t *testing.T) {
	r := newRig(t, 1)
	r.enrol(r.crew)
	tags, err := r.store.MintTags(t.Context(), r.manager.ID, 1)
	must(t, err)
	tag := tags[0]
	var place string
	must(t, r.store.View(ownerScope, func(v *store.View) error {
		places, err := v.Places(r.site)
		place = places[0].ID
		return err
	}))
	r.append(store.Draft{Kind: "tag.bound", Log: r.site, Subject: place, Body: set{"tag": tag}})
	crew, manager, auditor := r.signIn(r.crew), r.signIn(r.manager), r.signIn(r.auditor)
	stranger := r.signIn(r.person("Crew 2", "auditor", newID()))
	for _, printed := range []string{"/T/" + tag, "/t/" + strings.ToLower(tag), "/T/" + tag[:3] + "-" + tag[3:6] + "-" + tag[6:]} {
		if got, want := r.open(crew, printed).header.Get("Location"), "/field#tag="+tag; got != want {
			t.Errorf("crew, %s: got %q, want %q", printed, got, want)
		}
		for name, b := range map[string]*http.Client{"manager": manager, "auditor": auditor} {
			if got, want := r.open(b, printed).header.Get("Location"), "/devices/"+r.devices[0]; got != want {
				t.Errorf("%s, %s: got %q, want %q", name, printed, got, want)
			}
		}
	}
	known, unknown := r.open(stranger, "/T/"+tag), r.open(stranger, "/T/ZZZZZZZ")
	if known.status != 404 || known.body != unknown.body {
		t.Errorf("of another site: got %d, want it to look unknown", known.status)
	}
}

// Whoever was not given a site finds none of its things at any address, and changes none.
func TestRoutes_AnotherSitesThingsLookUnknown(t *testing.T) {
	r := newRig(t, 1)
	h := r.enrol(r.crew)
	entry := h.entry(r.devices[0], 4.5)
	h.push(entry.bytes(t))
	elsewhere := newID()
	r.append(store.Draft{Kind: "site.registered", Log: elsewhere, Subject: elsewhere, Body: set{"set": set{"code": "OTHER", "name": "Ottermoor Swim Hall", "zone": "UTC", "standard": "NEC"}}})
	stranger := r.signIn(r.person("Manager 2", "manager", elsewhere))
	things := map[string]string{":site": r.site, ":device": r.devices[0], ":entry": entry.ID, ":record": entry.ID}
	size := r.logSize()
	tried := 0
	for _, route := range publicRoutes() {
		path := route.path
		for param, id := range things {
			path = strings.ReplaceAll(path, param, id)
		}
		if path == route.path || route.who&manager == 0 {
			continue
		}
		tried++
		var res answer
		if route.method == get {
			res = r.open(stranger, path)
		} else {
			res = r.submit(stranger, path, "id="+newID())
		}
		if res.status != 404 && res.status != 403 {
			t.Errorf("%s %s: got %d, want 404", route.method, route.path, res.status)
		}
		if strings.Contains(res.body, "Kiln Lane") || strings.Contains(res.body, "Outlet 1") {
			t.Errorf("%s %s: the answer shows the other site", route.method, route.path)
		}
	}
	if tried < 5 {
		t.Errorf("only %d routes were tried", tried)
	}
	for _, list := range []string{"/", "/sites", "/dates", "/downloads", "/dates?site=" + r.site, "/downloads?site=" + r.site} {
		if res := r.open(stranger, list); strings.Contains(res.body, "Kiln Lane") {
			t.Errorf("%s shows the other site", list)
		}
	}
	for _, file := range []string{"/workbook.xlsx?site=" + r.site, "/labels.pdf?site=" + r.site} {
		if res := r.open(stranger, file); res.status == 200 {
			t.Errorf("%s was given", file)
		}
	}
	if got := r.logSize(); got != size {
		t.Errorf("the site's log grew from %d to %d records", size, got)
	}
}

func (r *rig) logSize() (n int64) {
	r.t.Helper()
	must(r.t, r.store.View(ownerScope, func(v *store.View) error {
		heads, err := v.Logs()
		for _, head := range heads {
			if head.Log == r.site {
				n = head.Size
			}
		}
		return err
	}))
	return n
}
