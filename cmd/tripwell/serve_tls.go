package main

import (
	"errors"
	"fmt"
	"io"
	"log/slog"
	"net"
	"net/netip"
	"net/url"
	"slices"
	"strconv"
	"strings"
	"time"

	"tripwell/server"
	"tripwell/store"
)

// tlsFlags say how browsers reach the public address: with certificates of files, of an ACME authority or of the house's
// own, or through a proxy that has them.
type tlsFlags struct {
	Cert   string   `name:"tls-cert" placeholder:"FILE" help:"Certificate and what leads to its root (PEM); read again when it changes."`
	Key    string   `name:"tls-key" placeholder:"FILE" help:"Key of the certificate (PEM)."`
	Mode   string   `name:"tls" placeholder:"auto|local" help:"auto: certificates of an ACME authority, for public names; accepts its terms. local: of an authority of this folder's own, for names and addresses in the house."`
	Names  []string `name:"name" placeholder:"NAME" help:"Name or address phones use, beside the one of --url and this machine's own; may be repeated."`
	Plain  string   `name:"plain" placeholder:"ADDR" help:"Where plain http is answered beside https: the page that tells how to trust this server, an ACME authority's question, the way to https. Port 80 where --listen has 443; with --tls local else the next port."`
	Behind []string `name:"behind" placeholder:"CIDR" help:"Addresses of proxies that are believed when they say where a request came from, as 127.0.0.1 or 10.0.0.0/8; may be repeated."`
	ACME   string   `name:"acme-directory" placeholder:"URL" help:"Directory of another ACME authority than Let's Encrypt."`
	Mail   string   `name:"acme-mail" placeholder:"ADDRESS" help:"Where the ACME authority may write to."`
}

const (
	tlsAuto  = "auto"
	tlsLocal = "local"
)

// check refuses flags that do not go together.
func (f tlsFlags) check() error {
	wrong := func(text string, args ...any) error { return usageError{fmt.Errorf(text, args...)} }
	files := f.Cert != "" || f.Key != ""
	switch {
	case f.Mode != "" && f.Mode != tlsAuto && f.Mode != tlsLocal:
		return wrong("--tls %q is not known: give auto or local, or a certificate of your own with --tls-cert and --tls-key", f.Mode)
	case files && (f.Cert == "" || f.Key == ""):
		return wrong("a certificate needs its key: give both --tls-cert and --tls-key")
	case files && f.Mode != "":
		return wrong("--tls %s makes certificates by itself: leave out --tls-cert and --tls-key, or --tls", f.Mode)
	case f.Plain != "" && !files && f.Mode == "":
		return wrong("--plain is for http beside https: give --tls or --tls-cert too, or leave it out")
	case len(f.Names) > 0 && f.Mode == "":
		return wrong("--name is for --tls auto and --tls local: a certificate of your own has its names already")
	case (f.ACME != "" || f.Mail != "") && f.Mode != tlsAuto:
		return wrong("--acme-directory and --acme-mail are for --tls auto")
	}
	_, err := f.proxies()
	return err
}

// proxies reads --behind.
func (f tlsFlags) proxies() ([]netip.Prefix, error) {
	var out []netip.Prefix
	for _, text := range f.Behind {
		p, err := netip.ParsePrefix(text)
		if addr, errAddr := netip.ParseAddr(text); errAddr == nil {
			p, err = netip.PrefixFrom(addr, addr.BitLen()), nil
		}
		if err != nil {
			return nil, usageError{fmt.Errorf("--behind %q is no address and no range: write it as 127.0.0.1 or 10.0.0.0/8", text)}
		}
		out = append(out, p.Masked())
	}
	return out, nil
}

func (f tlsFlags) on() bool { return f.Mode != "" || f.Cert != "" }

