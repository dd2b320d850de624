package store

import (
	"bytes"
	"cmp"
	"fmt"
	"maps"
	"slices"
	"strings"
	"time"

	"go.etcd.io/bbolt"

	"tripwell/forms"
	"tripwell/store/record"
)

// modelVersion names the shape and the rules of the read models; it grows with every change of either. A test holds it
// against what the models of a fixed book hash to.
const modelVersion = 5

// modelMark is what a file says of its read models: their rows also keep results, so another judge makes other models.
const modelMark = modelVersion<<32 | forms.JudgeVersion

// fold turns accepted records into read models, in book order. It gathers a group's changes in memory and writes them in
// flush, in the transaction that appends the records. It knows no clock and no setting, and what it comes to does not
// depend on where groups begin and end.
//
// Arrival never depends on other records: what a record names may come later, or never.
type fold struct {
	tx   *bbolt.Tx
	seq  uint64 // of the record being folded; what the book holds from here on has not happened yet
	logs map[string]*modelLog
	ords map[uint32]*modelLog

	rows      map[string]*overlay // by bucket
	things    map[thingID]uint32
	registers map[registerID]*register
	works     map[workID]*work
	entries   map[id16]uint64 // entries of this group, which the book's index does not know yet
	sums      map[string]int64
	also      map[string]int64 // by key of m_also
	tallies   map[string]*tally
	flaws     map[workID]bool                // devices whose defects are to be computed
	keeps     map[string]map[int32]monthKept // by key of m_keep
	rules     *rules
	grants    *grants
	ahead     map[uint64]*aheadRecord
	current   *saidRecord // a correction while it is folded: the book does not hold it yet
}

type thingID struct {
	id   id16
	site uint32
	typ  byte
}

type registerID struct {
	site uint32
	typ  byte
	n    uint32
}

type workID struct{ site, n uint32 }

// modelLog is a log as the models see it.
type modelLog struct {
	id      id16 // zero for org
	ord     uint32
	things  uint32
	live    uint64
	entries uint64
	self    uint32 // number of the site itself among its things, 0 before it is one
	dirty   bool
	zone    *time.Location // set when first asked for
}

func newFold(tx *bbolt.Tx) *fold {
	f := &fold{
		tx: tx, logs: map[string]*modelLog{}, ords: map[uint32]*modelLog{}, rows: map[string]*overlay{},
		things: map[thingID]uint32{}, registers: map[registerID]*register{}, works: map[workID]*work{},
		entries: map[id16]uint64{}, sums: map[string]int64{}, also: map[string]int64{}, tallies: map[string]*tally{}, flaws: map[workID]bool{}, keeps: map[string]map[int32]monthKept{},
	}
	f.rules, f.grants = newRules(f.on(bktRule).list), newGrants(f.on(bktGranted).list)
	f.rules.said = func(bucket, prefix []byte) []row { return f.on(bucket).list(prefix) }
	return f
}

// record folds one record. A *record.Fault says that its body cannot be understood; then nothing has changed.
func (f *fold) record(r *record.Record, st record.Stamp, seq uint64) error {
	f.seq = seq
	if typ, ok := registerKinds[r.Kind]; ok {
		return f.setFields(r, st, typ)
	}
	switch r.Kind {
	case "device.retired", "device.replaced":
		return f.retired(r, st)
	case "instrument.calibrated":
		return f.calibrated(r)
	case "instrument.proved":
		return f.instrumentProved(r)
	case "tag.bound", "tag.freed":
		return f.bound(r)
	case "entry.made", "entry.imported":
		return f.entryMade(r, st)
	case "entry.corrected", "entry.withdrawn", "record.sealed":
		return f.entrySaid(r, st)
	case "grant.set":
		return f.granted(r, st)
	case "round.closed", "round.accepted":
		return f.roundSaid(r)
	case "forms.set", "limits.set", "plan.set", "usual.set":
		return f.ruleSet(r)
	case "defect.opened", "defect.noted", "defect.made_safe", "defect.assigned", "defect.repaired", "defect.closed", "defect.reopened":
		return f.defectSaid(r)
	case "occasion.noted":
		return f.occasionNoted(r)
	case "pause.set":
		return f.pauseSet(r)
	}
	return nil
}

// registerKinds are the records that carry a map of fields, and what they are fields of.
var registerKinds = map[string]byte{
	"site.registered": ofSite, "site.set": ofSite, "place.registered": ofPlace, "place.set": ofPlace,
	"panel.set": ofPanel, "circuit.set": ofCircuit, "device.registered": ofDevice, "device.set": ofDevice,
	"instrument.set": ofInstrument, "round.made": ofRound, "round.set": ofRound,
}

func badBody(field, format string, a ...any) error {
	return &record.Fault{Code: "bad_body", Field: field, Text: fmt.Sprintf(format, a...)}
}

// log gives the model's number of a log, a new one where it is first met. name is a site id or org.
func (f *fold) log(name string) (*modelLog, error) {
	if l := f.logs[name]; l != nil {
		return l, nil
	}
	l := &modelLog{id: parseID(name)}
	b := f.tx.Bucket(bktSiteLog)
	if v := b.Get(l.id[:]); v != nil {
		u := unpacker{b: v}
		l.ord, l.things, l.live, l.entries, l.self = uint32(u.uint()), uint32(u.uint()), u.uint(), u.uint(), uint32(u.uint())
		if u.bad {
			return nil, errPacked
		}
	} else {
		if k, _ := f.tx.Bucket(bktSite).Cursor().Last(); k != nil {
			l.ord = read32(k)
		}
		for ord := range f.ords {
			l.ord = max(l.ord, ord)
		}
		l.ord++
		l.dirty = true
	}
	f.logs[name], f.ords[l.ord] = l, l
	return l, nil
}

