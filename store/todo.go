package store

import (
	"fmt"
	"math"

	"go.etcd.io/bbolt"

	"tripwell/forms"
)

// todoItem is work that one record asks of many devices.
type todoItem struct {
	what   byte
	site   uint32    // 0 = every site
	from   forms.Day // todoEntries: entries of earlier days stay as they are; NoDay = all
	atSite uint32    // next device
	atN    uint32
}

const (
	todoDates   = 'd' // set the dates again
	todoEntries = 'e' // judge the entries again, then set the dates
)

// atOnce is how many devices and entries a record may touch within its own transaction.
const atOnce = 1000

// queue does an item at once where it is small, else puts it on the list that workOff takes from.
func (f *fold) queue(t todoItem) error {
	touched, err := f.touched(t.site)
	if err != nil {
		return err
	}
	if touched > atOnce {
		f.on(bktTodo).put(key64(f.seq), t.pack())
		return nil
	}
	if touched == 0 {
		return nil
	}
	_, _, err = f.workItem(t, math.MaxInt)
	return err
}

// touched counts the devices and entries of a site, or of all.
func (f *fold) touched(site uint32) (uint64, error) {
	if site != 0 {
		l, err := f.logOf(site)
		if err != nil {
			return 0, err
		}
		return l.entries + uint64(l.things), nil
	}
	f.packLogs()
	n := uint64(0)
	for _, r := range f.on(bktSiteLog).list(nil) {
		u := unpacker{b: r.value}
		_, things, _, entries := u.uint(), u.uint(), u.uint(), u.uint()
		if u.bad {
			return 0, errPacked
		}
		if n += things + entries; n > atOnce {
			break
		}
	}
	return n, nil
}

// workOff does a slice of what is on the list, about limit devices and entries, and reports whether more is left. The
// list is worked off in the order of the book; what comes of it does not depend on the size of slices.
func (f *fold) workOff(limit int) (more bool, err error) {
	for limit > 0 {
		list := f.on(bktTodo).list(nil)
		if len(list) == 0 {
			return false, nil
		}
		t, err := unpackTodo(list[0].value)
		if err != nil {
			return true, err
		}
		rest, used, err := f.workItem(t, limit)
		if err != nil {
			return true, err
		}
		limit -= used
		if rest == nil {
			f.on(bktTodo).delete([]byte(list[0].key))
			continue
		}
		f.on(bktTodo).put([]byte(list[0].key), rest.pack())
		return true, nil
	}
	return len(f.on(bktTodo).list(nil)) > 0, nil
}

// workItem does an item from where it stands until limit is used up; rest is nil when all is done.
func (f *fold) workItem(t todoItem, limit int) (rest *todoItem, used int, err error) {
	if err := f.flush(); err != nil { // so that the cursor meets every device
		return nil, 0, err
	}
	if t.site != 0 {
		t.atSite = t.site
	}
	c := f.tx.Bucket(bktWork).Cursor()
	for k, _ := c.Seek(workKey(t.atSite, t.atN)); len(k) == 8; k, _ = c.Next() {
		site, n := read32(k), read32(k[4:])
		if t.site != 0 && site != t.site {
			break
		}
		if used >= limit {
			t.atSite, t.atN = site, n
			return &t, used, nil
		}
		cost, err := f.rework(site, n, t)
		if err != nil {
			return nil, used, fmt.Errorf("device %d of log %d: %w", n, site, err)
		}
		used += cost
	}
	return nil, max(used, 1), nil
}

// zoneChanged moves the test days of a site.
func (f *fold) zoneChanged(l *modelLog) error {
	return f.queue(todoItem{what: todoEntries, site: l.ord, from: forms.NoDay})
}

func (t todoItem) pack() []byte {
	return put32(put32(put32(put32([]byte{t.what}, t.site), uint32(t.from)), t.atSite), t.atN)
}

func unpackTodo(b []byte) (todoItem, error) {
	if len(b) != 17 {
		return todoItem{}, errPacked
	}
	return todoItem{b[0], read32(b[1:]), forms.Day(int32(read32(b[5:]))), read32(b[9:]), read32(b[13:])}, nil
}

// finish does all that is on the work list, in transactions of bounded size.
func finish(db *bbolt.DB) error {
	for more := true; more; {
		err := db.Update(func(tx *bbolt.Tx) (err error) {
			more, err = workOff(tx, rebuildSlice, nil)
			return err
		})
		if err != nil {
			return err
		}
	}
	return nil
}

// workOff does about limit devices and entries of the work list within a transaction that writes.
func workOff(tx *bbolt.Tx, limit int, a *ahead) (more bool, err error) {
	if !listed(tx) {
		return false, nil
	}
	f := newFold(tx)
	if a != nil {
		f.ahead = a.entries
	}
	if more, err = f.workOff(limit); err != nil {
		return more, err
	}
	return more, f.flush()
}

// listed reports whether the work list holds anything.
func listed(tx *bbolt.Tx) bool {
	k, _ := tx.Bucket(bktTodo).Cursor().First()
	return k != nil
}

// Unfinished counts the records whose effect on dates and verdicts is still being worked off: until it is 0, lists may
// show some of what stood before them.
func (v *View) Unfinished() int { return v.tx.Bucket(bktTodo).Stats().KeyN }
