package store

import (
	"bytes"
	"cmp"
	"sync"
	"time"

	"go.etcd.io/bbolt"

	"tripwell/forms"
	"tripwell/store/record"
)

// View reads the store as it stood at one moment, within one scope. It belongs to one goroutine and remembers what it
// has looked up.
type View struct {
	tx    *bbolt.Tx
	s     *Store
	scope Scope

	ruled   *rules
	mayDo   *grants
	org     uint32
	opened  map[id16]*siteView
	tested  map[string]testedWith // by instrument
	counted map[string]*runs      // by installation and log
	every   []*siteView           // the registered sites of the scope, once they were asked for
	refused map[numbered]bool
	buckets map[string]*bbolt.Bucket
}

// bucket gives a bucket of the file, which the file itself would look up each time.
func (v *View) bucket(name []byte) *bbolt.Bucket {
	b := v.buckets[string(name)]
	if b == nil {
		b = v.tx.Bucket(name)
		if v.buckets == nil {
			v.buckets = map[string]*bbolt.Bucket{}
		}
		v.buckets[string(name)] = b
	}
	return b
}

var errNoSite = &Error{Code: "not_found", Field: "site", Text: "There is no such site here, or it is not yours to see. Choose one from the list of sites."}

// siteView is one site while it is read.
type siteView struct {
	Site
	ord   uint32
	id    id16
	zone  *time.Location
	today forms.Day

	places   map[id16]*Place
	circuits map[id16]circuit
	panels   map[id16]string
	tags     map[id16]string // by subject; the binding made last
	devices  map[id16]*deviceThing
	whole    bool // all places, circuits, panels and tags are in the maps
}

// circuit is what a list says of one.
type circuit struct {
	panel, numbers, supply string
	along                  map[id16]int // its devices from the breaker on, where somebody said the order
}

// open is the one place that holds a site against the scope: a site outside it is not found.
func (v *View) open(site string) (*siteView, error) {
	id := parseID(site)
	if id == (id16{}) || !v.scope.May(site) {
		return nil, errNoSite
	}
	if sv := v.opened[id]; sv != nil {
		return sv, nil
	}
	row := v.bucket(bktSiteLog).Get(id[:])
	if row == nil {
		return nil, errNoSite
	}
	u := unpacker{b: row}
	sv, _, err := v.openOrd(uint32(u.uint()))
	return sv, err
}

// openSite reads a site that was found, from its register row.
func (v *View) openSite(site string, id id16, ord uint32, row []byte) (*siteView, error) {
	sv := &siteView{ord: ord, id: id, Site: Site{ID: site}, zone: time.UTC}
	if err := sv.read(row); err != nil {
		return nil, err
	}
	sv.today = forms.DayOf(v.s.Now().In(sv.zone))
	if v.opened == nil {
		v.opened = map[id16]*siteView{}
	}
	v.opened[id] = sv
	return sv, nil
}

// everySite gives the registered sites of the scope, in the order they were met in the book. The list must not be changed.
func (v *View) everySite() ([]*siteView, error) {
	if v.every != nil {
		return v.every, nil
	}
	var out []*siteView
	err := v.scan(bktSite, nil, func(k, row []byte) error {
		sv, ok, err := v.openRow(read32(k), row)
		if ok && sv.Code != "" {
			out = append(out, sv)
		}
		return err
	})
	v.every = out
	return out, err
}

// read takes what the register says of a site itself.
func (sv *siteView) read(row []byte) error {
	if len(row) == 0 {
		return nil
	}
	site, known := sitesRead.get(row)
	if !known {
		t, err := unpackThing(row)
		if err != nil {
			return err
		}
		site = siteOf(sv.ID, &t)
		sitesRead.put(row, site)
	}
	sv.Site, sv.zone = site, location(site.Zone)
	return nil
}

// sitesRead keeps what rows of sites say, by their bytes: a list of thousands must not be read anew for every page.
var sitesRead = siteRows{known: map[string]Site{}}

type siteRows struct {
	mu    sync.RWMutex
	known map[string]Site
}

// siteRowsMost bounds what is held.
const siteRowsMost = 20_000

func (s *siteRows) get(row []byte) (Site, bool) {
	s.mu.RLock()
	defer s.mu.RUnlock()
	site, ok := s.known[string(row)]
	return site, ok
}

