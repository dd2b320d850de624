package store

import (
	"bytes"
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"time"

	"tripwell/store/proof"
	"tripwell/store/record"
)

// Draft is a record to be made here, by an office page or a command. The store gives it from, n, clock and, where
// empty, id, at and subject (the id of the record itself). A body that sets fields and says no `seen` is given the
// largest stamp the store knows: its author read the store's own pages.
type Draft struct {
	ID      string // UUID; pages carry it so that posting twice is harmless
	Kind    string
	Log     string
	Subject string
	At      time.Time
	By      string // person id; the store's own id stands for the owner of the folder
	Body    any    // marshalled, or a json.RawMessage
}

// Append makes records of the drafts and appends them in one transaction, in order. Forms refuse: a draft that breaks
// a rule returns *Error and nothing of the call is written. A draft whose id is there already is answered `already`.
func (s *Store) Append(ctx context.Context, drafts ...Draft) ([]Receipt, error) {
	drafts, err := encodeBodies(drafts)
	if err != nil {
		return nil, err
	}
	var receipts []Receipt
	err = s.do(ctx, len(drafts), func(g *group) (err error) {
		receipts, err = g.appendDrafts(drafts)
		return err
	})
	if err != nil {
		return nil, err
	}
	return receipts, nil
}

// encodeBodies marshals bodies before the writer is asked for.
func encodeBodies(drafts []Draft) ([]Draft, error) {
	out := make([]Draft, len(drafts))
	for i, d := range drafts {
		raw, err := encodeBody(d.Body)
		if err != nil {
			return nil, fmt.Errorf("draft %s: %w", d.Kind, err)
		}
		d.Body = raw
		out[i] = d
	}
	return out, nil
}

func encodeBody(body any) (json.RawMessage, error) {
	switch b := body.(type) {
	case nil:
		return json.RawMessage("{}"), nil
	case json.RawMessage:
		var out bytes.Buffer
		if err := json.Compact(&out, b); err != nil {
			return nil, err
		}
		return out.Bytes(), nil
	}
	var out bytes.Buffer
	e := json.NewEncoder(&out)
	e.SetEscapeHTML(false)
	if err := e.Encode(body); err != nil {
		return nil, err
	}
	return bytes.TrimRight(out.Bytes(), "\n"), nil
}

// stamped is a stamp, and what the book will hold of its record: the row but for its place, and the leaf.
type stamped struct {
	stamp record.Stamp
	line  int    // length of the stamp's line
	row   []byte // of the bucket rec; its place is filled in when the record is given one
	leaf  proof.Hash
}

func stampFor(raw []byte, st record.Stamp) stamped { return stampedWith(st, st.Line(), raw) }

func stampedWith(st record.Stamp, line, raw []byte) stamped {
	row := make([]byte, recHead, recHead+len(line)+len(raw))
	row = append(append(row, line...), raw...)
	return stamped{st, len(line), row, proof.LeafHash(line, newline, raw)}
}

var newline = []byte{'\n'}

// appendDrafts decides drafts within a group: all are made and judged before the first is written.
func (g *group) appendDrafts(drafts []Draft) ([]Receipt, error) {
	type madeRecord struct {
		r  *record.Record
		st stamped
	}
	now := g.s.now()
	self := Sender{Installation: g.s.id}
	receipts := make([]Receipt, len(drafts))
	made := make([]madeRecord, len(drafts))
	var ahead makeAhead
	inCall := map[string]bool{}
	for i, d := range drafts {
		if d.ID != "" {
			if !record.IsID(d.ID) {
				return nil, &Error{Code: "invalid", Field: "id", Text: "The id of what is to be kept is no UUID of version 7 or 8 in lower case. Load the page again."}
			}
			if inCall[d.ID] {
				return nil, &Error{Code: "invalid", Field: "id", Text: "Two of the records to be kept carry the same id " + d.ID + ". Give each its own."}
			}
			inCall[d.ID] = true
			f, ok, err := g.find(d.ID)
			if err != nil {
				return nil, err
			}
			if ok {
				receipts[i] = g.receipt(d.ID, "already", f.log, f.pos)
				continue
			}
		}
		r, st, err := g.makeNext(d, now, &ahead)
		if err != nil {
			return nil, err
		}
		f, err := g.permit(self, r, now)
		if err != nil {
			return nil, err
		}
		if f != nil {
			return nil, &Error{Code: "forbidden", Field: f.Field, Text: f.Text}
		}
		made[i] = madeRecord{r, st}
	}
	for i, m := range made {
		if m.r == nil {
			continue
		}
		pos, err := g.accept(m.r, m.st)
		if err != nil {
			return nil, asError(err)
		}
		receipts[i] = g.receipt(m.r.ID, "stored", m.r.Log, pos)
	}
	return receipts, nil
}

