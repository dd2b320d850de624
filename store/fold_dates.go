package store

import (
	"encoding/binary"
	"slices"

	"tripwell/forms"
)

// reckon sets a device's next dates, and what became of the earlier ones, from all its entries.
func (f *fold) reckon(l *modelLog, n uint32, w *work) error {
	for i := range w.tasks {
		w.tasks[i].kept = nil
	}
	w.dates, w.also = nil, nil
	if w.start == forms.NoDay || w.kind == "" {
		return nil
	}
	all, err := f.allPast(l.ord, n, w)
	if err != nil {
		return err
	}
	for _, t := range f.follow(l, w, func(string) forms.Day { return forms.NoDay }) {
		for _, test := range testsOf(all, t.Task()) {
			t.Take(test)
		}
		t.End()
		w.settle(&t, nil)
	}
	w.dropEmpty()
	return nil
}

// reckonOn does the same after one more entry, which is newer than all that its tasks have had.
func (f *fold) reckonOn(l *modelLog, w *work, p past, before map[string]forms.Day) {
	dates, also := w.dates, w.also
	w.dates, w.also = nil, nil
	for i, t := range f.follow(l, w, func(task string) forms.Day { return w.metBefore(task, before) }) {
		test, ok := p.test(t.Task())
		if !ok {
			w.dates = append(w.dates, dates[i])
			for _, a := range also {
				if a.Task == t.Task() {
					w.also = append(w.also, a)
				}
			}
			continue
		}
		since := w.metBefore(t.Task(), before)
		for _, earlier := range testsOf(w.past[:len(w.past)-1], t.Task()) {
			if earlier.Locked && earlier.Day > since {
				t.Take(earlier)
			}
		}
		t.Take(test)
		w.settle(&t, w.task(t.Task()).kept)
	}
}

func (f *fold) follow(l *modelLog, w *work, last func(task string) forms.Day) []forms.Trace {
	return f.rules.schedule(l.ord, f.orgOrd(), w.kind).Follow(w.caseOf(f.rules.wholeSite(l.ord)), last)
}

// settle takes what a trace came to into the row, after what was kept before.
func (w *work) settle(t *forms.Trace, before []forms.Kept) {
	if kept := t.Kept(); len(kept)+len(before) > 0 {
		w.task(t.Task()).kept = append(slices.Clip(before), kept...)
	}
	d, ok := t.Next()
	if !ok {
		return
	}
	w.dates = append(w.dates, d)
	open := t.Open(d)
	if len(open) == 1 { // no occasion: it is the next
		return
	}
	w.also = append(w.also, alsoOpen{d, -1})
	for _, o := range open {
		w.also = append(w.also, alsoOpen{o, 1})
	}
}

// dropEmpty takes out the states of tasks nothing is said of any more.
func (w *work) dropEmpty() {
	w.tasks = slices.DeleteFunc(w.tasks, func(t taskState) bool {
		return t.last.result == 0 && t.met == forms.NoDay && len(t.kept) == 0
	})
}

// allPast gives all entries of a device.
func (f *fold) allPast(site, n uint32, w *work) ([]past, error) {
	if w.older == 0 {
		return w.past, nil
	}
	older, err := f.older(site, n, w)
	if err != nil {
		return nil, err
	}
	var all []past
	for _, c := range older {
		all = append(all, c.past...)
	}
	return append(all, w.past...), nil
}

// test is what an entry says to the dates of a task; ok is false where it says nothing.
func (p *past) test(task string) (t forms.Test, ok bool) {
	t = forms.Test{Day: p.day, Meets: slices.Contains(p.met, task), Locked: p.locked && p.task == task}
	return t, t.Meets || t.Locked
}

func (p past) same(o past) bool {
	return p.day == o.day && p.task == o.task && p.result == o.result && p.locked == o.locked && p.said == o.said && p.came == o.came && slices.Equal(p.met, o.met)
}

// testsOf gives the tests of a task in the order of their days.
func testsOf(all []past, task string) []forms.Test {
	var out []forms.Test
	for i := range all {
		if t, ok := all[i].test(task); ok {
			out = append(out, t)
		}
	}
	forms.SortTests(out)
	return out
}

// inOrder says whether an entry that is not yet among the device's is newer than all that its tasks have had, so that only
// what it changes need be worked out.
func (w *work) inOrder(p past) bool {
	if w.start == forms.NoDay || w.kind == "" || !w.live || w.older > 0 && p.locked {
		return false
	}
	for _, task := range append([]string{p.task}, p.met...) {
		for i := range w.tasks {
			t := &w.tasks[i]
			if t.task != task {
				continue
			}
			if p.day <= t.met || t.last.result != 0 && p.day <= t.last.day {
				return false
			}
			if w.older > 0 && t.met < w.past[0].day {
				return false // somebody may have stood before a closed door in an entry that is not at hand
			}
		}
	}
	return true
}

