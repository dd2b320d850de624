package server

import (
	"io"
	"net"
	"sync"
	"testing"
	"time"
)

// wire is the wire between a phone and the server. Cutting it closes what is open and takes nothing new: browsers that are
// only told to be offline still reach the server through their workers.
type wire struct {
	addr, to string
	mu       sync.Mutex
	listener net.Listener
	open     map[net.Conn]bool
	off      bool
	deafen   bool // the server's answers are lost from now on
}

func newWire(t testing.TB, to string) *wire {
	t.Helper()
	l, err := net.Listen("tcp", "127.0.0.1:0")
	must(t, err)
	x := &wire{addr: l.Addr().String(), to: to, listener: l, open: map[net.Conn]bool{}}
	go x.run()
	t.Cleanup(func() { _ = l.Close(); x.cut() })
	return x
}

func (x *wire) run() {
	for {
		phone, err := x.listener.Accept()
		if err != nil {
			return
		}
		server, err := net.DialTimeout("tcp", x.dest(), 5*time.Second)
		if err != nil || !x.keep(phone, server) {
			_ = phone.Close()
			if server != nil {
				_ = server.Close()
			}
			continue
		}
		go x.pipe(server, phone, false)
		go x.pipe(phone, server, true)
	}
}

// pipe copies one way; answers (from the server) are dropped while the line is deaf.
func (x *wire) pipe(to, from net.Conn, answers bool) {
	defer func() { _ = to.Close(); _ = from.Close(); x.forget(to, from) }()
	b := make([]byte, 32<<10)
	for {
		n, err := from.Read(b)
		if answers && n > 0 && x.isDeaf() {
			return
		}
		if n > 0 {
			if _, err := to.Write(b[:n]); err != nil {
				return
			}
		}
		if err != nil && err != io.EOF || err == io.EOF {
			return
		}
	}
}

func (x *wire) dest() string { x.mu.Lock(); defer x.mu.Unlock(); return x.to }

func (x *wire) isDeaf() bool { x.mu.Lock(); defer x.mu.Unlock(); return x.deafen }

func (x *wire) keep(conns ...net.Conn) bool {
	x.mu.Lock()
	defer x.mu.Unlock()
	if x.off {
		return false
	}
	for _, c := range conns {
		x.open[c] = true
	}
	return true
}

func (x *wire) forget(conns ...net.Conn) {
	x.mu.Lock()
	defer x.mu.Unlock()
	for _, c := range conns {
		delete(x.open, c)
	}
}

// cut ends every connection and takes no new one until mend.
func (x *wire) cut() {
	x.mu.Lock()
	defer x.mu.Unlock()
	x.off = true
	for c := range x.open {
		_ = c.Close()
	}
}

// mend lets everything through again.
func (x *wire) mend() { x.mu.Lock(); defer x.mu.Unlock(); x.off, x.deafen = false, false }

// deaf loses every answer from now on: what was asked still arrives.
func (x *wire) deaf() { x.mu.Lock(); defer x.mu.Unlock(); x.deafen = true }

// lead joins the line to another server.
func (x *wire) lead(to string) {
	x.mu.Lock()
	defer x.mu.Unlock()
	x.to = to
	for c := range x.open {
		_ = c.Close()
	}
}
