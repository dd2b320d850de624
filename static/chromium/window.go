// Package chromium is the browser of the tests: Debian's Chromium, driven through its debugging port, in a window as large as a
// phone's or a desk's. Its profile can outlive it, its camera can show a film. Only tests import it; it knows nothing of ours.
package chromium

import (
	"context"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"github.com/chromedp/chromedp"
)

// Window is one person's browser window with cookies and storage of its own.
type Window struct {
	T       testing.TB
	Ctx     context.Context
	Profile string // the folder that holds what the browser keeps
	close   func()
}

// Option changes how a window is opened.
type Option func(*setup)

// Host lets the window find a name at an address of this machine, as a house's own name server does. Unlike localhost such a
// name is secure only over https.
func Host(name, addr string) Option {
	return func(s *setup) {
		s.flags = append(s.flags, chromedp.Flag("host-resolver-rules", "MAP "+name+" "+addr))
	}
}

// Trusting opens the window of somebody whose home holds an authority their browser was told to trust; cert is its
// certificate (DER). Debian's Chromium reads such authorities from an NSS database.
func Trusting(t testing.TB, cert []byte) Option {
	t.Helper()
	certutil, err := exec.LookPath("certutil")
	if err != nil {
		if os.Getenv("CI") != "" {
			t.Fatal("certutil (libnss3-tools) is not installed, and in CI this test must run")
		}
		t.Skip("certutil (libnss3-tools) is not installed: a browser cannot be told here whom to trust")
	}
	home := t.TempDir()
	db := filepath.Join(home, ".pki", "nssdb")
	if err := os.MkdirAll(db, 0o700); err != nil {
		t.Fatal(err)
	}
	for _, args := range [][]string{{"-N", "--empty-password"}, {"-A", "-n", "authority", "-t", "C,,", "-i", write(t, "authority.crt", cert)}} {
		if out, err := exec.Command(certutil, append([]string{"-d", "sql:" + db}, args...)...).CombinedOutput(); err != nil {
			t.Fatalf("certutil %v: %v\n%s", args, err, out)
		}
	}
	return func(s *setup) { s.flags = append(s.flags, chromedp.Env("HOME="+home)) }
}

type setup struct {
	width, height int
	profile       string
	flags         []chromedp.ExecAllocatorOption
}

// Size gives the window another size, in CSS pixels.
func Size(width, height int) Option { return func(s *setup) { s.width, s.height = width, height } }

// Profile opens the window on a folder: one used before brings back what it kept. Without it each window starts empty.
func Profile(dir string) Option { return func(s *setup) { s.profile = dir } }

// Camera lets the window's camera show a film, over and over, and answers the question for the camera with yes.
func Camera(film string) Option {
	return func(s *setup) {
		s.flags = append(s.flags, chromedp.Flag("use-fake-ui-for-media-stream", true),
			chromedp.Flag("use-fake-device-for-media-stream", true), chromedp.Flag("use-file-for-fake-video-capture", film))
	}
}

// Need gives the path of the browser. Where there is none the test is skipped, in CI it fails; -short leaves browsers out.
func Need(t testing.TB) string {
	t.Helper()
	if testing.Short() {
		t.Skip("browser tests are left out with -short")
	}
	for _, name := range []string{"chromium", "chromium-browser"} {
		if path, err := exec.LookPath(name); err == nil {
			return path
		}
	}
	if os.Getenv("CI") != "" {
		t.Fatal("Chromium is not installed, and in CI browser tests must run")
	}
	t.Skip("Chromium is not installed: browser test left out")
	return ""
}

// Phone opens a window of 390 × 844.
func Phone(t testing.TB, options ...Option) *Window {
	t.Helper()
	return open(t, setup{width: 390, height: 844}, options)
}

// Desk opens a window of 1280 × 900.
func Desk(t testing.TB, options ...Option) *Window {
	t.Helper()
	return open(t, setup{width: 1280, height: 900}, options)
}

