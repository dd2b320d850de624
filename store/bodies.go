package store

import (
	"sync"
	"sync/atomic"

	"tripwell/forms"
	"tripwell/store/record"
)

// bodies are those entries said lately: most button tests of a kind of device say the same, word for word, so each is
// read and judged once, by whoever meets it first. A body that several entries share is never changed; the verdict noted
// with it is put in its place whole.
type bodies struct {
	mu           sync.RWMutex
	newer, older map[string]*entryBody
}

// bodiesMost bounds each half of what is held; measured values make bodies that never come again, and push out nothing
// that is still being said.
const bodiesMost = 512

func newBodies() *bodies { return &bodies{newer: map[string]*entryBody{}} }

// read decodes the body of an entry, or takes the one that says the same.
func (b *bodies) read(r *record.Record) {
	if r.Kind != "entry.made" {
		readAhead(r)
		return
	}
	b.mu.RLock()
	body, kept := b.newer[string(r.Body)]
	if !kept {
		body = b.older[string(r.Body)]
	}
	b.mu.RUnlock()
	if body == nil {
		readAhead(r)
		body, _ = r.Read.(*entryBody)
	}
	if body == nil {
		return
	}
	r.Read = body
	if !kept {
		b.keep(string(r.Body), body)
	}
}

func (b *bodies) keep(said string, body *entryBody) {
	b.mu.Lock()
	defer b.mu.Unlock()
	if len(b.newer) >= bodiesMost {
		b.newer, b.older = map[string]*entryBody{}, b.newer
	}
	b.newer[said] = body
}

// verdict is what an entry came to by one form and one limit set.
type verdict struct {
	form *forms.Form
	set  *forms.LimitSet
	forms.Verdict
}

// verdicts hold the last verdict given of a body.
type verdicts struct{ last atomic.Pointer[verdict] }

// knows gives the verdict that was worked out, where it was given by this form and this limit set.
func (v *verdicts) knows(form *forms.Form, set *forms.LimitSet) (forms.Verdict, bool) {
	if v == nil {
		return forms.Verdict{}, false
	}
	k := v.last.Load()
	if k == nil || k.form != form || k.set != set {
		return forms.Verdict{}, false
	}
	return k.Verdict, true
}

// note keeps a verdict for the next entry that says the same, and for the writer.
func (v *verdicts) note(form *forms.Form, set *forms.LimitSet, came forms.Verdict) {
	if v != nil {
		v.last.Store(&verdict{form, set, came})
	}
}