// logOf gives the log of a number; it must be there.
func (f *fold) logOf(ord uint32) (*modelLog, error) {
	if l := f.ords[ord]; l != nil {
		return l, nil
	}
	v := f.tx.Bucket(bktSite).Get(put32(nil, ord))
	if len(v) < 16 {
		return nil, errPacked
	}
	name := id16(v[:16]).String()
	if name == "" {
		name = record.Org
	}
	return f.log(name)
}

// thing gives the number of a thing within its log, a new one where it is first met.
func (f *fold) thing(l *modelLog, typ byte, id id16) uint32 {
	key := thingID{id, l.ord, typ}
	if n, ok := f.things[key]; ok {
		return n
	}
	var n uint32
	if v := f.on(bktThing).get(thingKey(id, l.ord, typ)); len(v) == 4 {
		n = read32(v)
	} else {
		l.things++
		l.dirty = true
		n = l.things
		f.on(bktThing).put(thingKey(id, l.ord, typ), put32(nil, n))
		if typ == ofSite && id == l.id {
			l.self = n
		}
	}
	f.things[key] = n
	return n
}

// register gives a thing's row, an empty one where it was never spoken of.
func (f *fold) register(l *modelLog, typ byte, id id16) (registerID, *register, error) {
	key := registerID{l.ord, typ, f.thing(l, typ, id)}
	if r := f.registers[key]; r != nil {
		return key, r, nil
	}
	r := &register{id: id}
	if v := f.tx.Bucket(bktRegister).Get(registerKey(key.site, key.typ, key.n)); v != nil {
		var err error
		if r, err = unpackRegister(v); err != nil {
			return key, nil, fmt.Errorf("register row %s: %w", id, err)
		}
	}
	f.registers[key] = r
	return key, r, nil
}

// work gives a device's work row to be changed.
func (f *fold) work(site, n uint32) (*work, error) {
	key := workID{site, n}
	if w := f.works[key]; w != nil {
		return w, nil
	}
	w := &work{start: forms.NoDay, ended: forms.NoDay, came: forms.NoDay}
	if v := f.tx.Bucket(bktWork).Get(workKey(site, n)); v != nil {
		var err error
		if w, err = unpackWork(v, true); err != nil {
			return nil, fmt.Errorf("work row %d/%d: %w", site, n, err)
		}
		w.was = w.before()
	}
	f.works[key] = w
	return w, nil
}

// flush writes what changed. Keys are written in order, so that neighbours share a page.
func (f *fold) flush() error {
	if err := f.packDefects(); err != nil {
		return err
	}
	f.packRegisters()
	f.packWorks()
	f.packLogs()
	if err := f.packSums(); err != nil {
		return err
	}
	for _, name := range modelBuckets {
		if o := f.rows[string(name)]; o != nil {
			if err := o.flush(); err != nil {
				return fmt.Errorf("bucket %s: %w", name, err)
			}
		}
	}
	return nil
}

func (f *fold) packLogs() {
	for ord, l := range f.ords {
		if !l.dirty {
			continue
		}
		p := packer{make([]byte, 0, 20)}
		p.uint(uint64(l.ord))
		p.uint(uint64(l.things))
		p.uint(l.live)
		p.uint(l.entries)
		p.uint(uint64(l.self))
		f.on(bktSiteLog).put(l.id[:], p.b)
		site := append(bytes.Clone(l.id[:]), f.on(bktRegister).get(registerKey(ord, ofSite, l.self))...)
		if key := put32(nil, ord); !bytes.Equal(f.on(bktSite).get(key), site) {
			f.on(bktSite).put(key, site)
		}
		l.dirty = false
	}
}

// on gives the rows of a bucket with this group's changes over them.
func (f *fold) on(bucket []byte) *overlay {
	o := f.rows[string(bucket)]
	if o == nil {
		o = &overlay{bucket: f.tx.Bucket(bucket), changed: map[string][]byte{}}
		f.rows[string(bucket)] = o
	}
	return o
}

// overlay is a bucket with changes that are not written yet; a nil value is a row taken out.
type overlay struct {
	bucket  *bbolt.Bucket
	changed map[string][]byte
}

func (o *overlay) get(key []byte) []byte {
	if len(o.changed) > 0 {
		if v, ok := o.changed[string(key)]; ok {
			return v
		}
	}
	return o.bucket.Get(key)
}

// put keeps value, which must not be nil and must stay as it is.
func (o *overlay) put(key, value []byte) { o.changed[string(key)] = value }
func (o *overlay) delete(key []byte)     { o.changed[string(key)] = nil }

// list gives the rows under a prefix, by key.
func (o *overlay) list(prefix []byte) []row {
	var out []row
	c := o.bucket.Cursor()
	for k, v := c.Seek(prefix); k != nil && bytes.HasPrefix(k, prefix); k, v = c.Next() {
		if _, changed := o.changed[string(k)]; !changed {
			out = append(out, row{string(k), v})
		}
	}
	for k, v := range o.changed {
		if v != nil && strings.HasPrefix(k, string(prefix)) {
			out = append(out, row{k, v})
		}
	}
	slices.SortFunc(out, func(a, b row) int { return cmp.Compare(a.key, b.key) })
	return out
}

// row is one row of a bucket; value may point into the file.
type row struct {
	key   string
	value []byte
}

func (o *overlay) flush() error {
	for _, key := range slices.Sorted(maps.Keys(o.changed)) {
		var err error
		if v := o.changed[key]; v == nil {
			err = o.bucket.Delete([]byte(key))
		} else {
			err = o.bucket.Put([]byte(key), v)
		}
		if err != nil {
			return err
		}
	}
	clear(o.changed)
	return nil
}
