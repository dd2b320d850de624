package server

import (
	"context"
	"crypto/rand"
	"errors"
	"fmt"
	"io"
	"os"
	"sync"
	"time"

	"tripwell/forms"
	"tripwell/store"
)

// makingArea holds the workbooks and bundles that are made for the office pages: one a person, in a temporary file, never a whole one
// in memory. Few are made at a time; a finished one is kept for makingLife, or until its person wants another.
type makingArea struct {
	mu     sync.Mutex
	of     map[string]*making // by person
	turn   chan struct{}
	ctx    context.Context // ends with the server
	end    context.CancelFunc
	makers sync.WaitGroup
}

const (
	makingLife   = time.Hour
	makingsAtOne = 2
)

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
	err         error
	sending     sync.WaitGroup
}

var errStopped = errors.New("the file is no longer wanted")

func newMakingArea() *makingArea {
	ctx, end := context.WithCancel(context.Background())
	return &makingArea{of: map[string]*making{}, turn: make(chan struct{}, makingsAtOne), ctx: ctx, end: end}
}

// begin makes a file in place of the person's earlier one.
func (a *makingArea) begin(m *making, write maker) {
	ctx, stop := context.WithCancel(a.ctx)
	m.id, m.stop, m.ended = rand.Text(), stop, make(chan struct{})
	a.mu.Lock()
	former := a.of[m.person]
	a.of[m.person] = m
	a.mu.Unlock()
	if former != nil {
		former.drop()
	}
	a.makers.Go(func() {
		defer close(m.ended)
		m.make(ctx, a.turn, write)
		if m.err == nil {
			time.AfterFunc(makingLife, func() { a.forget(m) })
		}
	})
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
func (m *making) make(ctx context.Context, turn chan struct{}, write maker) {
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
	if err := write(ctx, out, func(done, total int) error { return m.progress(ctx, done, total) }); err != nil {
		shut(out)
		m.fail(err)
		return
	}
	size, err := out.Seek(0, io.SeekEnd)
	m.mu.Lock()
	m.out, m.size, m.err = out, size, err
	m.mu.Unlock()
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
	still := a.of[m.person] == m
	if still {
		delete(a.of, m.person)
	}
	a.mu.Unlock()
	if still {
		m.drop()
	}
}

// get gives a person's own making.
func (a *makingArea) get(id, person string) (*making, error) {
	a.mu.Lock()
	defer a.mu.Unlock()
	if m := a.of[person]; m != nil && m.id == id {
		return m, nil
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
	for person, m := range a.of {
		delete(a.of, person)
		m.drop()
	}
}