// plainAddr is where http is answered, "" for nowhere.
func (f tlsFlags) plainAddr(listen string) string {
	host, port, err := net.SplitHostPort(listen)
	n, errPort := strconv.Atoi(port)
	switch {
	case !f.on() || f.Plain != "":
		return f.Plain
	case err == nil && (port == "443" || port == "https"):
		return net.JoinHostPort(host, "80")
	case err == nil && errPort == nil && f.Mode == tlsLocal && n > 0:
		return net.JoinHostPort(host, strconv.Itoa(n+1))
	case err == nil && f.Mode == tlsLocal:
		return net.JoinHostPort(host, "0")
	}
	return ""
}

// certificates opens what the flags ask for; nil where none is asked for.
func (f tlsFlags) certificates(s *store.Store, log *slog.Logger) (server.Certificates, error) {
	names := slices.Clone(f.Names)
	if u, err := url.Parse(s.URL()); err == nil && u.Hostname() != "" {
		names = append(names, strings.ToLower(u.Hostname()))
	}
	switch {
	case f.Mode == tlsLocal:
		return server.OpenAuthority(s, names, time.Now)
	case f.Mode == tlsAuto:
		return server.NewPublicNames(s, names, server.ACME{Directory: f.ACME, Mail: f.Mail})
	case f.Cert != "":
		return server.ReadCertificateFiles(f.Cert, f.Key, time.Now, log)
	}
	return nil, nil
}

// greet says what people have to do before phones trust the server.
func (f tlsFlags) greet(w io.Writer, c server.Certificates, s *store.Store, public, plain net.Listener) error {
	var err error
	switch c := c.(type) {
	case nil:
		if host, _, _ := net.SplitHostPort(public.Addr().String()); !net.ParseIP(host).IsLoopback() && len(f.Behind) == 0 {
			_, err = fmt.Fprint(w, "Other machines sign in over https only: give --tls local, --tls auto or a certificate, or put a web server with one in front of this address.\n\n")
		}
	case *server.Authority:
		made := "This folder's own authority"
		if c.Made {
			made = "An authority was made for this folder:"
		}
		_, err = fmt.Fprintf(w, "%s %q. Each phone is told once to trust it, at\n\n  trust     %s\n\nCompare the fingerprint a phone shows with this one (SHA-256):\n\n  %s\n\n", made, c.Name(), plainURL(plain, c.Hosts()), c.Fingerprint())
	case *server.CertificateFiles:
		u, parsed := url.Parse(s.URL())
		if parsed == nil && u.Hostname() != "" {
			if wrong := c.Covers(strings.ToLower(u.Hostname())); wrong != nil {
				_, err = fmt.Fprintf(w, "The certificate is not for %s, the address on labels: phones that open a label will refuse it.\n\n", u.Hostname())
			}
		}
	}
	return err
}

// plainURL is an address of the page about trust that other machines reach.
func plainURL(plain net.Listener, hosts []string) string {
	host, port, _ := net.SplitHostPort(plain.Addr().String())
	if ip := net.ParseIP(host); ip != nil && ip.IsUnspecified() {
		host = "127.0.0.1"
		for _, name := range hosts {
			if name != "localhost" && !net.ParseIP(name).IsLoopback() {
				host = name
				break
			}
		}
	}
	if port == "80" {
		return "http://" + host + "/"
	}
	return "http://" + net.JoinHostPort(host, port) + "/"
}

// listenPlain opens the address for http, nil where none is asked for.
func (f tlsFlags) listenPlain(listenAt string) (net.Listener, error) {
	at := f.plainAddr(listenAt)
	if at == "" {
		return nil, nil
	}
	if _, _, err := net.SplitHostPort(at); err != nil {
		return nil, usageError{fmt.Errorf("--plain %q is no address with a port: write it as 0.0.0.0:80", at)}
	}
	l, err := listen(at)
	if err != nil {
		return nil, errors.Join(fmt.Errorf("for plain http (--plain): %w", err))
	}
	return l, nil
}
