// Package record is the envelope of one fact: strict reading of its bytes, ids, stamps of the hybrid clock, merging of
// fields, tags. It does no I/O and knows no store, no clock but the one handed in, and no other record than the one it
// reads: whatever needs a second record is decided by the read model.
//
// A record is one line of UTF-8 JSON and its bytes are never written again:
//
//	{"id":UUID,"kind":"entry.made","v":1,"log":site id | "org" | "office","subject":UUID,"at":RFC 3339 with offset,
//	 "clock":16 hex digits,"by":UUID,"from":UUID,"n":count from 1,"body":{…}}
//
// static/record.mjs, clock.mjs, merge.mjs and tag.mjs say the same in JavaScript; testdata/records.json and
// testdata/merge.json are run through both.
package record

import (
	"encoding/json"
	"fmt"
	"math"
	"strconv"
	"time"

	"github.com/go-json-experiment/json/jsontext"
)

// MaxBytes is the largest record.
const MaxBytes = 65536

// MaxDepth is how deep objects and lists of a record may be nested, the record itself counted.
const MaxDepth = 100

// The two logs that are no site's.
const (
	Org    = "org"
	Office = "office"
)

// Record is a record as read. Raw holds its exact bytes, Body points into them.
type Record struct {
	ID      string
	Kind    string
	V       int
	Log     string
	Subject string
	At      time.Time // in the offset it was written with
	AtText  string
	Clock   uint64
	By      string
	From    string
	N       int64
	Body    json.RawMessage
	Raw     []byte
	Sealed  string // of a stub: the leaf hash of the record whose bytes were dropped, in base64; Body is then what was kept

	// Read is the body as its reader decoded it ahead of time, nil where nobody did. What is set is never changed again.
	Read any
}

// Held says that a store had the record before us.
type Held struct {
	Store    string    `json:"store"`
	Received time.Time `json:"received"`
}

// Fault is why a record is refused. Code is one of: malformed, duplicate_name, number_range, too_large, bad_envelope,
// unknown_kind, wrong_log, bad_body, not_permitted, id_reused. Field is the member it is about, where there is one.
type Fault struct {
	Code  string
	Field string
	Text  string
}

func (f *Fault) Error() string { return f.Text }

func fault(code, field, format string, args ...any) *Fault {
	return &Fault{Code: code, Field: field, Text: fmt.Sprintf(format, args...)}
}

// Parse reads a record strictly. With a fault the record holds what could be read of the envelope (and always Raw), so
// that a refusal can name it.
func Parse(raw []byte) (*Record, *Fault) {
	r := &Record{Raw: raw}
	if f := checkBytes(raw); f != nil {
		return r, f
	}
	if f := r.envelope(); f != nil {
		return r, f
	}
	return r, r.check()
}

// Reread reads the envelope of a record that was accepted before: its bytes were found good then. Bytes that were damaged
// since give a fault. A stub is read as what was kept of its record.
func Reread(raw []byte) (r *Record, f *Fault) {
	if r := readStub(raw); r != nil {
		return r, nil
	}
	r = &Record{Raw: raw}
	defer func() {
		if recover() != nil { // walking relies on good JSON and runs over the end of anything else
			f = fault("malformed", "", "The record is damaged: it is not the JSON that was accepted.")
		}
	}()
	return r, r.envelope()
}

// envelope reads the members in whatever order they stand; the first fault is kept until all are read.
func (r *Record) envelope() *Fault {
	var first *Fault
	keep := func(f *Fault) {
		if first == nil {
			first = f
		}
	}
	var seen uint
	_ = members(r.Raw, func(name string, v []byte) *Fault {
		i, ok := envelopeNames[name]
		if !ok {
			return nil
		}
		seen |= 1 << i
		keep(r.member(name, v))
		return nil
	})
	if first == nil && seen != 1<<len(envelopeOrder)-1 {
		for i, name := range envelopeOrder {
			if seen&(1<<i) == 0 {
				return fault("bad_envelope", name, "The record has no %q: every record carries %s.", name, envelopeList)
			}
		}
	}
	return first
}

