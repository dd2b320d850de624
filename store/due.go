package store

import (
	"bytes"
	"container/heap"
	"iter"

	"go.etcd.io/bbolt"

	"tripwell/forms"
)

// Due is one date of one device. State is decided for the day asked: upcoming | due | in-grace | overdue | never-tested | paused.
type Due struct {
	Task   string
	Due    forms.Day
	Last   forms.Day // NoDay: never
	State  string
	Plan   string
	Cause  string      // the occasion that asks for it; "" = its plan's interval
	Paused forms.Pause // where the state is paused: the pause the day asked for lies in
}

func stateOn(d forms.DueDate, on forms.Day) Due {
	out := Due{Task: d.Task, Due: d.Due, Last: d.Last, State: d.State(on), Plan: d.Plan, Cause: d.Cause}
	out.Paused, _ = d.Pause(on)
	return out
}

// DueRow is a due date with the device it belongs to, for lists.
type DueRow struct {
	Device DeviceRow
	Due
}

// DueAsk filters a due list. Until NoDay = all dates.
type DueAsk struct {
	On    forms.Day
	Until forms.Day // last due day that is listed
	Site  string    // id or code; "" = all of the scope
	Task  string
	Limit int // 0 = all
}

// Due lists dates in their order, over one site or all of the scope; within a day by site, then in the order
// devices were first met in the book. It reads the due
// index from its start and stops with the caller.
func (v *View) Due(ask DueAsk) iter.Seq2[DueRow, error] {
	return func(yield func(DueRow, error) bool) {
		if err := v.due(ask, yield); err != nil {
			yield(DueRow{}, err)
		}
	}
}

func (v *View) due(ask DueAsk, yield func(DueRow, error) bool) error {
	heads, err := v.dueHeads(ask.Site)
	if err != nil {
		return err
	}
	listed := 0
	for heads.Len() > 0 {
		h := heads[0]
		day := readDay(h.key[4:])
		if ask.Until != forms.NoDay && day > ask.Until {
			return nil
		}
		if task := string(h.key[12:]); ask.Task == "" || task == ask.Task {
			device, ok, err := v.rowAt(h.site, read32(h.key[8:]), ask.On)
			if err != nil {
				return err
			}
			if due, found := device.due(task); ok && found {
				if !yield(DueRow{device, due}, nil) {
					return nil
				}
				if listed++; listed == ask.Limit {
					return nil
				}
			}
		}
		if h.next() {
			heap.Fix(&heads, 0)
		} else {
			heap.Pop(&heads)
		}
	}
	return nil
}

// CountDue counts the dates a due list holds, whatever its limit: overdue on the day asked for, and the others. It reads
// the sites' sums.
func (v *View) CountDue(ask DueAsk) (overdue, others int, err error) {
	logs := []uint32{overAllSites}
	if ask.Site != "" || !v.scope.All {
		sites, err := v.sitesAsked(ask.Site)
		if err != nil {
			return 0, 0, err
		}
		logs = logs[:0]
		for _, sv := range sites {
			logs = append(logs, sv.ord)
		}
	}
	c := v.bucket(bktSum).Cursor()
	for _, log := range logs {
		prefix := put32(nil, log)
		for k, n := c.Seek(prefix); k != nil && bytes.HasPrefix(k, prefix); k, n = c.Next() {
			if ask.Until != forms.NoDay && readDay(k[4:]) > ask.Until {
				break
			}
			d, u := readSum(k), unpacker{b: n}
			switch count := int(u.uint()); {
			case ask.Task != "" && d.Task != ask.Task:
			case d.State(ask.On) == forms.Overdue:
				overdue += count
			default:
				others += count
			}
		}
	}
	return overdue, others, nil
}

func (d *DeviceRow) due(task string) (Due, bool) {
	for _, due := range d.Due {
		if due.Task == task {
			return due, true
		}
	}
	return Due{}, false
}

// dueHead is the next date of one site.
type dueHead struct {
	site *siteView
	c    *bbolt.Cursor
	key  []byte
}

func (h *dueHead) next() bool {
	h.key, _ = h.c.Next()
	return len(h.key) > 12 && read32(h.key) == h.site.ord
}

// dueHeap puts the sites' next dates in order: day, then site and device.
type dueHeap []*dueHead

func (d dueHeap) Len() int { return len(d) }
func (d dueHeap) Less(i, j int) bool {
	a, b := d[i], d[j]
	if c := bytes.Compare(a.key[4:8], b.key[4:8]); c != 0 {
		return c < 0
	}
	if a.site.ID != b.site.ID {
		return a.site.ID < b.site.ID
	}
	return bytes.Compare(a.key[8:], b.key[8:]) < 0
}
func (d dueHeap) Swap(i, j int) { d[i], d[j] = d[j], d[i] }
func (d *dueHeap) Push(x any)   { *d = append(*d, x.(*dueHead)) }
func (d *dueHeap) Pop() any {
	old := *d
	last := old[len(old)-1]
	*d = old[:len(old)-1]
	return last
}

func (v *View) dueHeads(site string) (dueHeap, error) {
	sites, err := v.sitesAsked(site)
	if err != nil {
		return nil, err
	}
	due := v.bucket(bktDue)
	heads, all := make(dueHeap, 0, len(sites)), make([]dueHead, len(sites))
	for i, sv := range sites {
		h := &all[i]
		h.site, h.c = sv, due.Cursor()
		prefix := put32(nil, sv.ord)
		if h.key, _ = h.c.Seek(prefix); len(h.key) > 12 && bytes.HasPrefix(h.key, prefix) {
			heads = append(heads, h)
		}
	}
	heap.Init(&heads)
	return heads, nil
}
