package main

import (
	"context"
	"encoding/json"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"github.com/chromedp/chromedp"
)

// browser is one person's browser window with cookies and storage of its own.
type browser struct {
	t   *testing.T
	ctx context.Context
}

// chromium finds the browser; where there is none the test is skipped, in CI it fails.
func chromium(t *testing.T) string {
	t.Helper()
	if testing.Short() {
		t.Skip("browser tests are left out with -short")
	}
	for _, name := range []string{"chromium", "chromium-browser"} {
		if path, err := exec.LookPath(name); err == nil {
			return path
		}
	}
	if os.Getenv("CI") == "true" {
		t.Fatal("Chromium is not installed, and in CI browser tests must run")
	}
	t.Skip("Chromium is not installed: browser test left out")
	return ""
}

// openBrowser starts a browser with an empty profile and a window of the given size.
func openBrowser(t *testing.T, width, height int) *browser {
	t.Helper()
	path := chromium(t)
	ctx, cancel := chromedp.NewExecAllocator(context.Background(),
		chromedp.ExecPath(path), chromedp.Headless, chromedp.NoFirstRun, chromedp.UserDataDir(filepath.Join(t.TempDir(), "profile")),
		chromedp.Flag("no-sandbox", true), chromedp.Flag("disable-gpu", true), chromedp.Flag("disable-quic", true),
		chromedp.Flag("disable-dev-shm-usage", true), chromedp.Flag("disable-background-networking", true),
		chromedp.Flag("disable-component-update", true), chromedp.Flag("disable-sync", true),
		chromedp.WindowSize(width, height))
	t.Cleanup(cancel)
	ctx, cancel = chromedp.NewContext(ctx)
	t.Cleanup(cancel)
	b := &browser{t, ctx}
	b.do(chromedp.EmulateViewport(int64(width), int64(height)))
	return b
}

func (b *browser) do(actions ...chromedp.Action[chromedp.Void]) {
	b.t.Helper()
	if err := chromedp.Do(b.ctx, actions...); err != nil {
		b.fail("%v", err)
	}
}

// open goes to an address.
func (b *browser) open(url string) { b.t.Helper(); b.do(chromedp.Navigate(url)) }

// js gives the value of an expression on the page.
func (b *browser) js(expression string) any {
	b.t.Helper()
	v, err := chromedp.Run(b.ctx, chromedp.Evaluate[any](expression))
	if err != nil {
		b.fail("%s: %v", expression, err)
	}
	return v
}

// text gives the page's visible text, or that of the first element a selector finds.
func (b *browser) text(selector string) string {
	b.t.Helper()
	s, _ := b.js(`document.querySelector(` + quote(selector) + `)?.innerText ?? ""`).(string)
	return s
}

// wait waits until an expression is true on the page, across navigations.
func (b *browser) wait(what, expression string) {
	b.t.Helper()
	for end := time.Now().Add(20 * time.Second); time.Now().Before(end); time.Sleep(50 * time.Millisecond) {
		if v, err := chromedp.Run(b.ctx, chromedp.Evaluate[any](`Boolean(`+expression+`)`)); err == nil && v == true {
			return
		}
	}
	b.fail("waited 20 s for %s", what)
}

// press clicks, as a finger does, on the first visible button or link within a selector that has the text; "" is any.
func (b *browser) press(within, text string) {
	b.t.Helper()
	find := `[...document.querySelectorAll(` + quote(within) + `)].flatMap((e) => e.matches("button, a, summary") ? [e] : [...e.querySelectorAll("button, a, summary")])
		.find((e) => (` + quote(text) + ` === "" || e.textContent.replace(/\s+/g, " ").includes(` + quote(text) + `)) && e.getClientRects().length > 0)`
	b.wait("a button "+within+" "+text, find)
	// The place to press is taken when the page stands still and nothing lies over it.
	still := `(() => { const e = ` + find + `; e.scrollIntoView({block: "center", behavior: "instant"});
		const r = e.getClientRects()[0], x = r.x + r.width / 2, y = r.y + r.height / 2, at = x + "," + y, was = globalThis.pressAt;
		globalThis.pressAt = at;
		return was === at && e.contains(document.elementFromPoint(x, y)) ? [x, y] : null; })()`
	for end := time.Now().Add(10 * time.Second); time.Now().Before(end); time.Sleep(50 * time.Millisecond) {
		if at, ok := b.js(still).([]any); ok {
			b.do(chromedp.MouseClickXY(at[0].(float64), at[1].(float64)))
			return
		}
	}
	b.fail("%s %q does not come to rest or is covered", within, text)
}

// keys types into the field a selector finds.
func (b *browser) keys(selector, typed string) {
	b.t.Helper()
	b.wait("a field "+selector, `document.querySelector(`+quote(selector)+`)`)
	b.do(chromedp.SendKeys(chromedp.CSS(selector), typed))
}

// fail stops the test with what the page says, and keeps a picture where TRIPWELL_PICTURES names a folder.
func (b *browser) fail(format string, args ...any) {
	b.t.Helper()
	ctx, cancel := context.WithTimeout(b.ctx, 5*time.Second)
	defer cancel()
	page, _ := chromedp.Run(ctx, chromedp.Evaluate[string](`location.href + "\n" + document.body.innerText.slice(0, 3000)`))
	b.picture("failed")
	b.t.Logf("the page says:\n%s", page)
	b.t.Fatalf(format, args...)
}

// picture keeps what the window shows, for people who look at the pages: only where TRIPWELL_PICTURES names a folder.
func (b *browser) picture(name string) {
	dir := os.Getenv("TRIPWELL_PICTURES")
	if dir == "" {
		return
	}
	shot, err := chromedp.Run(b.ctx, chromedp.CaptureScreenshot())
	if err == nil {
		err = os.WriteFile(filepath.Join(dir, strings.ReplaceAll(b.t.Name(), "/", "_")+"_"+name+".png"), shot, 0o600)
	}
	if err != nil {
		b.t.Log(err)
	}
}

func quote(s string) string {
	raw, _ := json.Marshal(s)
	return string(raw)
}
