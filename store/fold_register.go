package store

import (
	"encoding/json"
	"strings"
	"time"

	"tripwell/forms"
	"tripwell/store/record"
)

// setFields merges a record's map of fields.
func (f *fold) setFields(r *record.Record, st record.Stamp, typ byte) error {
	set, seen := record.Set(r.Body)
	l, err := f.log(r.Log)
	if err != nil {
		return err
	}
	key, reg, err := f.register(l, typ, parseID(r.Subject))
	if err != nil {
		return err
	}
	zone := reg.text("zone")
	for name, v := range set {
		reg.say(name, record.Said{Value: append(json.RawMessage{}, v...), Clock: r.Clock, ID: r.ID, From: r.From, Seen: seen})
	}
	if strings.HasSuffix(r.Kind, ".registered") || r.Kind == "round.made" {
		if ms := happened(r, st).UnixMilli(); reg.born == 0 || ms < reg.born {
			reg.born, reg.dirty = ms, true
		}
	}
	switch {
	case typ == ofDevice:
		if strings.HasSuffix(r.Kind, ".registered") {
			if err := f.deviceCame(l, key.n, st); err != nil {
				return err
			}
		}
		return f.deviceChanged(l, key.n, reg)
	case typ == ofSite && zone != reg.text("zone"):
		l.zone = nil
		return f.zoneChanged(l)
	}
	return nil
}

// happened gives the moment a record counts for: its own time, never later than the first holder had it.
func happened(r *record.Record, st record.Stamp) time.Time {
	if first := st.Earliest(); first.Before(r.At) {
		return first
	}
	return r.At
}

func quoted(s string) json.RawMessage {
	b, _ := json.Marshal(s)
	return b
}

// retired takes a device out of service, and where another took its place, tells that one too.
func (f *fold) retired(r *record.Record, st record.Stamp) error {
	var body struct{ Reason, On, With string }
	if err := json.Unmarshal(r.Body, &body); err != nil {
		return badBody("reason", "The reason and the day of %s are not readable: %v.", r.Kind, err)
	}
	l, err := f.log(r.Log)
	if err != nil {
		return err
	}
	old := parseID(r.Subject)
	why, err := json.Marshal(retirement{Reason: body.Reason, On: body.On, MS: happened(r, st).UnixMilli()})
	if err != nil {
		return err
	}
	said := func(v json.RawMessage) record.Said {
		return record.Said{Value: v, Clock: r.Clock, ID: r.ID, From: r.From}
	}
	key, reg, err := f.register(l, ofDevice, old)
	if err != nil {
		return err
	}
	reg.say("#retired", said(why))
	if err := f.factSaid(l, key.n); err != nil {
		return err
	}
	if with := parseID(body.With); with != (id16{}) && with != old {
		reg.say("#with", said(quoted(body.With)))
		next, newer, err := f.register(l, ofDevice, with)
		if err != nil {
			return err
		}
		newer.say("#replaces", said(quoted(r.Subject)))
		if err := f.deviceChanged(l, next.n, newer); err != nil {
			return err
		}
	}
	return f.deviceChanged(l, key.n, reg)
}

// deviceChanged carries what the dates need over to the device's work row.
func (f *fold) deviceChanged(l *modelLog, n uint32, reg *register) error {
	w, err := f.work(l.ord, n)
	if err != nil {
		return err
	}
	zone, err := f.zone(l)
	if err != nil {
		return err
	}
	live := w.live
	w.kind, w.start = reg.text("kind"), forms.NoDay
	if reg.born != 0 {
		w.start = forms.DayOf(time.UnixMilli(reg.born).In(zone))
		if d, err := forms.ParseDay(reg.text("installed")); err == nil && d > w.start {
			w.start = d
		}
	}
	w.follows = reg.value("#replaces") != nil
	w.live, w.ended = reg.born != 0 && w.kind != "" && reg.value("#retired") == nil, forms.NoDay
	if why := reg.value("#retired"); why != nil {
		w.ended = retiredOn(why, zone)
	}
	w.way = wayOf(reg)
	if w.live != live {
		if l.dirty = true; w.live {
			l.live++
		} else {
			l.live--
		}
	}
	w.dirty = true
	return f.reckon(l, n, w)
}

// deviceCame notes the earliest day this store received a registration of a device.
func (f *fold) deviceCame(l *modelLog, n uint32, st record.Stamp) error {
	w, err := f.work(l.ord, n)
	if err != nil {
		return err
	}
	zone, err := f.zone(l)
	if err != nil {
		return err
	}
	if day := forms.DayOf(st.Received.In(zone)); w.came == forms.NoDay || day < w.came {
		w.came = day
	}
	return nil
}

// retirement is what #retired holds.
type retirement struct {
	Reason string `json:"reason"`
	On     string `json:"on"`
	MS     int64  `json:"ms"` // when it was said, for those that state no day
}

