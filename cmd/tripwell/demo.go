package main

import (
	"errors"
	"fmt"
	"io/fs"
	"log/slog"
	"net"
	"os"
	"path/filepath"
	"syscall"
	"time"

	"tripwell/server"
	"tripwell/store"
	"tripwell/store/demo"
)

type demoCmd struct {
	Data   string `name:"data" placeholder:"DIR" help:"Folder of the demo; made when it is not there. A new temporary folder when left out."`
	Listen string `name:"listen" placeholder:"ADDR" help:"Address of this machine to listen on; 127.0.0.1:8080, or the next free port, when left out."`
}

// Help gives an example.
func (demoCmd) Help() string {
	return "Serves an invented organisation on this machine only: three sites, more than 300 devices, fourteen months of tests until yesterday. Prints one sign-in link for each role.\n\nExample:\n\n    tripwell demo --listen 127.0.0.1:9000 --data demo"
}

const (
	demoListen  = "127.0.0.1:8080"
	demoLinkFor = 24 * time.Hour
)

// Run builds the demo where it is not there yet and serves it.
func (c demoCmd) Run(e *env) error {
	public, err := c.listen()
	if err != nil {
		return err
	}
	s, dir, err := c.open(e)
	if err != nil {
		return errors.Join(err, public.Close())
	}
	// Whoever tries it out wants to read the greeting, not each request.
	err = serve(e, s, dir, public, server.Options{Log: logTo(e, slog.LevelWarn)}, func() error { return greetDemo(e, s, dir, public) })
	return errors.Join(err, s.Close())
}

// listen opens a loopback address; without --listen it goes on to the next free port.
func (c demoCmd) listen() (net.Listener, error) {
	if c.Listen == "" {
		l, err := listen(demoListen)
		for port := 8081; port < 8181 && errors.Is(err, syscall.EADDRINUSE); port++ {
			l, err = listen(fmt.Sprintf("127.0.0.1:%d", port))
		}
		return l, err
	}
	host, _, err := net.SplitHostPort(c.Listen)
	if err != nil {
		return nil, usageError{fmt.Errorf("--listen %q is no address with a port: write it as %s", c.Listen, demoListen)}
	}
	if ip := net.ParseIP(host); host != "localhost" && (ip == nil || !ip.IsLoopback()) {
		return nil, usageError{fmt.Errorf("--listen %s: the demo listens on this machine only, since anybody who has a link may sign in: give %s or another loopback address", c.Listen, demoListen)}
	}
	return listen(c.Listen)
}

// open opens the demo's folder, building the organisation first where the folder is new or empty.
func (c demoCmd) open(e *env) (*store.Store, string, error) {
	dir := c.Data
	if dir == "" {
		temp, err := os.MkdirTemp("", "tripwell-demo-")
		if err != nil {
			return nil, "", fmt.Errorf("temporary folder: %w", err)
		}
		dir = temp
	}
	dir = absolute(dir)
	if _, err := os.Stat(filepath.Join(dir, store.BookFile)); errors.Is(err, fs.ErrNotExist) {
		if err := buildDemo(e, dir); err != nil {
			if c.Data == "" {
				_ = os.Remove(dir) // our own, and still empty
			}
			return nil, "", err
		}
	}
	s, err := store.Open(dir, store.Options{Now: time.Now, Demo: true, Log: logTo(e, slog.LevelInfo)})
	return s, dir, err
}

// buildDemo builds beside the folder and moves it there when it is complete, so that an interrupted start leaves nothing
// that looks like a demo.
func buildDemo(e *env, dir string) error {
	switch found, err := os.ReadDir(dir); {
	case err == nil && len(found) > 0:
		return fmt.Errorf("%s is no demo store and not empty: name an empty folder or one that is not there yet", dir)
	case err != nil && !errors.Is(err, fs.ErrNotExist):
		return fmt.Errorf("cannot use %s for the demo: %w", dir, unwrapPath(err))
	}
	building, err := os.MkdirTemp(filepath.Dir(dir), ".tripwell-demo-")
	if err != nil {
		return fmt.Errorf("cannot build the demo beside %s: %w", dir, unwrapPath(err))
	}
	defer os.RemoveAll(building)
	bar := e.progress("building the demo")
	err = demo.Build(e.ctx, building, time.Now(), func(done, total int) { bar.set(int64(done), int64(total)) })
	bar.finish()
	if err != nil {
		return err
	}
	if err := os.Remove(dir); err != nil && !errors.Is(err, fs.ErrNotExist) { // empty, as looked above
		return fmt.Errorf("cannot use %s for the demo: %w", dir, unwrapPath(err))
	}
	if err := os.Rename(building, dir); err != nil {
		return fmt.Errorf("cannot move the demo to %s: %w", dir, unwrapPath(err))
	}
	return nil
}

// greetDemo prints the address, one link for each role and what else to try.
func greetDemo(e *env, s *store.Store, dir string, public net.Listener) error {
	people, err := s.People()
	if err != nil {
		return err
	}
	here := localURL(public)
	fmt.Fprintf(e.stdout, "Tripwell demo: an invented organisation, on this machine only.\n\n  address   %s\n", here)
	for _, role := range []string{"manager", "crew", "auditor"} {
		for _, p := range people {
			if p.Role != role || !p.Active {
				continue
			}
			token, err := s.NewLink(p.ID, demoLinkFor)
			if err != nil {
				return fmt.Errorf("link for %s: %w", role, err)
			}
			fmt.Fprintf(e.stdout, "  %-8s  %s/in/%s\n", role, here, token)
			break
		}
	}
	_, err = fmt.Fprintf(e.stdout, "\nEach link signs in once, within 24 hours; open each in a browser window of its own.\nIt is kept in %s; commands work beside it:\n\n  tripwell workbook -o demo.xlsx --data %s\n\nStop it with Ctrl+C.\n", dir, dir)
	return err
}
