package store

import (
	"context"
	"crypto/sha256"
	"errors"
	"time"

	"tripwell/store/record"
)

// Incoming is one record from elsewhere: the exact bytes its author made, and what earlier holders say.
type Incoming struct {
	Record []byte
	Held   []Held
}

// Held says that a store had the record before us.
type Held = record.Held

// Sender is who pushes: the installation its token names. Sent is the sender's own clock at sending, for the measured
// offset; zero when it did not say.
type Sender struct {
	Installation string
	Via          string
	Sent         time.Time
	Owner        bool // the socket of whoever owns the folder
	// Rescue: the records come in a file somebody saved on their phone. They are judged as if the phones that made
	// them had sent them.
	Rescue bool
}

// Receipt is what became of one record: stored | already | held | refused.
type Receipt struct {
	ID    string `json:"id"`
	State string `json:"state"`
	Store string `json:"store"`
	Epoch int    `json:"epoch"`
	Log   string `json:"log,omitempty"`
	Pos   int64  `json:"pos,omitempty"`
	Code  string `json:"code,omitempty"`
	Text  string `json:"text,omitempty"`
	// Reused: the author's count n was taken by another record, which marks a phone that was copied or restored. It
	// draws a new id for itself.
	Reused bool `json:"reused,omitempty"`
}

// arrival is a record read and hashed before the writer sees it.
type arrival struct {
	r     *record.Record
	fault *record.Fault
	st    stamped
}

// Push takes records from elsewhere; one receipt for each, in order. An error means that the sender knows nothing of
// what was decided: sending the same again is always right.
func (s *Store) Push(ctx context.Context, from Sender, batch []Incoming) ([]Receipt, error) {
	if len(batch) == 0 {
		return []Receipt{}, nil
	}
	received := s.now().UTC().Truncate(time.Millisecond)
	arrivals := make([]arrival, len(batch))
	st := record.Stamp{Received: received, Via: from.Via}
	if !from.Sent.IsZero() {
		st.OffsetMS = received.Sub(from.Sent).Milliseconds()
	}
	line := st.Line()
	for i, in := range batch {
		if len(in.Held) == 0 {
			arrivals[i] = s.arrive(in.Record, st, line)
			continue
		}
		held := st
		held.Held = in.Held
		arrivals[i] = s.arrive(in.Record, held, held.Line())
	}
	if err := s.makeReady(arrivals); err != nil {
		return nil, err
	}
	receipts := make([]Receipt, len(batch))
	err := s.do(ctx, len(batch), func(g *group) error {
		for i, a := range arrivals {
			var err error
			if receipts[i], err = g.take(from, a, received); err != nil {
				return err
			}
		}
		return nil
	})
	if err != nil {
		return nil, err
	}
	return receipts, nil
}

func (s *Store) arrive(raw []byte, st record.Stamp, line []byte) arrival {
	r, fault := record.Parse(raw)
	a := arrival{r: r, fault: fault, st: stamped{stamp: st}}
	if fault != nil {
		return a
	}
	a.st = stampedWith(st, line, raw)
	s.said.read(r)
	if len(line) > maxStamp {
		a.fault = &record.Fault{Code: "too_large", Field: "held", Text: "The record comes with a longer list of earlier holders than a stamp can carry. Send it from the store it was first held by."}
	}
	return a
}

// maxStamp is the longest stamp line: its length is kept in two bytes.
const maxStamp = 1<<16 - 1

// take decides one record.
func (g *group) take(from Sender, a arrival, received time.Time) (Receipt, error) {
	if a.fault != nil {
		return g.refuse(from, a.r, a.fault, received)
	}
	had, ok, err := g.find(a.r.ID)
	if err != nil {
		return Receipt{}, err
	}
	if ok {
		same, sealed, err := g.isSame(had, a.r.Raw)
		if err != nil {
			return Receipt{}, err
		}
		if !same && !sealed && record.IsNamed(a.r.ID) {
			if err := g.keepDiffering(from, a, had, received); err != nil {
				return Receipt{}, err
			}
		}
		if same || record.IsNamed(a.r.ID) {
			return g.receipt(a.r.ID, "already", had.log, had.pos), nil
		}
		return g.refuse(from, a.r, &record.Fault{Code: "id_reused", Field: "id", Text: "Another record carries this id already. The first one stays; give the new one an id of its own."}, received)
	}
	if g.refused {
		if rc, ok, err := g.refusedBefore(a.r, sha256.Sum256(a.r.Raw)); ok || err != nil {
			return rc, err
		}
	}
	fault, err := g.permit(from, a.r, received)
	if err != nil {
		return Receipt{}, err
	}
	if fault != nil {
		return g.refuse(from, a.r, fault, received)
	}
	g.reused = false
	pos, err := g.accept(a.r, a.st)
	if errors.As(err, &fault) {
		return g.refuse(from, a.r, fault, received)
	}
	if err != nil {
		return Receipt{}, err
	}
	receipt := g.receipt(a.r.ID, "stored", a.r.Log, pos)
	receipt.Reused = g.reused
	return receipt, nil
}
