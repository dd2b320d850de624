package store

import (
	"encoding/json"
	"slices"

	"tripwell/forms"
	"tripwell/store/record"
)

// saidOfWholeSite are the occasions and pauses that name no device.
type saidOfWholeSite struct {
	occasions []occasion
	pauses    []pause
}

// wholeSite reads them when first needed.
func (ru *rules) wholeSite(site uint32) *saidOfWholeSite {
	if s, ok := ru.whole[site]; ok {
		return s
	}
	s := &saidOfWholeSite{}
	ru.whole[site] = s
	if ru.said == nil {
		return s
	}
	for _, r := range ru.said(bktOccasion, put32(nil, site)) {
		u := unpacker{b: r.value}
		if o, devices := u.occasion(), u.uint(); !u.bad && devices == 0 {
			s.occasions = append(s.occasions, o)
		}
	}
	for _, r := range ru.said(bktPause, put32(nil, site)) {
		if p, err := unpackPause([]byte(r.key), r.value); err == nil && len(p.devices) == 0 {
			s.pauses = append(s.pauses, p)
		}
	}
	return s
}

func unpackPause(key, row []byte) (pause, error) {
	u := unpacker{b: row}
	p := u.pause(id16(key[4:20]))
	for n := u.uint(); n > 0 && !u.bad; n-- {
		p.devices = append(p.devices, u.id())
	}
	return p, u.err()
}

func idsOf(list []string) []id16 {
	var out []id16
	for _, s := range list {
		if id := parseID(s); id != (id16{}) && !slices.Contains(out, id) {
			out = append(out, id)
		}
	}
	return out
}

// occasionNoted asks for tests at once.
func (f *fold) occasionNoted(r *record.Record) error {
	var body struct {
		Cause   string
		On      string
		Devices []string
		Tasks   []string
	}
	if err := json.Unmarshal(r.Body, &body); err != nil {
		return badBody("tasks", "The body of %s is not readable: %v.", r.Kind, err)
	}
	if len(body.Cause) > 40 {
		return badBody("cause", "The cause is too long: give it in at most 40 characters, and the rest as text.")
	}
	on, err := forms.ParseDay(body.On)
	if err != nil {
		return badBody("on", "The day of %s is not readable: %v.", r.Kind, err)
	}
	l, err := f.log(r.Log)
	if err != nil {
		return err
	}
	if body.Devices != nil && len(body.Devices) == 0 {
		return badBody("devices", "The list of devices is empty: name some, or leave the list out for the whole site.")
	}
	slices.Sort(body.Tasks)
	o := occasion{parseID(r.ID), forms.Occasion{Cause: body.Cause, On: on, Tasks: slices.Compact(body.Tasks)}}
	devices := idsOf(body.Devices)
	var p packer
	p.occasion(o)
	p.uint(uint64(len(devices)))
	f.on(bktOccasion).put(saidOfSite(l.ord, o.record), p.b)
	if body.Devices == nil {
		f.rules.forget()
		return f.queue(todoItem{what: todoDates, site: l.ord})
	}
	return f.eachDevice(l, devices, func(w *work) {
		w.occasions = append(w.occasions, o)
		slices.SortFunc(w.occasions, func(a, b occasion) int { return slices.Compare(a.record[:], b.record[:]) })
	})
}

// eachDevice changes the rows of devices and sets their dates again.
func (f *fold) eachDevice(l *modelLog, devices []id16, change func(w *work)) error {
	for _, id := range devices {
		n := f.thing(l, ofDevice, id)
		w, err := f.work(l.ord, n)
		if err != nil {
			return err
		}
		change(w)
		w.dirty = true
		if err := f.reckon(l, n, w); err != nil {
			return err
		}
	}
	return nil
}

// pauseSet keeps what the record with the largest (clock, id) says of a pause.
func (f *fold) pauseSet(r *record.Record) error {
	var body struct {
		From, Until, Reason string
		Devices             []string
	}
	if err := json.Unmarshal(r.Body, &body); err != nil {
		return badBody("", "The body of %s is not readable: %v.", r.Kind, err)
	}
	if body.Devices != nil && len(body.Devices) == 0 {
		return badBody("devices", "The list of devices is empty: name some, or leave the list out for the whole site.")
	}
	p := pause{subject: parseID(r.Subject), clock: r.Clock, record: parseID(r.ID), devices: idsOf(body.Devices)}
	p.Reason = body.Reason
	var err error
	if p.From, err = forms.ParseDay(body.From); err != nil {
		return badBody("from", "The first day of the pause is not readable: %v.", err)
	}
	if p.Until, err = forms.ParseDay(body.Until); err != nil {
		return badBody("until", "The last day of the pause is not readable: %v.", err)
	}
	l, err := f.log(r.Log)
	if err != nil {
		return err
	}
	key := saidOfSite(l.ord, p.subject)
	was := pause{}
	old := f.on(bktPause).get(key)
	if old != nil {
		if was, err = unpackPause(key, old); err != nil {
			return err
		}
		if (binding{clock: p.clock, id: p.record}).before(binding{clock: was.clock, id: was.record}) {
			return nil
		}
	}
	var pk packer
	pk.pause(p)
	pk.uint(uint64(len(p.devices)))
	for _, id := range p.devices {
		pk.id(id)
	}
	f.on(bktPause).put(key, pk.b)
	f.rules.forget()
	whole := len(p.devices) == 0 || old != nil && len(was.devices) == 0
	drop := func(w *work) {
		w.pauses = slices.DeleteFunc(w.pauses, func(o pause) bool { return o.subject == p.subject })
	}
	one := p
	one.devices = nil
	if err := f.eachDevice(l, was.devices, drop); err != nil {
		return err
	}
	err = f.eachDevice(l, p.devices, func(w *work) {
		drop(w)
		w.pauses = append(w.pauses, one)
		slices.SortFunc(w.pauses, func(a, b pause) int { return slices.Compare(a.subject[:], b.subject[:]) })
	})
	if err != nil || !whole {
		return err
	}
	return f.queue(todoItem{what: todoDates, site: l.ord})
}