func open(t testing.TB, s setup, options []Option) *Window {
	t.Helper()
	path := Need(t)
	for _, option := range options {
		option(&s)
	}
	if s.profile == "" {
		s.profile = filepath.Join(t.TempDir(), "profile")
	}
	allocator, stopAllocator := chromedp.NewExecAllocator(context.Background(), append([]chromedp.ExecAllocatorOption{
		chromedp.ExecPath(path), chromedp.Headless, chromedp.NoFirstRun, chromedp.UserDataDir(s.profile),
		chromedp.Flag("no-sandbox", true), chromedp.Flag("disable-gpu", true), chromedp.Flag("disable-quic", true),
		chromedp.Flag("disable-dev-shm-usage", true), chromedp.Flag("disable-background-networking", true),
		chromedp.Flag("disable-component-update", true), chromedp.Flag("disable-sync", true),
		chromedp.WindowSize(s.width, s.height)}, s.flags...)...)
	ctx, stop := chromedp.NewContext(allocator)
	w := &Window{T: t, Ctx: ctx, Profile: s.profile}
	w.close = func() {
		_ = chromedp.Cancel(ctx) // closes the browser and waits until it has written what it keeps
		stop()
		stopAllocator()
	}
	t.Cleanup(w.Close)
	w.Do(chromedp.EmulateViewport(int64(s.width), int64(s.height)))
	return w
}

// Close ends the browser as a person does; a test's end does the same. Its profile stays.
func (w *Window) Close() {
	if w.close != nil {
		w.close()
		w.close = nil
	}
}

// Tab opens another page of the same browser, with the same cookies and storage. It ends with the browser.
func (w *Window) Tab() *Window {
	w.T.Helper()
	ctx, stop := chromedp.NewContext(w.Ctx)
	tab := &Window{T: w.T, Ctx: ctx, Profile: w.Profile, close: stop}
	w.T.Cleanup(tab.Close)
	tab.Do(chromedp.EmulateViewport(390, 844))
	return tab
}

// Do carries out actions of the debugging port.
func (w *Window) Do(actions ...chromedp.Action[chromedp.Void]) {
	w.T.Helper()
	if err := chromedp.Do(w.Ctx, actions...); err != nil {
		w.Fail("%v", err)
	}
}

// Open goes to an address.
func (w *Window) Open(url string) { w.T.Helper(); w.Do(chromedp.Navigate(url)) }

// Try goes to an address that the browser may refuse.
func (w *Window) Try(url string) error { return chromedp.Do(w.Ctx, chromedp.Navigate(url)) }

// Reload loads the page again.
func (w *Window) Reload() { w.T.Helper(); w.Do(chromedp.Reload()) }

// Fail stops the test with what the page says, and keeps a picture where TRIPWELL_PICTURES names a folder.
func (w *Window) Fail(format string, args ...any) {
	w.T.Helper()
	ctx, cancel := context.WithTimeout(w.Ctx, 5*time.Second)
	defer cancel()
	page, _ := chromedp.Run(ctx, chromedp.Evaluate[string](`location.href + "\n" + document.body.innerText.slice(0, 3000)`))
	w.Picture("failed")
	w.T.Logf("the page says:\n%s", page)
	w.T.Fatalf(format, args...)
}

// Picture keeps what the window shows, for people who look at the pages: only where TRIPWELL_PICTURES names a folder.
func (w *Window) Picture(name string) {
	dir := os.Getenv("TRIPWELL_PICTURES")
	if dir == "" {
		return
	}
	shot, err := chromedp.Run(w.Ctx, chromedp.CaptureScreenshot())
	if err == nil {
		err = os.WriteFile(filepath.Join(dir, strings.ReplaceAll(w.T.Name(), "/", "_")+"_"+name+".png"), shot, 0o600)
	}
	if err != nil {
		w.T.Log(err)
	}
}
