package record

import (
	"encoding/json"
	"errors"
	"strconv"
	"time"

	"github.com/go-json-experiment/json/jsontext"
)

// Stamp is what a store says of a record when it accepts it; made once, then part of the leaf.
type Stamp struct {
	Received time.Time // UTC, milliseconds
	OffsetMS int64     // received minus the sender's own time at sending; 0 where it did not say
	Via      string
	Held     []Held // earlier holders
}

// Line writes the stamp: {"received","offset_ms","via","held"}, one line.
func (s Stamp) Line() []byte {
	b := make([]byte, 0, 96)
	b = append(b, `{"received":"`...)
	b = s.Received.UTC().AppendFormat(b, "2006-01-02T15:04:05.000Z07:00")
	b = append(b, `","offset_ms":`...)
	b = strconv.AppendInt(b, s.OffsetMS, 10)
	b = append(b, `,"via":`...)
	via, _ := json.Marshal(s.Via)
	b = append(b, via...)
	b = append(b, `,"held":[`...)
	for i, h := range s.Held {
		if i > 0 {
			b = append(b, ',')
		}
		store, _ := json.Marshal(h.Store)
		b = append(append(b, `{"store":`...), store...)
		b = append(b, `,"received":"`...)
		b = h.Received.UTC().AppendFormat(b, "2006-01-02T15:04:05.000Z07:00")
		b = append(b, `"}`...)
	}
	return append(b, `]}`...)
}

// ParseStamp reads a stamp line.
func ParseStamp(line []byte) (st Stamp, err error) {
	if v := jsontext.Value(line); !v.IsValid() || len(line) == 0 || line[0] != '{' {
		return st, errors.New("the stamp is no line of JSON")
	}
	bad := members(line, func(name string, v []byte) *Fault {
		ok := true
		switch name {
		case "received":
			st.Received, ok = ParseTime(text(v))
			st.Received = st.Received.UTC()
		case "offset_ms":
			n, err := strconv.ParseInt(string(v), 10, 64)
			st.OffsetMS, ok = n, err == nil
		case "via":
			st.Via, ok = text(v), v[0] == '"'
		case "held":
			st.Held, ok = parseHeld(v)
		}
		if !ok {
			return fault("malformed", name, "The stamp's %s cannot be read.", name)
		}
		return nil
	})
	if bad != nil {
		return st, bad
	}
	if st.Received.IsZero() {
		return st, errors.New("the stamp does not say when the record was received")
	}
	return st, nil
}

func parseHeld(v []byte) (held []Held, ok bool) {
	if v[0] != '[' {
		return nil, false
	}
	bad := elements(v, func(e []byte) *Fault {
		if e[0] != '{' {
			return &Fault{}
		}
		one := bodyOf(e)
		at, ok := ParseTime(text(orNull(one["received"])))
		if !ok {
			return &Fault{}
		}
		held = append(held, Held{Store: text(orNull(one["store"])), Received: at.UTC()})
		return nil
	})
	return held, bad == nil
}

// Earliest gives the earliest time any holder received the record.
func (s Stamp) Earliest() time.Time {
	t := s.Received
	for _, h := range s.Held {
		if h.Received.Before(t) {
			t = h.Received
		}
	}
	return t
}

// Leaf gives the leaf data of a log's tree: stamp, 0x0A, record.
func Leaf(stamp, record []byte) []byte {
	b := make([]byte, 0, len(stamp)+1+len(record))
	return append(append(append(b, stamp...), '\n'), record...)
}
