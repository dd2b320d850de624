package store

import (
	"context"
	"encoding/json"
	"fmt"
	"strings"
	"time"

	"tripwell/store/proof"
)

// LogProof is a log as it stands, with what shows that it goes on from what somebody saw of it before.
type LogProof struct {
	LogHead
	From  int64
	Proof []proof.Hash // of consistency from From to Size; none where From is 0, Size or beyond it
	Own   *LeafProof   // where a place was asked for and the log goes that far
}

// LeafProof shows that a record stands at a place of a log: with its stamp, the record's bytes make the leaf.
type LeafProof struct {
	Pos   int64
	Stamp string
	Proof []proof.Hash
}

// LogProof proves a log of the scope from an earlier size on, and the record at place own (0 = none).
func (v *View) LogProof(log string, from, own int64) (p LogProof, err error) {
	ord, edge, err := v.readableLog(log)
	if err != nil {
		return p, err
	}
	p = LogProof{LogHead: LogHead{Log: log, Size: edge.Size, Root: edge.Root().String()}, From: from}
	stored := storedHashes(v.tx, ord)
	if from > 0 && from < edge.Size {
		if p.Proof, err = proof.Consistency(edge.Size, from, stored); err != nil {
			return p, fmt.Errorf("log %s from %d: %w", log, from, err)
		}
	}
	if own < 1 || own > edge.Size {
		return p, nil
	}
	leaf := v.tx.Bucket(bktLog).Get(logKey(ord, own))
	if len(leaf) < 8 {
		return p, fmt.Errorf("log %s at %d: its leaf is not there", log, own)
	}
	kept, err := readRec(v.tx.Bucket(bktRec).Get(leaf[:8]))
	if err != nil {
		return p, fmt.Errorf("log %s at %d: %w", log, own, err)
	}
	p.Own = &LeafProof{Pos: own, Stamp: string(kept.stamp)}
	if p.Own.Proof, err = proof.Inclusion(edge.Size, own-1, stored); err != nil {
		return p, fmt.Errorf("log %s at %d: %w", log, own, err)
	}
	return p, nil
}

func (v *View) readableLog(log string) (uint32, proof.Edge, error) {
	row := v.tx.Bucket(bktLogs).Get([]byte(log))
	if row == nil || !v.scope.mayRead(log) {
		return 0, proof.Edge{}, &Error{Code: "not_found", Field: "log", Text: "There is no such log here, or it is not yours to see."}
	}
	if !v.scope.mayReadWhole(log) {
		return 0, proof.Edge{}, errPartOfLog
	}
	ord, edge, err := readLog(row)
	if err != nil {
		return 0, edge, fmt.Errorf("log %s: %w", log, err)
	}
	return ord, edge, nil
}

// HeadDoubt is what a phone knew of a log and does not find continued here: either the book's file was changed or replaced by an
// older one, or the phone's memory is wrong. It is no record, for the book may be what is in doubt: a note beside it, one a phone
// and log, gone when the phone finds its head continued again or a manager has looked into it.
type HeadDoubt struct {
	Log          string    `json:"-"`
	Installation string    `json:"-"`
	Size         int64     `json:"size"`
	Root         string    `json:"root"` // base64
	Person       string    `json:"person"`
	At           time.Time `json:"at"`
}

func doubtKey(installation, log string) []byte { return []byte("doubt|" + installation + "|" + log) }

// TakeHead holds a head that a phone kept against the log and tells whether the log goes on from it. One that does not is kept for
// the manager; one that does takes an earlier doubt of that phone away.
func (s *Store) TakeHead(ctx context.Context, scope Scope, d HeadDoubt) (holds bool, err error) {
	if _, err := proof.ParseHash(d.Root); err != nil || d.Size < 1 {
		return false, &Error{Code: "invalid", Field: "root", Text: "A head is a size from 1 on and a root in base64. Send the head as it was given."}
	}
	noted := false
	err = s.View(scope, func(v *View) error {
		ord, edge, err := v.readableLog(d.Log)
		if err != nil {
			return err
		}
		noted = v.tx.Bucket(bktSetting).Get(doubtKey(d.Installation, d.Log)) != nil
		if d.Size > edge.Size {
			return nil
		}
		root, err := proof.Root(d.Size, storedHashes(v.tx, ord))
		holds = root.String() == d.Root
		return err
	})
	if err != nil || holds && !noted {
		return holds, err
	}
	return holds, s.do(ctx, 1, func(g *group) error {
		if holds {
			return g.drop(bktSetting, doubtKey(d.Installation, d.Log))
		}
		d.At = s.now()
		return g.putJSON(bktSetting, doubtKey(d.Installation, d.Log), d)
	})
}

// HeadDoubts lists what phones reported, of logs the scope may see.
func (v *View) HeadDoubts() (list []HeadDoubt, err error) {
	err = v.scan(bktSetting, []byte("doubt|"), func(k, raw []byte) error {
		parts := strings.Split(string(k), "|")
		if len(parts) != 3 || !v.scope.mayRead(parts[2]) {
			return nil
		}
		d := HeadDoubt{Installation: parts[1], Log: parts[2]}
		if err := json.Unmarshal(raw, &d); err != nil {
			return fmt.Errorf("doubt of %s: %w", d.Installation, err)
		}
		list = append(list, d)
		return nil
	})
	return list, err
}

// DropHeadDoubt takes a phone's doubt of a log away once a manager has looked into it; one that is gone already changes nothing.
func (s *Store) DropHeadDoubt(ctx context.Context, scope Scope, installation, log string) error {
	if !scope.mayRead(log) {
		return &Error{Code: "not_found", Field: "log", Text: "There is no such log here, or it is not yours to see."}
	}
	return s.do(ctx, 1, func(g *group) error {
		key := doubtKey(installation, log)
		if g.tx.Bucket(bktSetting).Get(key) == nil {
			return nil
		}
		return g.drop(bktSetting, key)
	})
}
