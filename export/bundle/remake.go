package bundle

import (
	"container/heap"
	"context"
	"encoding/hex"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"iter"
	"os"
	"time"

	"tripwell/export"
	"tripwell/forms"
	"tripwell/store"
	"tripwell/store/record"
)

// remake writes the workbook that a bundle's records give. Whoever writes a bundle and whoever checks it goes this one way, so
// the two workbooks differ only where somebody changed one. A plain one is not packed.
func remake(ctx context.Context, out io.Writer, doc Doc, head string, people []person, records iter.Seq2[store.Replayed, error], plain bool, progress func(done, total int64)) error {
	ask := export.WorkbookAsk{Now: doc.AsOf, Organisation: doc.Organisation, Store: doc.Store, Epoch: doc.Epoch, Demo: doc.Demo, AllSites: doc.AllSites, Head: head,
		Progress: func(int, int) error { return ctx.Err() }}
	var err error
	if ask.From, err = dayOf(doc.From); err != nil {
		return err
	}
	if ask.To, err = dayOf(doc.To); err != nil {
		return err
	}
	return replayed(ctx, doc, people, records, progress, func(v *store.View) error {
		src, err := export.FromView(v, ask)
		if err != nil {
			return err
		}
		src.Plain = plain
		return export.Workbook(out, src)
	})
}

// replayed makes a store of a bundle's records in a temporary folder and shows it, as it stood when the bundle was made, to
// somebody who may see the sites of the bundle.
func replayed(ctx context.Context, doc Doc, people []person, records iter.Seq2[store.Replayed, error], progress func(done, total int64), show func(v *store.View) error) (err error) {
	dir, err := os.MkdirTemp("", "tripwell-bundle-*")
	if err != nil {
		return fmt.Errorf("room for the records: %w", err)
	}
	defer func() { err = errors.Join(err, os.RemoveAll(dir)) }()
	stated := make([]store.Person, len(people))
	for i, p := range people {
		stated[i] = p.stored()
	}
	from := store.Origin{Store: doc.Store, Org: doc.Org, Epoch: doc.Epoch, Demo: doc.Demo}
	s, err := store.Replay(ctx, dir, from, func() time.Time { return doc.AsOf }, stated, records, progress)
	if err != nil {
		return err
	}
	defer func() { err = errors.Join(err, s.Close()) }()
	scope := store.Scope{Role: "auditor"}
	for _, site := range doc.Sites {
		scope.Sites = append(scope.Sites, site.ID)
	}
	return s.View(scope, show)
}

func dayOf(text string) (forms.Day, error) {
	if text == "" || text == forms.NoDay.String() {
		return forms.NoDay, nil
	}
	return forms.ParseDay(text)
}

// logSource gives the records of one log in their order.
type logSource struct {
	records iter.Seq2[store.Replayed, error]
}

// merged puts the records of several logs in the order in which they were received, keeping the order of each log. The
// order between logs is not in the proof, and nothing that a workbook says depends on it but ties that are decided here the
// same way each time.
func merged(logs []logSource) iter.Seq2[store.Replayed, error] {
	return func(yield func(store.Replayed, error) bool) {
		var queue runs
		for i, l := range logs {
			next, stop := iter.Pull2(l.records)
			defer stop()
			r := &run{place: i, next: next}
			if r.step() {
				queue = append(queue, r)
			}
		}
		heap.Init(&queue)
		for len(queue) > 0 {
			r := queue[0]
			if !yield(r.one, r.err) || r.err != nil {
				return
			}
			if r.step() {
				heap.Fix(&queue, 0)
			} else {
				heap.Pop(&queue)
			}
		}
	}
}

// run is a log on its way into merged.
type run struct {
	place    int
	next     func() (store.Replayed, error, bool)
	one      store.Replayed
	received time.Time
	err      error
}

func (r *run) step() (ok bool) {
	before := r.received
	if r.one, r.err, ok = r.next(); !ok || r.err != nil {
		return ok
	}
	st, err := record.ParseStamp(r.one.Stamp)
	if err != nil {
		r.err = &store.Error{Code: "invalid", Field: "stamp", Text: "A stamp cannot be read: " + err.Error() + "."}
		return true
	}
	// A clock that was put back must not take a log out of its order.
	if r.received = st.Received; r.received.Before(before) {
		r.received = before
	}
	return true
}

type runs []*run

func (q runs) Len() int { return len(q) }
func (q runs) Less(i, j int) bool {
	if q[i].received.Equal(q[j].received) {
		return q[i].place < q[j].place
	}
	return q[i].received.Before(q[j].received)
}
func (q runs) Swap(i, j int) { q[i], q[j] = q[j], q[i] }
func (q *runs) Push(r any)   { *q = append(*q, r.(*run)) }
func (q *runs) Pop() any {
	last := (*q)[len(*q)-1]
	*q = (*q)[:len(*q)-1]
	return last
}

// attach gives each record.refused what was kept of the record it speaks of.
func attach(records iter.Seq2[store.Replayed, error], refusals []store.Refusal) iter.Seq2[store.Replayed, error] {
	kept := make(map[string]*store.Refusal, len(refusals))
	for i := range refusals {
		kept[refusals[i].SHA256] = &refusals[i]
	}
	return func(yield func(store.Replayed, error) bool) {
		for one, err := range records {
			if err == nil {
				one.Refused = kept[refusedSum(one.Record)]
			}
			if !yield(one, err) {
				return
			}
		}
	}
}

// refusedSum is the SHA-256 a record.refused names, "" for any other record.
func refusedSum(raw []byte) string {
	var r struct {
		Kind string
		Body struct{ SHA256 string }
	}
	if !isRefusal(raw) || json.Unmarshal(raw, &r) != nil || r.Kind != "record.refused" {
		return ""
	}
	if b, err := hex.DecodeString(r.Body.SHA256); err != nil || len(b) != 32 {
		return ""
	}
	return r.Body.SHA256
}
