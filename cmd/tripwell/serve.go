package main

import (
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"log/slog"
	"net"
	"net/url"
	"path/filepath"
	"strings"
	"syscall"
	"time"

	"tripwell/server"
	"tripwell/store"
)

type serveCmd struct {
	folder
	Listen string `name:"listen" required:"" placeholder:"ADDR" help:"Address and port to listen on, as 127.0.0.1:8080."`
	URL    string `name:"url" placeholder:"URL" help:"Address that goes on labels, as https://tests.example.org; kept with the store, needed once."`
	tlsFlags
}

// Help gives an example.
func (serveCmd) Help() string {
	return "Serves the store in a folder until it is stopped (Ctrl+C or SIGTERM) and makes one there when the folder is empty. The first start prints a link with which the first manager signs in.\n\nExample:\n\n    tripwell serve --data /srv/tripwell --listen 127.0.0.1:8080 --url https://tests.example.org --behind 127.0.0.1\n\nWith certificates of its own, for phones in the house:\n\n    tripwell serve --data /srv/tripwell --listen 0.0.0.0:443 --url https://tests.lan --tls local"
}

// firstLinkFor is how long the first manager's link holds.
const firstLinkFor = 7 * 24 * time.Hour

// Run serves until it is told to stop.
func (c serveCmd) Run(e *env) error {
	if _, _, err := net.SplitHostPort(c.Listen); err != nil {
		return usageError{fmt.Errorf("--listen %q is no address with a port: write it as 127.0.0.1:8080", c.Listen)}
	}
	if err := checkURL(c.URL); err != nil {
		return err
	}
	if err := c.check(); err != nil {
		return err
	}
	// The ports first: a start that cannot listen makes no store.
	public, err := listen(c.Listen)
	if err != nil {
		return err
	}
	plain, err := c.listenPlain(public.Addr().String())
	if err != nil {
		return errors.Join(err, public.Close())
	}
	defer closeListener(plain)
	s, err := store.Open(c.Data, store.Options{Now: time.Now, Create: true, URL: c.URL, Log: logTo(e, slog.LevelInfo)})
	if err != nil {
		return errors.Join(err, public.Close())
	}
	if s.Demo() {
		err = fmt.Errorf("%s holds a demo store, which is served on this machine only: use tripwell demo --data %s", c.Data, c.Data)
		return errors.Join(err, public.Close(), s.Close())
	}
	err = c.serve(e, s, public, plain)
	return errors.Join(err, s.Close())
}

func (c serveCmd) serve(e *env, s *store.Store, public, plain net.Listener) error {
	log := logTo(e, slog.LevelInfo)
	certificates, err := c.certificates(s, log)
	if err != nil {
		return errors.Join(err, public.Close())
	}
	proxies, err := c.proxies()
	if err != nil {
		return errors.Join(err, public.Close())
	}
	o := server.Options{Log: log, Certificates: certificates, Plain: plain, Behind: proxies}
	return serve(e, s, c.Data, public, o, func() error { return c.greet(e, s, public, plain, certificates) })
}

// closeListener closes what may be nil or closed already.
func closeListener(l net.Listener) {
	if l != nil {
		_ = l.Close()
	}
}

// greet says where the store is served and, while nobody has signed in yet, gives the first manager's link.
func (c serveCmd) greet(e *env, s *store.Store, public, plain net.Listener, certificates server.Certificates) error {
	token, err := firstLink(e.ctx, s)
	if err != nil {
		return err
	}
	here := localURL(public)
	if c.on() {
		here = "https" + strings.TrimPrefix(here, "http")
	}
	if token != "" {
		fmt.Fprintf(e.stdout, "The first manager signs in once with this link, within 7 days:\n\n  on this machine  %s/in/%s\n", here, token)
		if u := s.URL(); u != "" {
			fmt.Fprintf(e.stdout, "  from elsewhere   %s/in/%s\n", strings.ToLower(u), token)
		}
		fmt.Fprintln(e.stdout)
	}
	if err := c.tlsFlags.greet(e.stdout, certificates, s, public, plain); err != nil {
		return err
	}
	_, err = fmt.Fprintf(e.stdout, "Tripwell serves %s at %s\nStop it with Ctrl+C.\n", c.Data, here)
	return err
}

