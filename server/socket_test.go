package server

import (
	"net"
	"net/http"
	"os"
	"path/filepath"
	"strings"
	"testing"
)

func TestSocket_OnlyItsOwnerMayOpenItAndAStaleOneGoes(t *testing.T) {
	for name, dir := range map[string]string{
		"in the folder":   t.TempDir(),
		"path over 100 B": filepath.Join(t.TempDir(), strings.Repeat("deep/", 22)),
	} {
		t.Run(name, func(t *testing.T) {
			must(t, os.MkdirAll(dir, 0o700))
			for range 2 { // the second finds what the first, killed, left behind
				l, err := ListenSocket(dir)
				must(t, err)
				path, err := socketPath(dir)
				must(t, err)
				info, err := os.Stat(path)
				must(t, err)
				if got := info.Mode().Perm(); got != 0o600 {
					t.Errorf("got mode %o, want 600", got)
				}
				if len(path) > maxSocketPath {
					t.Errorf("got a path of %d bytes, want at most %d", len(path), maxSocketPath)
				}
				c, err := net.Dial("unix", path)
				must(t, err)
				must(t, c.Close())
				l.(*socket).Listener.(*net.UnixListener).SetUnlinkOnClose(false)
				must(t, l.(*socket).Listener.Close())
			}
			l, err := ListenSocket(dir)
			must(t, err)
			path, err := socketPath(dir)
			must(t, err)
			must(t, l.Close())
			for _, gone := range []string{path, filepath.Join(dir, socketAt)} {
				if _, err := os.Stat(gone); !os.IsNotExist(err) {
					t.Errorf("%s is still there after closing (%v)", filepath.Base(gone), err)
				}
			}
		})
	}
}

func TestPipes_CarryARequest(t *testing.T) {
	p := newPipes()
	srv := &http.Server{Handler: http.HandlerFunc(func(w http.ResponseWriter, r *http.Request) { _, _ = w.Write([]byte("here " + r.URL.Path)) })}
	ended := make(chan error, 1)
	go func() { ended <- srv.Serve(p) }()
	client := &http.Client{Transport: &http.Transport{DialContext: p.dial}}
	res, err := client.Get("http://tripwell/x")
	must(t, err)
	defer res.Body.Close()
	got := make([]byte, 16)
	n, _ := res.Body.Read(got)
	if string(got[:n]) != "here /x" {
		t.Errorf("got %q", got[:n])
	}
	must(t, srv.Close())
	if err := <-ended; err != http.ErrServerClosed {
		t.Errorf("got %v, want closed", err)
	}
}
