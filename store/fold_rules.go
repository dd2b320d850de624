package store

import (
	"encoding/json"
	"fmt"

	"tripwell/forms"
	"tripwell/store/record"
)

// ruleSet keeps a revision of a form, a limit set or a plan, and judges or dates again what it touches. Of two records
// that state the same revision the larger (clock, id) stands.
func (f *fold) ruleSet(r *record.Record) error {
	var body struct{ Form, Limits, Plan json.RawMessage }
	if err := json.Unmarshal(r.Body, &body); err != nil {
		return badBody("", "The body of %s is not readable: %v.", r.Kind, err)
	}
	l, err := f.log(r.Log)
	if err != nil {
		return err
	}
	p := packer{make([]byte, 0, 24+len(r.Body))}
	p.fixed(r.Clock)
	id := parseID(r.ID)
	p.id(id)
	var key []byte
	todo := todoItem{what: todoEntries, site: l.ord}
	switch r.Kind {
	case "forms.set":
		form, err := parseChecked[forms.Form](body.Form, "form")
		if err != nil {
			return err
		}
		key, p.b = ruleKey(ruleForm, l.ord, form.ID, form.Revision), append(p.b, body.Form...)
	case "limits.set":
		set, err := parseChecked[forms.LimitSet](body.Limits, "limits")
		if err != nil {
			return err
		}
		key, p.b = ruleKey(ruleLimit, l.ord, set.ID, set.Revision), append(p.b, body.Limits...)
	case "plan.set":
		plan, err := parseChecked[forms.Plan](body.Plan, "plan")
		if err != nil {
			return err
		}
		if err := plan.Check(); err != nil {
			return badBody("plan", "The plan cannot be followed: %v.", err)
		}
		key, p.b = ruleKey(rulePlan, l.ord, plan.ID, plan.Revision), append(p.b, body.Plan...)
		todo.what = todoDates
	}
	if old := f.on(bktRule).get(key); old != nil {
		u := unpacker{b: old}
		if (binding{clock: r.Clock, id: id}).before(binding{clock: u.fixed(), id: u.id()}) {
			return nil
		}
	}
	f.on(bktRule).put(key, p.b)
	f.rules.forget()
	if r.Log == record.Org {
		todo.site = 0
	}
	return f.queue(todo)
}

func parseChecked[T any](raw json.RawMessage, field string) (*T, error) {
	t, err := parseRule[T](append(make([]byte, 24), raw...))
	if err != nil {
		return nil, badBody(field, "The body's %q is not readable: %v.", field, err)
	}
	var id string
	var revision int
	switch v := any(t).(type) {
	case *forms.Form:
		id, revision = v.ID, v.Revision
	case *forms.LimitSet:
		id, revision = v.ID, v.Revision
	case *forms.Plan:
		id, revision = v.ID, v.Revision
	}
	if id == "" || len(id) > 200 || revision < 1 {
		return nil, badBody(field, "The body's %q needs an id and a revision from 1.", field)
	}
	return t, nil
}

// todoItem is work that one record asks of many devices.
type todoItem struct {
	what   byte
	site   uint32 // 0 = every site
	atSite uint32 // next device
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
	_, _, err = f.workItem(t, atOnce+1)
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
		cost, err := f.rework(site, n, t.what)
		if err != nil {
			return nil, used, fmt.Errorf("device %d of log %d: %w", n, site, err)
		}
		used += cost
	}
	return nil, max(used, 1), nil
}

// zoneChanged moves the test days of a site.
func (f *fold) zoneChanged(l *modelLog) error {
	return f.queue(todoItem{what: todoEntries, site: l.ord})
}

func (t todoItem) pack() []byte {
	return put32(put32(put32([]byte{t.what}, t.site), t.atSite), t.atN)
}

func unpackTodo(b []byte) (todoItem, error) {
	if len(b) != 13 {
		return todoItem{}, errPacked
	}
	return todoItem{b[0], read32(b[1:]), read32(b[5:]), read32(b[9:])}, nil
}
