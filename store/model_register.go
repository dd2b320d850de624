package store

import (
	"bytes"
	"cmp"
	"encoding/json"
	"slices"
	"strconv"

	"tripwell/forms"
	"tripwell/store/record"
)

// register is one thing (site, place, panel, circuit, device, instrument) as the book tells it: every field with what
// was said of it. Names beginning with # are facts that records of other kinds state:
//
//	#retired   {"reason","on"} of device.retired or device.replaced
//	#with      id of the device that took its place
//	#replaces  id of the device whose place it took
type register struct {
	id     id16
	born   int64 // ms since 1970 at which it was registered, the earliest where several records say so; 0 = never
	fields []field
	was    registerBefore
	dirty  bool
}

// registerBefore is what indexes hold for the row as stored.
type registerBefore struct {
	place   id16
	circuit id16
	other   bool    // hangs on the circuit without protecting it
	sources [3]id16 // the device it is fed from, the one that took its place, and the site a portable item is at
	code    string
}

// stands gives what the indexes are to hold.
func (r *register) stands() registerBefore {
	return registerBefore{place: r.idOf("place"), circuit: r.idOf("circuit"), other: !forms.ProtectsCircuit(r.text("kind")),
		sources: [3]id16{r.idOf("fed_by"), r.idOf("#with"), r.idOf("at_site")}, code: siteCode(r.text("code"))}
}

type field struct {
	name string
	said []record.Said // the winner first
}

// keepSaid bounds what is kept of one field: the newest by (clock, id), whatever order they arrive in.
const keepSaid = 8

func (r *register) find(name string) (int, bool) {
	return slices.BinarySearchFunc(r.fields, name, func(f field, name string) int { return cmp.Compare(f.name, name) })
}

// say adds what one record says of a field.
func (r *register) say(name string, s record.Said) {
	i, ok := r.find(name)
	if !ok {
		r.fields = slices.Insert(r.fields, i, field{name: name})
	}
	r.dirty = true
	f := &r.fields[i]
	f.said = record.Weigh(append(f.said, s))
	if len(f.said) > keepSaid {
		f.said = f.said[:keepSaid]
	}
}

// value gives the winner of a field, nil where it was never set or was cleared.
func (r *register) value(name string) json.RawMessage {
	i, ok := r.find(name)
	if !ok {
		return nil
	}
	return present(r.fields[i].said[0].Value)
}

func present(v json.RawMessage) json.RawMessage {
	if len(v) == 0 || v[0] == 'n' {
		return nil
	}
	return v
}

func (r *register) text(name string) string { return jsonText(r.value(name)) }

// jsonText gives the text of a JSON string, "" of anything else.
func jsonText(v []byte) string {
	if len(v) < 2 || v[0] != '"' {
		return ""
	}
	if bytes.IndexByte(v, '\\') < 0 {
		return string(v[1 : len(v)-1])
	}
	var s string
	if json.Unmarshal(v, &s) != nil {
		return ""
	}
	return s
}

// jsonNumber gives the figure of a JSON number, 0 of anything else.
func jsonNumber(v []byte) float64 {
	f, err := strconv.ParseFloat(string(v), 64)
	if err != nil {
		return 0
	}
	return f
}

// idOf gives the id a field names; zero where it names none.
func (r *register) idOf(name string) id16 { return parseID(r.text(name)) }

func parseID(s string) id16 {
	b, ok := record.IDBytes(s)
	if !ok {
		return id16{}
	}
	return b
}

func (i id16) String() string {
	if i == (id16{}) {
		return ""
	}
	return record.IDText(i[:])
}

// pack writes the row: the winners first, so that a list reads no further.
func (r *register) pack() []byte {
	p := packer{make([]byte, 0, 512)}
	p.id(r.id)
	p.int(r.born)
	p.uint(uint64(len(r.fields)))
	for _, f := range r.fields {
		p.text(f.name)
		p.bytes(f.said[0].Value)
	}
	for _, f := range r.fields {
		p.uint(uint64(len(f.said)))
		for i, s := range f.said {
			p.fixed(s.Clock)
			p.id(parseID(s.ID))
			p.id(parseID(s.From))
			p.uint(s.Seen)
			if i > 0 {
				p.bytes(s.Value)
			}
		}
	}
	return p.b
}