// firstLink makes the first manager of a store that has nobody, and a link to sign in. A store whose only person never
// signed in gets a new link, for the first may be lost. Else the token is "".
func firstLink(ctx context.Context, s *store.Store) (string, error) {
	people, err := s.People()
	if err != nil {
		return "", err
	}
	var first store.Person
	switch len(people) {
	case 0:
		first, err = s.PutPerson(ctx, s.ID(), store.Person{Name: "Manager", Role: "manager", All: true, Active: true})
		if err != nil {
			return "", fmt.Errorf("first manager: %w", err)
		}
	case 1:
		first = people[0]
		if signed, err := everSignedIn(s); err != nil || signed {
			return "", err
		}
	default:
		return "", nil
	}
	return s.NewLink(first.ID, firstLinkFor)
}

// everSignedIn looks for a sign-in in the office log. It is asked only while the store knows a single person.
func everSignedIn(s *store.Store) (bool, error) {
	owner := store.Scope{Role: "owner", All: true}
	for after := ""; ; {
		page, err := s.Pull(owner, "office", after, 500)
		if err != nil {
			return false, fmt.Errorf("look for sign-ins: %w", err)
		}
		for _, r := range page.Records {
			var head struct {
				Kind string `json:"kind"`
			}
			if json.Unmarshal([]byte(r.Record), &head) == nil && head.Kind == "signed.in" {
				return true, nil
			}
		}
		if !page.More {
			return false, nil
		}
		after = page.Next
	}
}

// serve answers on the public address and on the owner's socket until the command is told to stop. It greets when both
// are open: what the greeting says can be used at once.
func serve(e *env, s *store.Store, dir string, public net.Listener, o server.Options, greet func() error) error {
	srv, err := server.New(s, o)
	if err != nil {
		return errors.Join(err, public.Close())
	}
	owner, err := server.ListenSocket(dir)
	if err != nil {
		return errors.Join(err, public.Close())
	}
	if err := greet(); err != nil {
		return errors.Join(err, public.Close(), owner.Close())
	}
	return srv.Serve(e.ctx, public, owner)
}

func logTo(e *env, level slog.Level) *slog.Logger {
	return slog.New(slog.NewTextHandler(e.stderr, &slog.HandlerOptions{Level: level}))
}

// listen opens a TCP address and says in words why it cannot.
func listen(addr string) (net.Listener, error) {
	l, err := net.Listen("tcp", addr)
	switch {
	case err == nil:
		return l, nil
	case errors.Is(err, syscall.EADDRINUSE):
		return nil, fmt.Errorf("%s is in use by another program: stop that one, or give another --listen: %w", addr, syscall.EADDRINUSE)
	case errors.Is(err, syscall.EACCES):
		return nil, fmt.Errorf("%s may not be used by you: ports below 1024 are for the system, give a higher one to --listen", addr)
	}
	return nil, fmt.Errorf("cannot listen on %s: %w", addr, err)
}

// localURL is the address of a listener for a browser on this machine.
func localURL(l net.Listener) string {
	host, port, _ := net.SplitHostPort(l.Addr().String())
	if ip := net.ParseIP(host); ip != nil && ip.IsUnspecified() {
		host = "127.0.0.1"
	}
	return "http://" + net.JoinHostPort(host, port)
}

// checkURL holds the label address to https://host.
func checkURL(address string) error {
	if address == "" {
		return nil
	}
	u, err := url.Parse(address)
	if err != nil || !strings.EqualFold(u.Scheme, "https") || u.Host == "" || strings.Trim(u.Path, "/") != "" || u.RawQuery != "" || u.User != nil {
		return usageError{fmt.Errorf("--url %q is no address for labels: write https:// and the name of your server, as https://tests.example.org", address)}
	}
	return nil
}

// absolute names a folder so that it can be copied into another command.
func absolute(dir string) string {
	if abs, err := filepath.Abs(dir); err == nil {
		return abs
	}
	return dir
}
