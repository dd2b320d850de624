package server

import (
	"context"
	"crypto/rand"
	"slices"
	"sync"
	"time"

	"tripwell/export/register"
	"tripwell/export/results"
)

// importArea keeps the files managers are working on, in memory: nothing of them reaches the book before it is imported,
// and a wrong press loses nothing. It is bounded: one file a person, the oldest give way, none outlives importLife.
type importArea struct {
	mu      sync.Mutex
	uploads []*upload     // oldest first
	turn    chan struct{} // one file is taken apart at a time: a large one takes a hundred times its size
}

// upload is one file and what was said about it. What it points to is never changed, only replaced.
type upload struct {
	id, person, name string
	raw              []byte
	mapping          register.Mapping
	newTags          bool
	note             string // what happened last, said once on the page
	came             time.Time
	kept             []byte // how an earlier file was read, as it was kept
	said             string // what the file is, where the page asks
	done             *register.Report
	rejects          []register.Reject
	ask              results.Ask // of tests made elsewhere, and what became of them
	taken            *results.Report
	shapes           map[string]bool // of the rows that could be its headings
	keptAs           string          // the name its columns were read by, or kept under
}

const (
	uploadBytes = 10 << 20
	areaBytes   = 64 << 20
	importLife  = 4 * time.Hour
)

func newImportArea() *importArea {
	return &importArea{turn: make(chan struct{}, 1)}
}

// put keeps a file, in place of the person's earlier one.
func (a *importArea) put(u upload, now time.Time) string {
	a.mu.Lock()
	defer a.mu.Unlock()
	u.id, u.came = rand.Text(), now
	a.uploads = slices.DeleteFunc(a.uploads, func(o *upload) bool { return o.person == u.person || now.Sub(o.came) > importLife })
	total := len(u.raw)
	for _, o := range a.uploads {
		total += len(o.raw)
	}
	for total > areaBytes && len(a.uploads) > 0 {
		total -= len(a.uploads[0].raw)
		a.uploads = a.uploads[1:]
	}
	a.uploads = append(a.uploads, &u)
	return u.id
}

// get gives a person's own file.
func (a *importArea) get(id, person string, now time.Time) (upload, error) {
	a.mu.Lock()
	defer a.mu.Unlock()
	for _, u := range a.uploads {
		if u.id == id && u.person == person && now.Sub(u.came) <= importLife {
			return *u, nil
		}
	}
	return upload{}, refuse(codeNotFound, "", "This file is no longer kept here. Choose it again and start over; what was imported is in.")
}

// change replaces what is kept of a file that is still there.
func (a *importArea) change(u upload) {
	a.mu.Lock()
	defer a.mu.Unlock()
	for i, o := range a.uploads {
		if o.id == u.id && o.person == u.person {
			a.uploads[i] = &u
		}
	}
}

// noted takes back the sentence a page has just said.
func (a *importArea) noted(u upload) {
	if u.note != "" {
		u.note = ""
		a.change(u)
	}
}

// take waits for the turn to take a file apart; the caller calls done afterwards.
func (a *importArea) take(ctx context.Context) (done func(), err error) {
	select {
	case a.turn <- struct{}{}:
		return func() { <-a.turn }, nil
	case <-ctx.Done():
		return nil, ctx.Err()
	}
}
