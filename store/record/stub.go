package record

import (
	"bytes"
	"encoding/base64"
	"encoding/json"
	"slices"
	"strconv"
	"strings"

	"github.com/go-json-experiment/json/jsontext"
)

// A stub is what stands in the place of a record whose bytes were dropped (record.sealed): its envelope, its leaf hash and
// those members of its body that are days, ids, counts and words of the trade. It has neither `v` nor `body`, which every
// record must have, so no record can be taken for one.
//
//	{"sealed":LEAF HASH in base64,"id":…,"kind":…,"log":…,"subject":…,"at":…,"clock":…,"by":…,"from":…,"n":…,"kept":{…}}

// keptTable names the kinds that can be sealed and what of their body a stub keeps, where it is plain (see plain).
const keptTable = `
site.set
place.registered
place.set
panel.set
circuit.set
device.registered
device.set
device.retired         on
device.replaced        with on
entry.made             form round
entry.imported         form day
entry.corrected        entry
entry.withdrawn        entry
round.made
round.set
round.closed           day done left skipped back
round.accepted
defect.opened          device cause severity protector due
defect.noted           device severity due
defect.made_safe       device
defect.assigned        device to due
defect.repaired        device
defect.closed          device
defect.reopened        device
occasion.noted         cause on devices tasks
pause.set              from until devices
instrument.set
instrument.calibrated  on due out errors
instrument.proved      on tag works
`

var keptWhenSealed = func() map[string][]string {
	m := map[string][]string{}
	for line := range strings.Lines(keptTable) {
		if f := strings.Fields(line); len(f) > 0 {
			m[f[0]] = f[1:]
		}
	}
	return m
}()

// Sealable reports whether records of a kind can lose their bytes.
func Sealable(kind string) bool {
	_, ok := keptWhenSealed[kind]
	return ok
}

var stubStart = []byte(`{"sealed":"`)

// Stub writes what stays of a record. leaf is its leaf hash.
func Stub(r *Record, leaf [32]byte) []byte {
	return writeStub(r, base64.StdEncoding.EncodeToString(leaf[:]), kept(r.Kind, r.Body))
}

func writeStub(r *Record, leaf string, body []byte) []byte {
	b := make([]byte, 0, 400+len(body))
	str := func(name, v string) {
		b = append(append(b, name...), ':')
		b, _ = jsontext.AppendQuote(b, v)
	}
	str(`{"sealed"`, leaf)
	str(`,"id"`, r.ID)
	str(`,"kind"`, r.Kind)
	str(`,"log"`, r.Log)
	str(`,"subject"`, r.Subject)
	str(`,"at"`, r.AtText)
	str(`,"clock"`, ClockText(r.Clock))
	str(`,"by"`, r.By)
	str(`,"from"`, r.From)
	b = strconv.AppendInt(append(b, `,"n":`...), r.N, 10)
	b = append(append(b, `,"kept":`...), body...)
	return append(b, '}')
}

// kept writes those members of a body that stay.
func kept(kind string, body []byte) []byte {
	said := bodyOf(body)
	b := []byte{'{'}
	for _, name := range keptWhenSealed[kind] {
		v, ok := said[name]
		if !ok || !plain(v) {
			continue
		}
		if len(b) > 1 {
			b = append(b, ',')
		}
		b = append(append(append(append(b, '"'), name...), `":`...), v...)
	}
	return append(b, '}')
}

// plain holds what cannot carry words about a person: true and false, numbers, ids, days, words without spaces of at most
// 40 lower-case letters, digits, '-', '_', ':' and '/', tags, and lists and objects of these.
func plain(v []byte) bool {
	switch v[0] {
	case '"':
		s := text(v)
		return len(v) == len(s)+2 && (IsID(s) || IsTag(s) || isDay(s) || isPlainWord(s))
	case '[':
		return elements(v, notPlain) == nil
	case '{':
		return members(v, func(name string, value []byte) *Fault {
			if !isPlainWord(name) {
				return &Fault{}
			}
			return notPlain(value)
		}) == nil
	case 'n':
		return false
	}
	return true
}

func notPlain(v []byte) *Fault {
	if !plain(v) {
		return &Fault{}
	}
	return nil
}

func isPlainWord(s string) bool {
	for i := 0; i < len(s); i++ {
		if c := s[i]; (c < 'a' || c > 'z') && (c < '0' || c > '9') && !strings.ContainsRune("-_:/", rune(c)) {
			return false
		}
	}
	return len(s) > 0 && len(s) <= 40
}

// Stored reads what stands in a book: a record, strictly, or a stub, which must be written exactly as Stub writes it.
func Stored(raw []byte) (*Record, *Fault) {
	if r := readStub(raw); r != nil {
		return r, nil
	}
	return Parse(raw)
}

// Leaf gives the leaf hash that a stub states; ok is false of a record that is whole.
func (r *Record) Leaf() (leaf [32]byte, ok bool) {
	b, err := base64.StdEncoding.DecodeString(r.Sealed)
	if err != nil || len(b) != len(leaf) {
		return leaf, false
	}
	return [32]byte(b), true
}

// readStub gives nil for whatever is no stub.
func readStub(raw []byte) *Record {
	if !bytes.HasPrefix(raw, stubStart) || checkBytes(raw) != nil {
		return nil
	}
	r := &Record{Raw: raw}
	bad := members(raw, func(name string, v []byte) *Fault {
		switch name {
		case "sealed":
			r.Sealed = text(v)
			return nil
		case "kept":
			if v[0] == '{' {
				r.Body = json.RawMessage(v)
			}
			return nil
		}
		if !slices.Contains(envelopeOrder, name) || name == "v" || name == "body" {
			return &Fault{}
		}
		return r.member(name, v)
	})
	if _, ok := r.Leaf(); bad != nil || !ok || r.Body == nil || !Sealable(r.Kind) {
		return nil
	}
	if !bytes.Equal(writeStub(r, r.Sealed, kept(r.Kind, r.Body)), raw) {
		return nil
	}
	return r
}