// asError turns a fault into the error a form shows.
func asError(err error) error {
	var f *record.Fault
	if errors.As(err, &f) {
		code := "invalid"
		if f.Code == "too_large" {
			code = "too_large"
		}
		return &Error{Code: code, Field: f.Field, Text: f.Text}
	}
	return err
}

func (g *group) receipt(id, state, log string, pos int64) Receipt {
	return Receipt{ID: id, State: state, Store: g.s.id, Epoch: g.s.epoch, Log: log, Pos: pos}
}

// makeAhead counts what is made in one call before any of it is accepted.
type makeAhead struct {
	clock uint64
	n     map[string]int64 // by log
}

// make gives a draft its envelope and stamp; the next thing done must be to accept it.
func (g *group) make(d Draft, now time.Time) (*record.Record, stamped, error) {
	raw, err := encodeBody(d.Body)
	if err != nil {
		return nil, stamped{}, err
	}
	d.Body = raw
	return g.makeNext(d, now, &makeAhead{})
}

func (g *group) makeNext(d Draft, now time.Time, ahead *makeAhead) (*record.Record, stamped, error) {
	if d.ID == "" {
		d.ID = newID(now)
	}
	if d.At.IsZero() {
		d.At = now
	}
	if d.Subject == "" {
		d.Subject = d.ID
	}
	seen := max(g.clock, ahead.clock)
	clock := record.NextClock(seen, now)
	n, ok := ahead.n[d.Log]
	if !ok {
		var err error
		if n, err = g.lastOwn(d.Log); err != nil {
			return nil, stamped{}, err
		}
	}
	n++
	raw := record.Write(record.Record{
		ID: d.ID, Kind: d.Kind, V: 1, Log: d.Log, Subject: d.Subject, At: d.At, Clock: clock,
		By: d.By, From: g.s.id, N: n, Body: withSeen(d.Body.(json.RawMessage), seen),
	})
	r, f := record.Parse(raw)
	if f != nil {
		return nil, stamped{}, asError(f)
	}
	if ahead.n == nil {
		ahead.n = map[string]int64{}
	}
	ahead.n[d.Log], ahead.clock = n, clock
	return r, stampFor(raw, record.Stamp{Received: now.UTC().Truncate(time.Millisecond)}), nil
}

// lastOwn gives the largest n this store used in a log.
func (g *group) lastOwn(log string) (int64, error) {
	if !g.hasLog(log) {
		return 0, nil
	}
	l, err := g.openLog(log)
	if err != nil {
		return 0, err
	}
	return g.runs(g.s.id, l.ord).last(), nil
}

// withSeen adds `seen` to a body that sets fields without it.
func withSeen(body json.RawMessage, seen uint64) json.RawMessage {
	var has struct {
		Set  json.RawMessage `json:"set"`
		Seen json.RawMessage `json:"seen"`
	}
	if seen == 0 || !bytes.Contains(body, []byte(`"set"`)) || json.Unmarshal(body, &has) != nil || has.Set == nil || has.Seen != nil {
		return body
	}
	out := append(bytes.TrimSuffix(bytes.Clone(body), []byte("}")), `,"seen":"`...)
	return append(append(out, record.ClockText(seen)...), `"}`...)
}
