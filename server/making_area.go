package server

import (
	"context"
	"crypto/rand"
	"errors"
	"fmt"
	"io"
	"os"
	"slices"
	"sync"
	"time"

	"tripwell/forms"
	"tripwell/store"
)

// makingArea holds the workbooks and bundles that are made for the office pages: one of each a person, in a temporary file, never a
// whole one in memory. Few are made at a time; a finished one is kept for makingLife, until its person wants another or no longer wants
// it, or until the disk is wanted for newer ones.
type makingArea struct {
	mu     sync.Mutex
	of     map[makingKey]*making
	kept   []*making // finished, oldest first
	room   int64     // bytes that finished ones may take, and one that is being made
	turn   chan struct{}
	ctx    context.Context // ends with the server
	end    context.CancelFunc
	makers sync.WaitGroup
}

const (
	makingLife   = 24 * time.Hour
	makingsAtOne = 2
	makingRoom   = 4 << 30
)

// makingKey says whose making it is and of what.
type makingKey struct {
	person string
	kind   madeKind
}

// madeKind is what can be made: where its page stands, how it is sent, and which words speak of it.
type madeKind struct{ path, mime, words string }

var (
	madeWorkbook = madeKind{"/workbook/", workbookKind, "office.downloads.made_workbook."}
	madeBundle   = madeKind{"/bundle/", zipKind, "office.downloads.made_bundle."}
)

// maker writes a file, and stops where its progress or its context says so.
type maker func(ctx context.Context, w io.Writer, progress func(done, total int) error) error

// making is one file and how far it is. What is asked is never changed.
type making struct {
	kind             madeKind
	id, person, file string    // file is the name it is sent under
	site             string    // in words
	from, to         forms.Day // of its entries
	scope            store.Scope
	stop             context.CancelFunc
	ended            chan struct{} // closed when it is made, or cannot be

	mu          sync.Mutex
	begun, told bool // told: the page has sent the file once
	done, total int
	out         *os.File
	size        int64
	until       time.Time // when a finished one is let go of
	err         error
	sending     sync.WaitGroup
}

var errStopped = errors.New("the file is no longer wanted")

func newMakingArea() *makingArea {
	ctx, end := context.WithCancel(context.Background())
	return &makingArea{of: map[makingKey]*making{}, room: makingRoom, turn: make(chan struct{}, makingsAtOne), ctx: ctx, end: end}
}

func (m *making) key() makingKey { return makingKey{m.person, m.kind} }

// begin makes a file in place of the person's earlier one of its kind.
func (a *makingArea) begin(m *making, write maker) {
	ctx, stop := context.WithCancel(a.ctx)
	m.id, m.stop, m.ended = rand.Text(), stop, make(chan struct{})
	a.mu.Lock()
	former := a.of[m.key()]
	a.mu.Unlock()
	if former != nil {
		a.forget(former)
	}
	a.mu.Lock()
	a.of[m.key()] = m
	a.mu.Unlock()
	a.makers.Go(func() {
		defer close(m.ended)
		m.make(ctx, a.turn, a.room, write)
		if m.err == nil {
			time.AfterFunc(makingLife, func() { a.forget(m) })
			a.keep(m)
		}
	})
}

// keep notes a finished file, and lets go of the oldest where they take more room than there is.
func (a *makingArea) keep(m *making) {
	a.mu.Lock()
	a.kept = append(a.kept, m)
	left := a.room
	for _, k := range a.kept {
		left -= k.size
	}
	var over []*making
	for _, k := range a.kept[:len(a.kept)-1] {
		if left >= 0 {
			break
		}
		left += k.size
		over = append(over, k)
	}
	a.mu.Unlock()
	for _, k := range over {
		a.forget(k)
	}
}

