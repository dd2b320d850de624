package server

import (
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"log/slog"
	"net"
	"net/http"
	"net/url"
	"os"
	"sync"
	"syscall"

	"tripwell/store"
)

// Door is a command's way to the owner's face: through the socket of the server that runs on the folder, or in this
// process on a store opened for the command. Either way the same handlers answer, so a command has one path.
type Door struct {
	client *http.Client
	beside bool
	close  func() error
}

// OpenDoor asks the folder's socket first; where none answers it opens the store with open and closes it again in Close.
func OpenDoor(ctx context.Context, dir string, open func() (*store.Store, error)) (*Door, error) {
	path, err := socketPath(dir)
	if err != nil {
		return nil, fmt.Errorf("owner's door: %w", err)
	}
	var dialer net.Dialer
	dial := func(ctx context.Context, _, _ string) (net.Conn, error) { return dialer.DialContext(ctx, "unix", path) }
	conn, err := dial(ctx, "", "")
	switch {
	case err == nil:
		_ = conn.Close()
		t := &http.Transport{DialContext: dial}
		return &Door{client: &http.Client{Transport: t}, beside: true, close: func() error { t.CloseIdleConnections(); return nil }}, nil
	case errors.Is(err, fs.ErrPermission):
		return nil, refuse(codeForbidden, "", "The server on this folder belongs to another user of this machine. Run the command as that user.")
	case !errors.Is(err, fs.ErrNotExist) && !errors.Is(err, syscall.ECONNREFUSED) && !errors.Is(err, syscall.EINVAL):
		return nil, fmt.Errorf("owner's door: %w", err)
	}
	s, err := open()
	if err != nil {
		return nil, err
	}
	return inside(s)
}

// inside serves the owner's face within this process over pipes, which stream and cancel as a socket does.
func inside(s *store.Store) (*Door, error) {
	// Nobody else keeps a log here: what a reference stands for goes to standard error.
	faults := slog.New(slog.NewTextHandler(os.Stderr, &slog.HandlerOptions{Level: slog.LevelError}))
	srv, err := New(s, Options{Alone: true, Log: faults})
	if err != nil {
		return nil, errors.Join(err, s.Close())
	}
	pipes := newPipes()
	web := &http.Server{Handler: srv.OwnerHandler(), ReadHeaderTimeout: readHeaderTimeout}
	ended := make(chan error, 1)
	go func() { ended <- web.Serve(pipes) }()
	t := &http.Transport{DialContext: pipes.dial, DisableCompression: true}
	return &Door{client: &http.Client{Transport: t}, close: func() error {
		t.CloseIdleConnections()
		// Shutdown waits for handlers, which hold read transactions that Close of the store would wait for anyway.
		err := web.Shutdown(context.Background())
		<-ended
		return errors.Join(err, s.Close())
	}}, nil
}

// Beside reports whether a running server answers.
func (d *Door) Beside() bool { return d.beside }

// Close closes the store where this door opened it.
func (d *Door) Close() error { return d.close() }

// Ask sends one request to the owner's face ("/own/due") and gives the body of the answer, which the caller closes. An
// answer that is a refusal comes back as *store.Error.
func (d *Door) Ask(ctx context.Context, method, path string, query url.Values, body io.Reader) (io.ReadCloser, error) {
	address := url.URL{Scheme: "http", Host: "tripwell", Path: path, RawQuery: query.Encode()}
	req, err := http.NewRequestWithContext(ctx, method, address.String(), body)
	if err != nil {
		return nil, fmt.Errorf("ask %s: %w", path, err)
	}
	res, err := d.client.Do(req)
	if err != nil {
		return nil, fmt.Errorf("ask %s: %w", path, err)
	}
	if res.StatusCode == http.StatusOK {
		return res.Body, nil
	}
	defer res.Body.Close()
	var wrong wrongBody
	if err := json.NewDecoder(io.LimitReader(res.Body, 64<<10)).Decode(&wrong); err != nil || wrong.Error.Text == "" {
		return nil, fmt.Errorf("ask %s: the server answered %s", path, res.Status)
	}
	return nil, wrong.Error.refusal()
}

// Follow sends a request that takes long: progress (may be nil) hears how far it is, report takes the last line.
func (d *Door) Follow(ctx context.Context, method, path string, query url.Values, body io.Reader, progress func(done, total int64), report any) error {
	lines, err := d.Ask(ctx, method, path, query, body)
	if err != nil {
		return err
	}
	defer lines.Close()
	dec := json.NewDecoder(lines)
	for {
		var line struct {
			workLine
			Report json.RawMessage `json:"report"`
		}
		if err := dec.Decode(&line); err != nil {
			return fmt.Errorf("ask %s: the answer broke off: %w", path, err)
		}
		switch {
		case line.Error != nil:
			return line.Error.refusal()
		case line.Report != nil:
			return json.Unmarshal(line.Report, report)
		case line.Progress != nil && progress != nil:
			progress(line.Progress.Done, line.Progress.Total)
		}
	}
}

// refusal is a wire error as the store's own kind, so that a command treats both alike.
func (w Wrong) refusal() error { return &store.Error{Code: w.Code, Field: w.Field, Text: w.Text} }

// pipes is a listener whose connections begin in the same process.
type pipes struct {
	conns chan net.Conn
	gone  chan struct{}
	once  sync.Once
}

func newPipes() *pipes { return &pipes{conns: make(chan net.Conn), gone: make(chan struct{})} }

func (p *pipes) dial(ctx context.Context, _, _ string) (net.Conn, error) {
	here, there := net.Pipe()
	select {
	case p.conns <- there:
		return here, nil
	case <-p.gone:
		return nil, net.ErrClosed
	case <-ctx.Done():
		return nil, ctx.Err()
	}
}

func (p *pipes) Accept() (net.Conn, error) {
	select {
	case c := <-p.conns:
		return c, nil
	case <-p.gone:
		return nil, net.ErrClosed
	}
}

func (p *pipes) Close() error   { p.once.Do(func() { close(p.gone) }); return nil }
func (p *pipes) Addr() net.Addr { return pipeAddr{} }

type pipeAddr struct{}

func (pipeAddr) Network() string { return "pipe" }
func (pipeAddr) String() string  { return "pipe" }
