package store

import (
	"bytes"
	"fmt"
	"time"

	"go.etcd.io/bbolt"

	"tripwell/store/record"
)

// ahead is the next part of the work list with its entries read and judged beforehand, beside the writer, as pushers do
// with theirs (ready.go): the writer only looks up what was said of an entry and keeps what came of it. What has changed
// meanwhile it does itself.
type ahead struct {
	cost    int                     // devices and entries
	took    time.Duration           // to make ready
	entries map[uint64]*aheadRecord // by place in the book
	err     error
}

// aheadRecord is an entry of the book, copied out of the file.
type aheadRecord struct {
	r     *record.Record
	stamp record.Stamp
	body  *entryBody
}

// The parts of the work list. A part is sized so that the writer is done with it within partTime, and it is committed with
// the next group where pushes come: they share its flush of the disk. Then the work rests, partRest times as long as the
// part took to make ready, so that those who push find a processor free; while nobody pushes it goes on at once.
const (
	partTime  = 2 * time.Millisecond
	partWait  = 5 * time.Millisecond // for a group to go with
	partRest  = 2
	restMost  = 100 * time.Millisecond
	partFirst = 100 // devices and entries of the first part
	partLeast = 20
	partMost  = 5_000
)

// offWork is the writer's own: how it gets on with the work list.
type offWork struct {
	left   bool        // the list may hold something
	asked  bool        // a part is being made ready
	pushed bool        // a job came since the last part
	ready  chan *ahead // one answer for each time it was asked
	size   int         // devices and entries of a part
	took   time.Duration
	bodies *bodies // what the entries of late parts say; nobody else's while none is asked
}

func newOffWork() offWork {
	return offWork{left: true, ready: make(chan *ahead, 1), size: partFirst, bodies: newBodies()}
}

// ask has the next part made ready, unless that is under way.
func (o *offWork) ask(s *Store) {
	if !o.left || o.asked {
		return
	}
	rest := time.Duration(0)
	if o.pushed {
		rest = min(partRest*o.took, restMost)
	}
	o.asked, o.pushed = true, false
	go func(size int) {
		time.Sleep(rest)
		o.ready <- s.lookAhead(size, o.bodies)
	}(o.size)
}

// take looks into a part that came: nil where it holds nothing to do.
func (o *offWork) take(part *ahead) *ahead {
	o.asked, o.took = false, part.took
	if part.err != nil || part.cost == 0 {
		o.left = false // what cannot be read stays on the list and is tried again after the next group
		return nil
	}
	return part
}

// adapt sets the size of the next part by how long the last took.
func (o *offWork) adapt(cost int, took time.Duration) {
	next := 2 * cost
	if took > 0 {
		next = min(next, int(float64(cost)*float64(partTime)/float64(took)))
	}
	o.size = min(max(next, partLeast), partMost)
}

// lookAhead makes the next part ready: at least one device, about size devices and entries.
func (s *Store) lookAhead(size int, seen *bodies) *ahead {
	a, began := &ahead{entries: map[uint64]*aheadRecord{}}, time.Now()
	defer func() { a.took = time.Since(began) }()
	a.err = s.view(func(tx *bbolt.Tx) error {
		_, v := tx.Bucket(bktTodo).Cursor().First()
		if v == nil {
			return nil
		}
		t, err := unpackTodo(v)
		if err != nil {
			return err
		}
		f := newFold(tx) // to look things up; never flushed
		c := tx.Bucket(bktWork).Cursor()
		if t.site != 0 {
			t.atSite = t.site
		}
		for k, _ := c.Seek(workKey(t.atSite, t.atN)); len(k) == 8 && a.cost < size; k, _ = c.Next() {
			site, n := read32(k), read32(k[4:])
			if t.site != 0 && site != t.site {
				break
			}
			cost, err := f.deviceAhead(site, n, t, a, seen)
			if err != nil {
				return fmt.Errorf("device %d of log %d: %w", n, site, err)
			}
			a.cost += cost
		}
		a.cost = max(a.cost, 1) // an item with nothing left is taken off the list
		return nil
	})
	return a
}

// deviceAhead reads and judges the entries of a device that an item touches.
func (f *fold) deviceAhead(site, n uint32, t todoItem, a *ahead, seen *bodies) (cost int, err error) {
	if t.what == todoDates {
		return 1, nil
	}
	l, err := f.logOf(site)
	if err != nil {
		return 0, err
	}
	w, err := f.work(site, n)
	if err != nil {
		return 0, err
	}
	delete(f.works, workID{site, n}) // a part may hold many
	older, err := f.older(site, n, w)
	if err != nil {
		return 0, err
	}
	for _, list := range append(pastsOf(older), w.past) {
		for _, p := range list {
			if p.day < t.from {
				continue
			}
			cost++
			if a.entries[p.seq], err = f.entryAhead(l, p.seq, seen); err != nil {
				return 0, err
			}
		}
	}
	return cost + 1, nil
}

func pastsOf(chunks []chunk) [][]past {
	var out [][]past
	for _, c := range chunks {
		out = append(out, c.past)
	}
	return out
}

func (f *fold) entryAhead(l *modelLog, seq uint64, seen *bodies) (*aheadRecord, error) {
	one := reread{seq: seq, value: bytes.Clone(f.tx.Bucket(bktRec).Get(key64(seq)))}
	one.decode(seen)
	if one.err != nil {
		return nil, one.err
	}
	body, err := readEntry(one.r)
	if err != nil {
		return nil, err
	}
	if _, err := f.outcome(l, one.r, one.stamp, body); err != nil { // notes its verdict with the body
		return nil, err
	}
	return &aheadRecord{one.r, one.stamp, body}, nil
}

// entryAt gives an entry of the book and its body, from what was made ready where it is there.
func (f *fold) entryAt(seq uint64) (*record.Record, record.Stamp, *entryBody, error) {
	if one := f.ahead[seq]; one != nil {
		return one.r, one.stamp, one.body, nil
	}
	r, st, _, err := readBook(f.tx, seq)
	if err != nil {
		return nil, st, nil, err
	}
	body, err := readEntry(r)
	return r, st, body, err
}