// addsNoDay says whether an entry that is not yet among the device's leaves its dates as they are: it meets nothing, or
// only what a test of the same day has met, and nobody stood before a closed door.
func (w *work) addsNoDay(p past) bool {
	if p.locked {
		return false
	}
	for _, task := range p.met {
		if w.met(task) != p.day {
			return false
		}
	}
	return true
}

// metDays gives the days that met the tasks an entry speaks of, before it is counted.
func (w *work) metDays(p past) map[string]forms.Day {
	out := make(map[string]forms.Day, 2)
	for _, task := range append([]string{p.task}, p.met...) {
		out[task] = w.met(task)
	}
	return out
}

func (w *work) metBefore(task string, before map[string]forms.Day) forms.Day {
	if d, ok := before[task]; ok {
		return d
	}
	return w.met(task)
}

// before is what the indexes hold for a row as it stands.
func (w *work) before() workBefore {
	b := workBefore{dates: w.dates, also: w.also}
	for i := range w.tasks {
		if t := &w.tasks[i]; len(t.kept) > 0 {
			b.kept = append(b.kept, taskKept{t.task, t.kept})
		}
	}
	return b
}

// of gives what was kept of a task.
func (b *workBefore) of(task string) []forms.Kept {
	for i := range b.kept {
		if b.kept[i].task == task {
			return b.kept[i].kept
		}
	}
	return nil
}

// packWorks writes changed work rows and keeps the due index, its sums and what was kept.
func (f *fold) packWorks() {
	for key, w := range f.works {
		if !w.dirty {
			continue
		}
		w.dirty = false
		f.on(bktWork).put(workKey(key.site, key.n), w.pack())
		f.packDates(key, w)
		now := w.before()
		for _, k := range now.kept {
			f.keep(key.site, k.task, w.was.of(k.task), k.kept)
		}
		for _, k := range w.was.kept {
			if now.of(k.task) == nil {
				f.keep(key.site, k.task, k.kept, nil)
			}
		}
		w.was = now
	}
}

func (f *fold) packDates(key workID, w *work) {
	for _, d := range w.was.dates {
		if hasSum(w.dates, d) {
			continue
		}
		if !hasDate(w.dates, d) {
			f.on(bktDue).delete(dueKey(key.site, d.Due, key.n, d.Task))
		}
		f.sumDate(key.site, d, -1)
	}
	for _, d := range w.dates {
		if hasSum(w.was.dates, d) {
			continue
		}
		if !hasDate(w.was.dates, d) {
			f.on(bktDue).put(dueKey(key.site, d.Due, key.n, d.Task), []byte{})
		}
		f.sumDate(key.site, d, 1)
	}
	for _, a := range w.was.also {
		f.also[string(sumKey(key.site, a.DueDate))] -= a.by
	}
	for _, a := range w.also {
		f.also[string(sumKey(key.site, a.DueDate))] += a.by
	}
}

// sumDate counts a date in its site's sums and in those over all sites.
func (f *fold) sumDate(site uint32, d forms.DueDate, by int64) {
	key := sumKey(site, d)
	f.sums[string(key)] += by
	binary.BigEndian.PutUint32(key, overAllSites)
	f.sums[string(key)] += by
}

func hasDate(list []forms.DueDate, d forms.DueDate) bool {
	for i := range list {
		if list[i].Task == d.Task && list[i].Due == d.Due {
			return true
		}
	}
	return false
}

// hasSum says whether a list has a date that counts in the same sum. A task has one date at a time.
func hasSum(list []forms.DueDate, d forms.DueDate) bool {
	for i := range list {
		if list[i].Task == d.Task {
			return sameSum(&list[i], &d)
		}
	}
	return false
}

// keep notes how what was kept of a device's task has changed.
func (f *fold) keep(site uint32, task string, was, now []forms.Kept) {
	same := 0
	for same < len(was) && same < len(now) && was[same] == now[same] {
		same++
	}
	if same == len(was) && same == len(now) {
		return
	}
	key := string(keepKey(site, task))
	months := f.keeps[key]
	if months == nil {
		months = map[int32]monthKept{}
		f.keeps[key] = months
	}
	for by, list := range map[int64][]forms.Kept{-1: was[same:], 1: now[same:]} {
		for _, k := range list {
			m := months[k.Month]
			m[k.Outcome] += by
			months[k.Month] = m
		}
	}
}

// packKeeps adds the group's changes to what sites have kept.
func (f *fold) packKeeps() error {
	for key, changes := range f.keeps {
		months := map[int32]monthKept{}
		err := eachKept(f.on(bktKeep).get([]byte(key)), 0, func(month int32, k *monthKept) { months[month] = *k })
		if err != nil {
			return err
		}
		for month, by := range changes {
			m := months[month]
			empty := true
			for i := range m {
				if m[i] += by[i]; m[i] < 0 {
					return errPacked
				}
				empty = empty && m[i] == 0
			}
			if months[month] = m; empty {
				delete(months, month)
			}
		}
		f.on(bktKeep).put([]byte(key), packMonths(months))
	}
	clear(f.keeps)
	return nil
}
