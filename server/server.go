// Package server is Tripwell over HTTP: sign-in, the office pages, the exchange with phones, and the owner's door that
// the commands use. It decides who may ask and how an answer is sent; what is true is decided in store and forms.
//
// It has two faces. Handler is the public one (routes.go, first table); OwnerHandler is for whoever may open the
// folder's socket, who acts as owner (second table). A handler decodes, asks the store within the caller's scope,
// builds and responds; it returns an error instead of writing one (fail.go is the only place that does).
//
// Pages lie in server/pages, outside the embedded files that a browser may fetch, so a template can never be downloaded.
package server

import (
	"context"
	"errors"
	"fmt"
	"html/template"
	"log/slog"
	"net"
	"net/http"
	"net/netip"
	"sync"
	"sync/atomic"
	"time"

	"github.com/labstack/echo/v4"

	"tripwell/static"
	"tripwell/store"
)

// Options of New.
type Options struct {
	Log *slog.Logger // nil: nothing is logged
	// Alone says that no public face is served beside the owner's: a command opened the store by itself. Only then may
	// the read models be rebuilt.
	Alone bool
	// Certificates are for TLS of the server's own; nil: the public address is answered over plain http.
	Certificates Certificates
	// Plain is where http is answered beside TLS; nil: nowhere. Serve closes it.
	Plain net.Listener
	// Behind are the addresses of proxies whose word is taken for where a request came from.
	Behind []netip.Prefix
}

// Server serves one store.
type Server struct {
	store   *store.Store
	log     *slog.Logger
	alone   bool
	words   *static.Words
	assets  *assets
	pages   map[string]*template.Template
	cross   *http.CrossOriginProtection
	wrong   *wrongLinks
	seen    seenOnce
	image   atomic.Pointer[store.Image] // the backup that is being taken away
	drawing sync.Mutex                  // pictures are drawn anew one at a time
	imports *importArea                 // registers
	results *importArea                 // tests made elsewhere
	makings *makingArea                 // workbooks for the office pages
	guesses *guesses

	certificates Certificates
	plain        net.Listener
	behind       []netip.Prefix
	port         string // of the public address, once it is served
}

// New reads the pages, the words and the files for browsers; all of them are embedded, so an error is a fault of the build.
func New(s *store.Store, o Options) (*Server, error) {
	words, err := static.ReadWords("en")
	if err != nil {
		return nil, err
	}
	srv := &Server{store: s, log: o.Log, alone: o.Alone, words: words, cross: http.NewCrossOriginProtection(), wrong: newWrongLinks(), guesses: newGuesses(), imports: newImportArea(), results: newImportArea(), makings: newMakingArea(),
		certificates: o.Certificates, plain: o.Plain, behind: o.Behind}
	if srv.log == nil {
		srv.log = slog.New(slog.DiscardHandler)
	}
	if srv.assets, err = readAssets(static.Files); err != nil {
		return nil, err
	}
	if srv.pages, err = srv.readPages(); err != nil {
		return nil, err
	}
	return srv, nil
}

// Handler is the public face.
func (s *Server) Handler() http.Handler { return s.arrived(s.face(publicRoutes())) }

// OwnerHandler is the face of whoever may open the folder's socket. It asks for no sign-in: the socket's mode is the lock.
func (s *Server) OwnerHandler() http.Handler { return s.face(ownerRoutes()) }

func (s *Server) face(table []route) http.Handler {
	e := echo.New()
	e.HideBanner, e.HidePort = true, true
	e.HTTPErrorHandler = s.fail
	e.IPExtractor = echo.ExtractIPDirect()
	e.Use(s.logged, s.recovered, s.headers, s.secured)
	for _, r := range table {
		e.Add(r.method, r.path, s.guard(r))
	}
	return e
}

// Time-outs of the public face. A phone on one bar of signal may take a minute to send half a megabyte; downloads move
// their own write deadline on as long as bytes flow (respond.go).
const (
	readHeaderTimeout = 5 * time.Second
	readTimeout       = 2 * time.Minute
	writeTimeout      = 2 * time.Minute
	idleTimeout       = 2 * time.Minute
	stopTimeout       = 10 * time.Second
	maxHeaderBytes    = 16 << 10
)

// front serves browsers and phones.
func (s *Server) front(h http.Handler) *http.Server {
	return &http.Server{
		Handler: h, ReadHeaderTimeout: readHeaderTimeout, ReadTimeout: readTimeout, WriteTimeout: writeTimeout,
		IdleTimeout: idleTimeout, MaxHeaderBytes: maxHeaderBytes, ErrorLog: slog.NewLogLogger(s.log.Handler(), slog.LevelDebug),
	}
}

// faces are the servers of all listeners. owner may be nil.
func (s *Server) faces(public, owner net.Listener) map[*http.Server]net.Listener {
	_, s.port, _ = net.SplitHostPort(public.Addr().String())
	front := s.front(s.Handler())
	servers := map[*http.Server]net.Listener{front: public}
	if s.certificates != nil {
		front.TLSConfig = s.certificates.config()
		if s.plain != nil {
			servers[s.front(s.certificates.plain(s, s.port))] = s.plain
		}
	}
	if owner != nil {
		// No write time-out: a check of a large book may think for minutes before its last line.
		servers[&http.Server{Handler: s.OwnerHandler(), ReadHeaderTimeout: readHeaderTimeout, IdleTimeout: idleTimeout, MaxHeaderBytes: maxHeaderBytes}] = owner
	}
	return servers
}

// Serve answers on all listeners until ctx ends, then finishes what is under way (at most 10 s). owner may be nil.
// It closes the listeners.
func (s *Server) Serve(ctx context.Context, public, owner net.Listener) error {
	servers := s.faces(public, owner)
	beside, stopBeside := context.WithCancel(ctx)
	var working sync.WaitGroup
	working.Go(func() { s.signHeads(beside) })
	ended := make(chan error, len(servers))
	go s.remind(ctx)
	for srv, l := range servers {
		go func() {
			if srv.TLSConfig != nil {
				ended <- srv.ServeTLS(l, "", "")
				return
			}
			ended <- srv.Serve(l)
		}()
	}
	var failed error
	select {
	case <-ctx.Done():
	case failed = <-ended:
		failed = fmt.Errorf("serve: %w", failed)
	}
	stop, cancel := context.WithTimeout(context.Background(), stopTimeout)
	defer cancel()
	for srv := range servers {
		if err := srv.Shutdown(stop); err != nil && !errors.Is(err, http.ErrServerClosed) {
			s.log.Warn("stopped in the middle of an answer", "err", err)
			_ = srv.Close()
		}
	}
	stopBeside()
	working.Wait()
	s.makings.close()
	return failed
}
