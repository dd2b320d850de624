package server

import (
	"bufio"
	"context"
	"fmt"
	"net"
	"net/http"
	"strings"
	"testing"
	"time"

	"tripwell/store"
)

// A push whose body is still arriving when the server is told to stop is taken and answered.
func TestServe_FinishesWhatIsUnderWay(t *testing.T) {
	r := newRig(t, 1)
	h := r.handset(r.crew)
	l, err := net.Listen("tcp", "127.0.0.1:0")
	must(t, err)
	ctx, stop := context.WithCancel(t.Context())
	ended := make(chan error, 1)
	go func() { ended <- r.server.Serve(ctx, l, nil) }()

	rec := h.entry(r.devices[0], 4.5)
	body := pushBody(t, rec.bytes(t))
	c, err := net.Dial("tcp", l.Addr().String())
	must(t, err)
	defer c.Close()
	fmt.Fprintf(c, "POST /exchange/push HTTP/1.1\r\nHost: %s\r\nAuthorization: Bearer %s\r\nContent-Length: %d\r\n\r\n%s", l.Addr(), h.token, len(body), body[:len(body)/2])
	time.Sleep(50 * time.Millisecond) // the handler is reading by now
	stop()
	time.Sleep(50 * time.Millisecond)
	_, err = c.Write(body[len(body)/2:])
	must(t, err)
	res, err := http.ReadResponse(bufio.NewReader(c), nil)
	must(t, err)
	defer res.Body.Close()
	if res.StatusCode != http.StatusOK {
		t.Errorf("got %d, want 200", res.StatusCode)
	}
	must(t, <-ended)
	must(t, r.store.View(ownerScope, func(v *store.View) error { _, _, err := v.Record(rec.ID); return err }))
	if _, err := net.Dial("tcp", l.Addr().String()); err == nil {
		t.Error("the server still listens")
	}
}

func TestPages_HostileTextStaysText(t *testing.T) {
	s, err := New(nil, Options{})
	must(t, err)
	hostile := `"><script>alert(1)</script>{{.}}`
	frame := Frame{Title: hostile, Name: hostile, Role: "crew", Demo: true}
	for name, view := range map[string]any{
		"signin.html":      askPage{Frame: frame, Next: hostile, Problem: hostile},
		"signin_link.html": linkPage{Frame: frame, Person: hostile, Action: "javascript:alert(1)", Next: hostile},
		"error.html":       errorPage{Frame: frame, Text: hostile},
		"field.html":       shellPage{Frame: frame, Secure: hostile},
	} {
		for _, v := range []any{view, empty(view)} {
			var b strings.Builder
			if err := s.pages[name].Execute(&b, v); err != nil {
				t.Errorf("%s: %v", name, err)
			}
			for _, bad := range []string{"<script>alert", `action="javascript:`, "access.", "style=", "onclick"} {
				if strings.Contains(b.String(), bad) {
					t.Errorf("%s holds %q", name, bad)
				}
			}
		}
	}
}

func empty(view any) any {
	switch view.(type) {
	case askPage:
		return askPage{}
	case linkPage:
		return linkPage{}
	case errorPage:
		return errorPage{}
	}
	return shellPage{}
}
