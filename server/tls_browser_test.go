package server

import (
	"net/url"
	"strings"
	"testing"

	"tripwell/static/chromium"
)

// A phone that was told to trust the house's authority works without signal at a name only this house knows; one that was
// not is refused, and plain http says that nothing is kept.
func TestOffline_APhoneThatTrustsTheHousesAuthority(t *testing.T) {
	chromium.Need(t)
	r := newRig(t, 4)
	secure, plain, a := r.serveLocal("tests.lan")
	w := newWire(t, secure)
	host := chromium.Host("tests.lan", "127.0.0.1")
	base := "https://tests.lan" + strings.TrimPrefix(w.addr, "127.0.0.1")
	trusting := chromium.Trusting(t, a.cert.Raw)

	p := openHandheld(t, base, host, trusting)
	p.signIn(r, r.crew)
	p.ready()
	if secure := p.Value(`String(isSecureContext && location.hostname)`); secure != "tests.lan" {
		t.Fatalf("the page's context is secure: %s", secure)
	}
	w.cut()
	p.Reload()
	p.Sees("Kiln Lane Day Clinic")
	p.Tap("a.row", "Kiln Lane")
	p.Tap("a.row", "Outlet 1")
	p.Tap("a", "Button test")
	p.testNext()
	p.visit("/field#/tray")
	p.Sees("No signal")
	if kept, there := p.waiting(), len(r.entries()); kept != 1 || there != 0 {
		t.Fatalf("with the line cut: %d on the phone, %d at the server; want 1 and 0", kept, there)
	}
	w.mend()
	p.sendAll()
	r.wantOnceInOrder(1)
	p.Close()

	// Not told: Chromium shows its own page instead of ours.
	stranger := chromium.Phone(t, host)
	if err := stranger.Try(base + "/in"); err == nil || !strings.Contains(err.Error(), "ERR_CERT_AUTHORITY_INVALID") {
		t.Errorf("a browser that was told nothing: got %v, want it to refuse the certificate", err)
	}
	stranger.Open("http://tests.lan" + strings.TrimPrefix(plain, "127.0.0.1") + "/field")
	stranger.Sees("Trust this server")
	stranger.Sees(a.Fingerprint()[:23])
	stranger.Picture("trust")
}

// Over plain http at a name that is not this machine's own, every page says that nothing is kept and where to go.
func TestOffline_APageThatIsNotSecureSaysSo(t *testing.T) {
	chromium.Need(t)
	r := newRig(t, 1)
	must(t, r.store.SetURL("https://tests.example.org"))
	u, err := url.Parse(r.url)
	must(t, err)
	w := chromium.Phone(t, chromium.Host("tests.lan", "127.0.0.1"))
	for _, path := range []string{"/in", "/field"} {
		w.Open("http://tests.lan:" + u.Port() + path)
		w.Until("the banner on "+path, `[...document.querySelectorAll("[role=alert] a")].some((a) => a.href.startsWith("https://tests.example.org/"))`)
		w.Picture("insecure" + strings.ReplaceAll(path, "/", "_"))
	}
	w.Open(r.url + "/in")
	w.Until("the sign-in page without a banner", `document.querySelector("main form") && !document.querySelector(".insecure")`)
}
