package server

import (
	"io"
	"net"
	"sync/atomic"
	"testing"
)

// line is a switchable TCP line between a phone and the server: it really carries and really cuts bytes.
type line struct {
	l       net.Listener
	to      string
	swallow atomic.Bool // answers do not get through: the connection is cut when the first byte of one arrives
	deaf    atomic.Bool // nothing gets to the server: the connection is cut when the first byte of a request arrives
	cuts    atomic.Int64
}

func newLine(t testing.TB, to string) *line {
	t.Helper()
	l, err := net.Listen("tcp", "127.0.0.1:0")
	must(t, err)
	p := &line{l: l, to: to}
	go func() {
		for {
			c, err := l.Accept()
			if err != nil {
				return
			}
			go p.carry(c)
		}
	}()
	t.Cleanup(func() { _ = l.Close() })
	return p
}

func (p *line) url() string { return "http://" + p.l.Addr().String() }

func (p *line) carry(phone net.Conn) {
	defer phone.Close()
	there, err := net.Dial("tcp", p.to)
	if err != nil {
		return
	}
	defer there.Close()
	buf := make([]byte, 32<<10)
	if p.deaf.Load() {
		if n, _ := phone.Read(buf); n > 0 {
			p.cuts.Add(1)
		}
		return
	}
	go func() { _, _ = io.Copy(there, phone) }()
	for {
		n, err := there.Read(buf)
		if n > 0 && p.swallow.Load() {
			p.cuts.Add(1)
			return
		}
		if n > 0 {
			if _, err := phone.Write(buf[:n]); err != nil {
				return
			}
		}
		if err != nil {
			return
		}
	}
}
