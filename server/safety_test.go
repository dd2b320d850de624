package server

import (
	"archive/zip"
	"bytes"
	"crypto/sha256"
	"encoding/hex"
	"fmt"
	"image"
	"image/jpeg"
	"io"
	"log/slog"
	"net/http"
	"net/url"
	"strings"
	"sync"
	"testing"
	"time"

	"tripwell/store"
)

// elsewhere are the ways of writing another site's address that have fooled programs which meant to take own paths only.
var elsewhere = []string{
	"https://evil.example/", "//evil.example/", "///evil.example/", `/\evil.example`, `\\evil.example`, `/\/evil.example`, "https:evil.example", "http:///evil.example",
	"/\tevil.example", "/\n//evil.example", " //evil.example", "%2f%2fevil.example", "javascript:alert(1)", "data:text/html,x", "//evil.example\\@own", "/x\r\nSet-Cookie: a=b", "https://own@evil.example/",
}

// leaves reports that a browser which follows Location comes to another host.
func leaves(t *testing.T, location string) bool {
	t.Helper()
	base := mustURL(t, "https://own.example/a/b")
	to, err := base.Parse(strings.ReplaceAll(strings.TrimSpace(location), `\`, "/")) // browsers read \ as /
	return err != nil || location != "" && (to.Host != "own.example" || to.Scheme != "https")
}

// No parameter and no path of any route leads a browser to another site.
func TestSafety_RedirectsStayHere(t *testing.T) {
	r := newRig(t, 1)
	b := r.signIn(r.manager)
	r.setPassword(r.crew, words)
	for _, evil := range elsewhere {
		q := url.Values{}
		for _, name := range []string{"next", "back", "return", "url", "to", "redirect", "link", "said"} {
			q.Set(name, evil)
		}
		var got []answer
		for _, route := range publicRoutes() {
			if route.method == get && !strings.HasPrefix(route.path, "/exchange/") && !strings.Contains(route.path, ":making") {
				path := strings.NewReplacer(":site", r.site, ":device", r.devices[0], ":tag", url.PathEscape(evil), "*", url.PathEscape(evil)).Replace(route.path)
				for _, who := range []*http.Client{b, browser(t)} {
					if evil == elsewhere[0] || strings.HasPrefix(path, "/in") || strings.HasPrefix(path, "/t/") {
						got = append(got, r.open(who, path+"?"+q.Encode()))
					}
				}
			}
		}
		token, err := r.store.NewLink(r.crew.ID, time.Hour)
		must(t, err)
		got = append(got, r.submit(browser(t), "/in", url.Values{"link": {token}, "next": {evil}}.Encode()), r.submit(browser(t), "/in", url.Values{"link": {evil}}.Encode()),
			r.submit(browser(t), "/in/"+token, url.Values{"next": {evil}}.Encode()),
			r.submit(browser(t), "/in/password", url.Values{"name": {r.crew.Name}, "password": {words}, "next": {evil}}.Encode()))
		for _, res := range got {
			if leaves(t, res.header.Get("Location")) || len(res.header.Values("Set-Cookie")) > 1 {
				t.Errorf("%q: led to %q", evil, res.header.Get("Location"))
			}
			if strings.Contains(res.body, `href="`+evil) || strings.Contains(res.body, `action="`+evil) {
				t.Errorf("%q stands on a page as a way to go", evil)
			}
		}
	}
	for _, path := range []string{"//evil.example/", `/\evil.example/`, "/%2f%2fevil.example", "/%5cevil.example", "//evil.example/..", "/in//evil.example"} {
		res := r.open(browser(t), path)
		if leaves(t, res.header.Get("Location")) {
			t.Errorf("the path %q led to %q", path, res.header.Get("Location"))
		}
	}
}

// No path reaches a file that is not meant to be read.
func TestSafety_PathsLeadNowhereElse(t *testing.T) {
	r := newRig(t, 1)
	h := r.enrol(r.crew)
	entry := h.entry(r.devices[0], 4.5)
	h.push(entry.bytes(t))
	b := r.signIn(r.manager)
	root := r.server.assets.root()
	for _, up := range []string{"../", "..%2f", "%2e%2e/", "%2e%2e%2f", `..\`, "..%5c", "....//", "%252e%252e%252f"} {
		for _, file := range []string{"book.db", "keys/head.key", "layout.html", "server.go", "words/en.json"} {
			for _, at := range []string{root, "/assets/", "/entries/" + entry.ID + "/photos/", "/records/" + entry.ID + "/photos/", "/import/x/", "/workbook/x/"} {
				res := r.open(b, at+strings.Repeat(up, 4)+file)
				if res.status == 200 && !strings.Contains(res.header.Get("Content-Type"), "text/html") {
					t.Errorf("%s%s%s: was answered with %d bytes", at, up, file, len(res.body))
				}
				if strings.Contains(res.body, "PRIVATE KEY") || strings.Contains(res.body, `{{define`) {
					t.Errorf("%s%s%s gave what is not to be read", at, up, file)
				}
			}
		}
	}
	for _, name := range []string{"../../book.db", "..", "", strings.Repeat("0", 64) + "/../x"} {
		res := h.send("/exchange/photo?entry="+entry.ID+"&sha256="+url.QueryEscape(name), []byte("x"))
		if res.status == 200 {
			t.Errorf("a photo was kept under %q", name)
		}
	}
}

// What pretends to be a picture is not kept, and nothing that was taken is ever shown as a page.
func TestSafety_UploadsThatAreSomethingElse(t *testing.T) {
	r := newRig(t, 1)
	h := r.enrol(r.crew)
	var good bytes.Buffer
	must(t, jpeg.Encode(&good, image.NewGray(image.Rect(0, 0, 40, 30)), nil))
	huge := bytes.Clone(good.Bytes())
	for i := 0; i+9 < len(huge); i++ { // ITU-T T.81, B.2.2: SOF0, length, precision, lines, samples per line
		if huge[i] == 0xff && huge[i+1] == 0xc0 {
			copy(huge[i+5:], []byte{0xff, 0xff, 0xff, 0xff})
		}
	}
	script := `<svg xmlns="http://www.w3.org/2000/svg" onload="alert(1)"/>`
	for name, raw := range map[string][]byte{
		"SVG": []byte(script), "HTML": []byte("<!doctype html><script>alert(1)</script>"), "GIF": []byte("GIF89a/*" + script + "*/"), "a program": []byte("\x7fELF\x02\x01\x01"),
		"the first bytes of a picture": append([]byte("\xff\xd8\xff\xe0"), script...), "65535 × 65535": huge, "a zip": []byte("PK\x03\x04"), "nothing": {},
	} {
		sum := sha256.Sum256(raw)
		entry := h.entry(r.devices[0], 4.5)
		entry.Body.(set)["photos"] = []string{hex.EncodeToString(sum[:])}
		h.push(entry.bytes(t))
		if res := h.send("/exchange/photo?entry="+entry.ID+"&sha256="+hex.EncodeToString(sum[:]), raw); res.status == 200 {
			t.Errorf("%s was kept as a photo", name)
		}
		b := r.signIn(r.manager)
		if res := r.open(b, "/entries/"+entry.ID+"/photos/"+hex.EncodeToString(sum[:])); res.status == 200 {
			t.Errorf("%s is shown as a photo", name)
		}
	}
	// A picture with a page behind it is a picture: it is served as one, and no browser may read it otherwise.
	both := append(bytes.Clone(good.Bytes()), "<script>alert(1)</script>"...)
	sum := sha256.Sum256(both)
	name := hex.EncodeToString(sum[:])
	entry := h.entry(r.devices[0], 4.5)
	entry.Body.(set)["photos"] = []string{name}
	h.push(entry.bytes(t))
	if h.send("/exchange/photo?entry="+entry.ID+"&sha256="+name, both).status == 200 {
		res := r.open(r.signIn(r.manager), "/entries/"+entry.ID+"/photos/"+name)
		if res.header.Get("Content-Type") != "image/jpeg" || res.header.Get("X-Content-Type-Options") != "nosniff" || !strings.Contains(res.header.Get("Content-Security-Policy"), "default-src 'none'") {
			t.Errorf("a picture with a page behind it is served as %q, %q", res.header.Get("Content-Type"), res.header.Get("X-Content-Type-Options"))
		}
	}
	// Files for import: names that are paths, names that are markup, and zeros packed a thousandfold.
	b := r.signIn(r.manager)
	var bomb bytes.Buffer
	z := zip.NewWriter(&bomb)
	part, err := z.Create("xl/worksheets/sheet1.xml")
	must(t, err)
	_, err = io.CopyN(part, zeros{}, 80<<20)
	must(t, err)
	must(t, z.Close())
	for name, raw := range map[string][]byte{"../../../book.db": []byte("a,b\n1,2\n"), `<img src=x onerror=alert(1)>.csv`: []byte("a,b\n1,2\n"), "bomb.xlsx": bomb.Bytes(), "con\x00.csv": []byte("a,b\n1,2\n")} {
		res := r.upload(b, name, raw, "")
		if strings.Contains(res.body, "<img src=x") || res.status >= 500 {
			t.Errorf("a file named %q: got %d", name, res.status)
		}
		if name == "bomb.xlsx" && res.status == 303 {
			t.Error("the bomb was taken")
		}
	}
}

type zeros struct{}

func (zeros) Read(p []byte) (int, error) { clear(p); return len(p), nil }

// safeLog is a log that many write and a test reads.
type safeLog struct {
	mu sync.Mutex
	b  bytes.Buffer
}

func (l *safeLog) Write(p []byte) (int, error) { l.mu.Lock(); defer l.mu.Unlock(); return l.b.Write(p) }
func (l *safeLog) String() string              { l.mu.Lock(); defer l.mu.Unlock(); return l.b.String() }

// Whatever signs somebody in is not in the log, at its most talkative, right or wrong, nor in what is told of an error.
func TestSafety_SecretsAreNeverLogged(t *testing.T) {
	r := newRig(t, 1)
	log := &safeLog{}
	public, _ := r.serveWith(Options{Log: slog.New(slog.NewTextHandler(log, &slog.HandlerOptions{Level: slog.LevelDebug}))})
	r.url = "http://" + public
	secrets := map[string]string{}
	for i, p := range []store.Person{r.manager, r.crew} {
		token, err := r.store.NewLink(p.ID, time.Hour)
		must(t, err)
		secrets[fmt.Sprintf("link %d", i)] = token
		r.open(browser(t), "/in/"+token+"?next=/field")
		b := browser(t)
		r.submit(b, "/in/"+token, "")
		r.submit(b, "/in/"+token, "") // again, refused
		for _, c := range b.Jar.Cookies(mustURL(t, r.url)) {
			secrets[fmt.Sprintf("session %d", i)] = c.Value
		}
	}
	code, err := r.store.NewCode(r.crew.ID)
	must(t, err)
	secrets["code"] = code
	r.submit(browser(t), "/in", url.Values{"link": {code}}.Encode())
	r.submit(browser(t), "/in", url.Values{"link": {code}}.Encode())
	b := r.setPassword(r.crew, words)
	secrets["password"], secrets["wrong password"], secrets["name tried"] = words, "wrong horse battery", "Somebody Who Typed A Password Here"
	r.tryPassword(browser(t), r.crew.Name, words)
	r.tryPassword(browser(t), r.crew.Name, "wrong horse battery")
	r.tryPassword(browser(t), "Somebody Who Typed A Password Here", words)
	feed := r.submit(b, "/reminders/calendar", "")
	if _, after, ok := strings.Cut(feed.body, "/calendar/"); ok {
		secrets["calendar"], _, _ = strings.Cut(after, ".ics")
		r.open(browser(t), "/calendar/"+secrets["calendar"]+".ics")
	}
	r.submit(r.signIn(r.manager), "/mail", url.Values{"host": {"mail.invalid"}, "port": {"587"}, "tls": {"starttls"}, "user": {"x"}, "password": {"mail-secret-77"}, "from": {"a@mail.invalid"}, "link": {"https://x.example"}}.Encode())
	secrets["mail password"] = "mail-secret-77"
	h := r.enrol(r.crew)
	secrets["bearer"] = h.token
	h.push(h.entry(r.devices[0], 4.5).bytes(t))
	h.token = "not-a-token-" + h.token
	h.fetch("/exchange/logs")
	h.fetch("/exchange/logs?token=" + h.token)
	said := log.String()
	if !strings.Contains(said, "route=/in/:token") || !strings.Contains(said, "route=/exchange/push") || secrets["calendar"] == "" {
		t.Fatalf("the log holds less than was done (calendar %q):\n%.2000s", secrets["calendar"], said)
	}
	for name, secret := range secrets {
		for _, form := range []string{secret, url.QueryEscape(secret), url.PathEscape(secret)} {
			if secret != "" && strings.Contains(said, form) {
				t.Errorf("the log holds a %s", name)
			}
		}
	}
}

// A fault tells its reader a reference and nothing of how the server is made.
func TestSafety_ErrorsTellNothingOfTheInside(t *testing.T) {
	r := newRig(t, 1)
	b := r.signIn(r.manager)
	for _, route := range publicRoutes() {
		for _, param := range []string{"%00", "'", "..", strings.Repeat("9", 300), "%ff%fe", "${7*7}", "{{.}}"} {
			path := route.path
			for _, name := range []string{":site", ":device", ":entry", ":photo", ":panel", ":circuit", ":defect", ":act", ":record", ":round", ":plan", ":set", ":kind", ":task", ":instrument", ":upload", ":file", ":making", ":person", ":phone", ":tag", ":token"} {
				path = strings.ReplaceAll(path, name, param)
			}
			if route.method != get || path == route.path || strings.Contains(path, ":") || param == "%00" && len(path) > 200 {
				continue
			}
			res := r.open(b, path+"?limit="+param+"&site="+param)
			if res.status >= 500 {
				t.Errorf("%s with %.12q: got %d", route.path, param, res.status)
			}
			for _, inside := range []string{"goroutine", ".go:", "runtime error", "bbolt", "/tmp/", "echo.", "strconv.", "json:"} {
				if strings.Contains(res.body, inside) {
					t.Errorf("%s with %.12q tells %q", route.path, param, inside)
				}
			}
		}
	}
}