var (
	envelopeOrder = []string{"id", "kind", "v", "log", "subject", "at", "clock", "by", "from", "n", "body"}
	envelopeNames = func() map[string]uint {
		m := map[string]uint{}
		for i, n := range envelopeOrder {
			m[n] = uint(i)
		}
		return m
	}()
)

const envelopeList = "id, kind, v, log, subject, at, clock, by, from, n and body"

func (r *Record) member(name string, v []byte) *Fault {
	switch name {
	case "id":
		return idMember(name, v, &r.ID)
	case "subject":
		return idMember(name, v, &r.Subject)
	case "by":
		return idMember(name, v, &r.By)
	case "from":
		return idMember(name, v, &r.From)
	case "kind":
		if v[0] != '"' || len(v) == 2 {
			return fault("bad_envelope", name, "The record's kind must be a word such as \"entry.made\".")
		}
		r.Kind = text(v)
	case "log":
		if s := text(v); v[0] == '"' && (s == Org || s == Office || IsID(s)) {
			r.Log = s
			return nil
		}
		return fault("bad_envelope", name, "The record's log must be a site id, \"org\" or \"office\".")
	case "at":
		t, ok := ParseTime(text(v))
		if v[0] != '"' || !ok {
			return fault("bad_envelope", name, "The record's at must be a date and time with its offset, such as 2026-12-01T09:30:00+01:00.")
		}
		r.At, r.AtText = t, text(v)
	case "clock":
		c, ok := ParseClock(text(v))
		if v[0] != '"' || !ok {
			return fault("bad_envelope", name, "The record's clock must be 16 lower-case hexadecimal digits, more than zero and below 8000000000000000.")
		}
		r.Clock = c
	case "v":
		n, ok := count(v)
		if !ok || n > math.MaxInt32 {
			return fault("bad_envelope", name, "The record's v must be a whole number from 1.")
		}
		r.V = int(n)
	case "n":
		n, ok := count(v)
		if !ok {
			return fault("bad_envelope", name, "The record's n must be a whole number from 1.")
		}
		r.N = n
	case "body":
		if v[0] != '{' {
			return fault("bad_envelope", name, "The record's body must be an object.")
		}
		r.Body = json.RawMessage(v)
	}
	return nil
}

func idMember(name string, v []byte, into *string) *Fault {
	if s := text(v); v[0] == '"' && IsID(s) {
		*into = s
		return nil
	}
	return fault("bad_envelope", name, "The record's %s must be a UUID of version 7 or 8 in lower case.", name)
}

// count reads a whole number from 1, however it is written.
func count(v []byte) (int64, bool) {
	if !isNumber(v) {
		return 0, false
	}
	if n, err := strconv.ParseInt(string(v), 10, 64); err == nil {
		return n, n >= 1
	}
	x, err := strconv.ParseFloat(string(v), 64)
	if err != nil || x != math.Trunc(x) || x < 1 {
		return 0, false
	}
	return int64(x), true
}

// Write makes a record's bytes from its fields (Raw and AtText aside). Only its author ever calls it, and only once.
func Write(r Record) []byte {
	b := make([]byte, 0, 320+len(r.Body))
	str := func(name, v string) {
		b = append(append(b, name...), ':')
		b, _ = jsontext.AppendQuote(b, v)
	}
	str(`{"id"`, r.ID)
	str(`,"kind"`, r.Kind)
	b = strconv.AppendInt(append(b, `,"v":`...), int64(r.V), 10)
	str(`,"log"`, r.Log)
	str(`,"subject"`, r.Subject)
	str(`,"at"`, TimeText(r.At))
	str(`,"clock"`, ClockText(r.Clock))
	str(`,"by"`, r.By)
	str(`,"from"`, r.From)
	b = strconv.AppendInt(append(b, `,"n":`...), r.N, 10)
	b = append(append(b, `,"body":`...), r.Body...)
	return append(b, '}')
}
