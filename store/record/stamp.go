package record

import (
	"encoding/json"
	"fmt"
	"strconv"
	"time"
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
func ParseStamp(line []byte) (Stamp, error) {
	var in struct {
		Received time.Time `json:"received"`
		OffsetMS int64     `json:"offset_ms"`
		Via      string    `json:"via"`
		Held     []Held    `json:"held"`
	}
	if err := json.Unmarshal(line, &in); err != nil {
		return Stamp{}, fmt.Errorf("stamp: %w", err)
	}
	return Stamp{Received: in.Received, OffsetMS: in.OffsetMS, Via: in.Via, Held: in.Held}, nil
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