// ofPerson gives what is made or kept for somebody.
func (a *makingArea) ofPerson(person string) (list []*making) {
	a.mu.Lock()
	defer a.mu.Unlock()
	for _, kind := range []madeKind{madeWorkbook, madeBundle} {
		if m := a.of[makingKey{person, kind}]; m != nil {
			list = append(list, m)
		}
	}
	return list
}

func (m *making) progress(ctx context.Context, done, total int) error {
	m.mu.Lock()
	m.done, m.total = done, max(done, total)
	m.mu.Unlock()
	if ctx.Err() != nil {
		return errStopped
	}
	return nil
}

// make waits for its turn and writes the file. The file has no name: what a stopped program leaves behind is nothing.
func (m *making) make(ctx context.Context, turn chan struct{}, room int64, write maker) {
	select {
	case turn <- struct{}{}:
		defer func() { <-turn }()
	case <-ctx.Done():
		m.fail(errStopped)
		return
	}
	m.mu.Lock()
	m.begun = true
	m.mu.Unlock()
	out, err := os.CreateTemp("", "tripwell-download-")
	if err != nil {
		m.fail(fmt.Errorf("temporary file for a download: %w", err))
		return
	}
	_ = os.Remove(out.Name()) // where an open file cannot be removed, shut removes it
	if err := write(ctx, &roomWriter{out, room}, func(done, total int) error { return m.progress(ctx, done, total) }); err != nil {
		shut(out)
		m.fail(err)
		return
	}
	size, err := out.Seek(0, io.SeekEnd)
	m.mu.Lock()
	m.out, m.size, m.err, m.until = out, size, err, time.Now().Add(makingLife)
	m.mu.Unlock()
}

// roomWriter refuses what is larger than the room there is.
type roomWriter struct {
	to   io.Writer
	left int64
}

func (w *roomWriter) Write(b []byte) (int, error) {
	if w.left -= int64(len(b)); w.left < 0 {
		return 0, refuse(codeTooLarge, "", "The file is larger than is kept here. Make it of fewer sites, or write it on the server with the command.")
	}
	return w.to.Write(b)
}

func shut(f *os.File) {
	f.Close()
	os.Remove(f.Name())
}

func (m *making) fail(err error) {
	m.mu.Lock()
	m.err = err
	m.mu.Unlock()
}

// drop stops a making and lets go of its file once nobody is sent it any more.
func (m *making) drop() {
	m.stop()
	go func() {
		<-m.ended
		m.mu.Lock()
		out := m.out
		m.out = nil
		m.mu.Unlock()
		m.sending.Wait()
		if out != nil {
			shut(out)
		}
	}()
}

// forget drops a making that is still its person's.
func (a *makingArea) forget(m *making) {
	a.mu.Lock()
	still := a.of[m.key()] == m
	if still {
		delete(a.of, m.key())
	}
	a.kept = slices.DeleteFunc(a.kept, func(k *making) bool { return k == m })
	a.mu.Unlock()
	if still {
		m.drop()
	}
}

// get gives a person's own making.
func (a *makingArea) get(id, person string) (*making, error) {
	a.mu.Lock()
	defer a.mu.Unlock()
	for _, m := range a.of {
		if m.person == person && m.id == id {
			return m, nil
		}
	}
	return nil, errNoMaking
}

var errNoMaking = refuse(codeNotFound, "", "This file is no longer kept here. Make it again on the downloads page.")

// open gives the finished file to be read from its beginning; the caller calls done afterwards.
func (m *making) open() (file io.Reader, size int64, done func(), err error) {
	m.mu.Lock()
	defer m.mu.Unlock()
	if m.out == nil {
		return nil, 0, nil, errNoMaking
	}
	m.sending.Add(1)
	return io.NewSectionReader(m.out, 0, m.size), m.size, m.sending.Done, nil
}

// close stops all makings and lets go of their files.
func (a *makingArea) close() {
	a.end()
	a.makers.Wait()
	a.mu.Lock()
	defer a.mu.Unlock()
	for key, m := range a.of {
		delete(a.of, key)
		m.drop()
	}
}
