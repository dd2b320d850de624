package server

import (
	"bufio"
	"io"
	"net"
	"net/http"
	"strings"
	"testing"
	"time"
)

// Whoever sends slowly to hold connections (headers byte by byte, a body that stops, a handshake never finished) is cut off;
// the limits of the public face are set, and these are the same ones, shortened.
func TestServe_SlowSendersAreCutOff(t *testing.T) {
	r := newRig(t, 0)
	a, err := OpenAuthority(r.store, nil, time.Now)
	must(t, err)
	for name, try := range map[string]struct {
		secure bool
		sends  string
	}{
		"half a header":      {false, "GET /in HTTP/1.1\r\nHost: x\r\nX-"},
		"half a body":        {false, "POST /in HTTP/1.1\r\nHost: x\r\nContent-Length: 100\r\n\r\nlink="},
		"half a handshake":   {true, "\x16\x03\x01"},
		"silence afterwards": {false, "GET /in HTTP/1.1\r\nHost: x\r\n\r\n"},
	} {
		t.Run(name, func(t *testing.T) {
			o := Options{}
			if try.secure {
				o.Certificates = a
			}
			srv, err := New(r.store, o)
			must(t, err)
			l, err := net.Listen("tcp", "127.0.0.1:0")
			must(t, err)
			for front := range srv.faces(l, nil) {
				for _, limit := range []*time.Duration{&front.ReadHeaderTimeout, &front.ReadTimeout, &front.IdleTimeout} {
					if *limit <= 0 || *limit > 5*time.Minute {
						t.Errorf("a limit of the public face is %v", *limit)
					}
					*limit = 200 * time.Millisecond
				}
				if front.WriteTimeout <= 0 {
					t.Error("a reader that stops is never cut off")
				}
				defer front.Close()
				go func() {
					if try.secure {
						_ = front.ServeTLS(l, "", "")
						return
					}
					_ = front.Serve(l)
				}()
			}
			c, err := net.Dial("tcp", l.Addr().String())
			must(t, err)
			defer c.Close()
			_, err = io.WriteString(c, try.sends)
			must(t, err)
			must(t, c.SetReadDeadline(time.Now().Add(30*time.Second)))
			if _, err := io.Copy(io.Discard, c); err != nil && strings.Contains(err.Error(), "timeout") {
				t.Error("the server holds the connection for 30 s")
			}
		})
	}
}

func TestServe_HeadersAreLimited(t *testing.T) {
	r := newRig(t, 0)
	c, err := net.Dial("tcp", strings.TrimPrefix(r.url, "http://"))
	must(t, err)
	defer c.Close()
	go func() { // the server may answer and close before all of it is sent
		_, _ = io.WriteString(c, "GET /in HTTP/1.1\r\nHost: x\r\nX-Long: "+strings.Repeat("a", 4*maxHeaderBytes)+"\r\n\r\n")
	}()
	res, err := http.ReadResponse(bufio.NewReader(c), nil)
	must(t, err)
	defer res.Body.Close()
	if res.StatusCode != http.StatusRequestHeaderFieldsTooLarge {
		t.Errorf("got %d, want 431", res.StatusCode)
	}
}