// unpackRegister reads a whole row; nothing of it points into b.
func unpackRegister(b []byte) (*register, error) {
	u := unpacker{b: b}
	r := &register{id: u.id(), born: u.int()}
	n := u.uint()
	for i := uint64(0); i < n && !u.bad; i++ {
		f := field{name: u.text()}
		f.said = []record.Said{{Value: bytes.Clone(u.bytes())}}
		r.fields = append(r.fields, f)
	}
	for i := range r.fields {
		f := &r.fields[i]
		for j, said := uint64(0), u.uint(); j < said && !u.bad; j++ {
			s := record.Said{Clock: u.fixed(), ID: u.id().String(), From: u.id().String(), Seen: u.uint()}
			if j == 0 {
				s.Value = f.said[0].Value
				f.said[0] = s
				continue
			}
			s.Value = bytes.Clone(u.bytes())
			f.said = append(f.said, s)
		}
	}
	r.was = r.stands()
	return r, u.err()
}

// thing is a register row as lists read it: the winners alone. Values point into the row.
type thing struct {
	id     id16
	born   int64
	fields []thingField
	said   []byte // who said what and when, as packed
}

type thingField struct {
	name  string
	value []byte
}

func unpackThing(b []byte) (thing, error) {
	u := unpacker{b: b}
	t := thing{id: u.id(), born: u.int()}
	n := u.uint()
	if n > uint64(len(b)) {
		return t, errPacked
	}
	t.fields = make([]thingField, 0, n)
	for i := uint64(0); i < n && !u.bad; i++ {
		name, value := fieldName(u.bytes()), u.bytes()
		t.fields = append(t.fields, thingField{name, value})
	}
	t.said = u.b
	return t, u.err()
}

// saidOf gives the stamp and the record of what stands in a field.
func (t *thing) saidOf(name string) (clock uint64, rec id16) {
	u := unpacker{b: t.said}
	for i := range t.fields {
		for j, said := uint64(0), u.uint(); j < said && !u.bad; j++ {
			clock, rec = u.fixed(), u.id()
			if j == 0 && t.fields[i].name == name {
				return clock, rec
			}
			u.id()
			u.uint()
			if j > 0 {
				u.bytes()
			}
		}
	}
	return 0, id16{}
}

// seen gives the largest stamp of all that was said of the thing: what somebody knew of it who knows this row.
func (t *thing) seen() uint64 {
	var last uint64
	u := unpacker{b: t.said}
	for range t.fields {
		for j, said := uint64(0), u.uint(); j < said && !u.bad; j++ {
			last = max(last, u.fixed())
			u.id()
			u.id()
			u.uint()
			if j > 0 {
				u.bytes()
			}
		}
	}
	return last
}

// fieldNames spares a list the making of the same names over and over.
var fieldNames = func() map[string]string {
	m := map[string]string{}
	for _, n := range []string{"kind", "place", "circuit", "make", "model", "serial", "rating_a", "nominal_v", "rated_residual_ma",
		"delayed", "waveform", "equipment_ground", "faces", "installed", "limit_set", "formerly", "where", "note", "gauge",
		"length_m", "building", "floor", "room", "name", "order", "critical_load", "whom_to_tell", "test_from", "test_until", "panel", "numbers",
		"breaker_a", "poles", "voltage_v", "conductor", "standard", "supply", "location", "code", "zone", "address",
		"fed_by", "at_site", "#retired", "#with", "#replaces"} {
		m[n] = n
	}
	return m
}()

func fieldName(b []byte) string {
	if s, ok := fieldNames[string(b)]; ok {
		return s
	}
	return string(b)
}

func (t *thing) value(name string) []byte {
	for i := range t.fields {
		if t.fields[i].name == name {
			return present(t.fields[i].value)
		}
	}
	return nil
}

func (t *thing) text(name string) string    { return jsonText(t.value(name)) }
func (t *thing) number(name string) float64 { return jsonNumber(t.value(name)) }