func (s *siteRows) put(row []byte, site Site) {
	s.mu.Lock()
	defer s.mu.Unlock()
	if len(s.known) >= siteRowsMost {
		clear(s.known)
	}
	s.known[string(row)] = site
}

// openOrd opens the site of a number; ok is false for the organisation's log and for what the scope leaves out.
func (v *View) openOrd(ord uint32) (sv *siteView, ok bool, err error) {
	return v.openRow(ord, v.bucket(bktSite).Get(put32(nil, ord)))
}

// openRow opens the site of a row of m_site.
func (v *View) openRow(ord uint32, row []byte) (sv *siteView, ok bool, err error) {
	if len(row) < 16 {
		return nil, false, errPacked
	}
	id := id16(row[:16])
	if sv := v.opened[id]; sv != nil {
		return sv, true, nil
	}
	site := id.String()
	if site == "" || !v.scope.May(site) {
		return nil, false, nil
	}
	sv, err = v.openSite(site, id, ord, row[16:])
	return sv, err == nil, err
}

// remember makes room for what is looked up of a site; lists of sites need none.
func (sv *siteView) remember() {
	if sv.places == nil {
		sv.places, sv.circuits, sv.panels = map[id16]*Place{}, map[id16]circuit{}, map[id16]string{}
		sv.tags, sv.devices = map[id16]string{}, map[id16]*deviceThing{}
	}
}

// thing reads the winners of a thing's fields; they point into the file. ok is false where nothing was said of it.
func (v *View) thing(sv *siteView, typ byte, id id16) (t thing, ok bool, err error) {
	n, ok := v.number(sv, typ, id)
	if !ok {
		return thing{}, false, nil
	}
	row := v.bucket(bktRegister).Get(registerKey(sv.ord, typ, n))
	if row == nil {
		return thing{}, false, nil
	}
	t, err = unpackThing(row)
	return t, err == nil, err
}

func (v *View) number(sv *siteView, typ byte, id id16) (n uint32, ok bool) {
	row := v.bucket(bktThing).Get(thingKey(id, sv.ord, typ))
	if len(row) != 4 {
		return 0, false
	}
	return read32(row), true
}

// rules gives the forms, limit sets and plans as this view sees them.
func (v *View) rules() *rules {
	if v.ruled == nil {
		o := overlay{bucket: v.bucket(bktRule)}
		v.ruled = newRules(o.list)
		v.ruled.said = func(bucket, prefix []byte) []row {
			o := overlay{bucket: v.bucket(bucket)}
			return o.list(prefix)
		}
		if row := v.bucket(bktSiteLog).Get(make([]byte, 16)); row != nil {
			u := unpacker{b: row}
			v.org = uint32(u.uint())
		}
	}
	return v.ruled
}

// whoMay gives what people may do as this view sees it.
func (v *View) whoMay() *grants {
	if v.mayDo == nil {
		o := overlay{bucket: v.bucket(bktGranted)}
		v.mayDo = newGrants(o.list)
	}
	return v.mayDo
}

// orgLog gives the number of the organisation's log, 0 while nothing was said in it.
func (v *View) orgLog() uint32 {
	v.rules()
	return v.org
}

// seqOf finds a record's place in the book.
func (v *View) seqOf(id id16) (seq uint64, ok bool) {
	row := v.bucket(bktID).Get(id[:])
	return readKey64(row), row != nil
}

// recordAt reads a record by id where the scope allows its log and its day.
func (v *View) recordAt(id id16) (*record.Record, record.Stamp, kept, uint64, error) {
	seq, ok := v.seqOf(id)
	if !ok {
		return nil, record.Stamp{}, kept{}, 0, errNoEntry
	}
	r, st, k, err := readBook(v.tx, seq)
	if err == nil && !v.scope.mayRead(r.Log) {
		err = errNoEntry
	}
	if err == nil {
		if is, wrong := v.shows(r, st); wrong != nil || !is {
			err = cmp.Or(wrong, error(errNoEntry))
		}
	}
	return r, st, k, seq, err
}

// scan reads the rows under a prefix; keys and values point into the file.
func (v *View) scan(bucket, prefix []byte, fn func(key, row []byte) error) error {
	c := v.bucket(bucket).Cursor()
	for k, row := c.Seek(prefix); k != nil && bytes.HasPrefix(k, prefix); k, row = c.Next() {
		if err := fn(k, row); err != nil {
			return err
		}
	}
	return nil
}