// retiredOn gives the day a device was taken out of use.
func retiredOn(why json.RawMessage, zone *time.Location) forms.Day {
	var r retirement
	if json.Unmarshal(why, &r) != nil {
		return forms.NoDay
	}
	if d, err := forms.ParseDay(r.On); err == nil {
		return d
	}
	return forms.DayOf(time.UnixMilli(r.MS).In(zone))
}

// wayOf says how a device came under test: in another's place, from a list (its id is made from names, RFC 9562 version
// 8), or as it was found.
func wayOf(reg *register) string {
	switch {
	case reg.value("#replaces") != nil:
		return forms.Replaced
	case reg.id[6]>>4 == 8:
		return forms.Imported
	}
	return forms.New
}

// zone gives a site's time zone, UTC where it is unknown.
func (f *fold) zone(l *modelLog) (*time.Location, error) {
	if l.zone == nil {
		_, reg, err := f.register(l, ofSite, l.id)
		if err != nil {
			return nil, err
		}
		l.zone = location(reg.text("zone"))
	}
	return l.zone, nil
}

// orgOrd gives the number of the org log, 0 before anything was said in it.
func (f *fold) orgOrd() uint32 {
	if l := f.logs[record.Org]; l != nil {
		return l.ord
	}
	if f.on(bktSiteLog).get(make([]byte, 16)) == nil {
		return 0
	}
	l, err := f.log(record.Org)
	if err != nil {
		return 0
	}
	return l.ord
}

// bound puts a tag on a place or a portable item, or takes it off.
func (f *fold) bound(r *record.Record) error {
	var body struct{ Tag string }
	if err := json.Unmarshal(r.Body, &body); err != nil || !record.IsTag(body.Tag) {
		return badBody("tag", "The tag of %s is not readable.", r.Kind)
	}
	l, err := f.log(r.Log)
	if err != nil {
		return err
	}
	subject := parseID(r.Subject)
	b := binding{live: r.Kind == "tag.bound", clock: r.Clock, id: parseID(r.ID)}
	key := bindKey(l.ord, subject, body.Tag)
	if old, err := unpackBinding(f.on(bktBind).get(key)); err != nil {
		return err
	} else if !old.before(b) {
		return nil
	}
	f.on(bktBind).put(key, b.pack())
	if tag := tagKey(body.Tag, l.ord, subject); b.live {
		f.on(bktTag).put(tag, []byte{})
	} else if f.on(bktTag).get(tag) != nil {
		f.on(bktTag).delete(tag)
	}
	return nil
}

// packRegisters writes changed register rows and keeps their indexes.
func (f *fold) packRegisters() {
	for key, r := range f.registers {
		if !r.dirty {
			continue
		}
		r.dirty = false
		f.on(bktRegister).put(registerKey(key.site, key.typ, key.n), r.pack())
		is := r.stands()
		switch key.typ {
		case ofDevice:
			f.reindex(bktPlace, r.was.place, is.place, func(place id16) []byte { return placeKey(key.site, place, key.n) })
			if is.circuit != r.was.circuit || is.other != r.was.other {
				f.reindex(bktCircuit, r.was.circuit, id16{}, func(c id16) []byte { return circuitKey(key.site, c, r.was.other, key.n) })
				f.reindex(bktCircuit, id16{}, is.circuit, func(c id16) []byte { return circuitKey(key.site, c, is.other, key.n) })
			}
			if is.sources != r.was.sources {
				for _, was := range r.was.sources {
					f.reindex(bktFeed, was, id16{}, func(s id16) []byte { return feedKey(key.site, s, key.n) })
				}
				for _, source := range is.sources {
					f.reindex(bktFeed, id16{}, source, func(s id16) []byte { return feedKey(key.site, s, key.n) })
				}
			}
		case ofSite:
			if l := f.ords[key.site]; l != nil && l.self == key.n {
				l.dirty = true // its row is kept with the log too
			}
			if is.code != r.was.code {
				if r.was.code != "" {
					f.on(bktCode).delete(codeKey(r.was.code, key.site))
				}
				if is.code != "" {
					f.on(bktCode).put(codeKey(is.code, key.site), []byte{})
				}
			}
		}
		r.was = is
	}
}

// reindex moves a key from what it named to what it names; zero names nothing.
func (f *fold) reindex(bucket []byte, was, is id16, key func(id16) []byte) {
	if was == is {
		return
	}
	if was != (id16{}) {
		f.on(bucket).delete(key(was))
	}
	if is != (id16{}) {
		f.on(bucket).put(key(is), []byte{})
	}
}

// siteCode is a code as it is looked up: letters in capitals.
func siteCode(s string) string { return strings.ToUpper(strings.TrimSpace(s)) }
