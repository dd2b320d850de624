package store

import (
	"bytes"
	"encoding/base64"
	"encoding/binary"
	"fmt"
	"strconv"
	"strings"

	"go.etcd.io/bbolt"
)

// Pulled is one page of a log. Snapshot: the cursor is of another store or epoch. NotYours: the log is not allowed.
// BackedUp: the log's first so many records are in a checked backup too.
type Pulled struct {
	Records  []PulledRecord `json:"records"`
	Next     string         `json:"next"`
	More     bool           `json:"more"`
	BackedUp int64          `json:"backed_up"`
	Snapshot bool           `json:"snapshot,omitempty"`
	NotYours bool           `json:"not_yours,omitempty"`
}

// PulledRecord holds the exact bytes of stamp and record as JSON strings.
type PulledRecord struct {
	Pos    int64  `json:"pos"`
	Stamp  string `json:"stamp"`
	Record string `json:"record"`
}

const (
	pullMost  = 1_000   // records of a page
	pullBytes = 4 << 20 // bytes of a page; one record always fits
)

// Ask gives receipts of ids without bodies; unknown ids, and those of logs outside the scope, are left out.
func (s *Store) Ask(scope Scope, ids []string) ([]Receipt, error) {
	receipts := []Receipt{}
	err := s.view(func(tx *bbolt.Tx) error {
		for _, id := range ids {
			key := idKey(id)
			if key == nil {
				continue
			}
			seq := tx.Bucket(bktID).Get(key)
			if seq == nil {
				continue
			}
			k, err := readRec(tx.Bucket(bktRec).Get(seq))
			if err != nil {
				return fmt.Errorf("ask %s: %w", id, err)
			}
			log := string(tx.Bucket(bktNames).Get(key32(k.ord)))
			if scope.mayReadWhole(log) {
				receipts = append(receipts, Receipt{ID: id, State: "stored", Store: s.id, Epoch: s.epoch, Log: log, Pos: k.pos})
			}
		}
		return nil
	})
	if err != nil {
		return nil, err
	}
	return receipts, nil
}

// Pull gives records of one log after a cursor ("" = from the first), as their exact bytes. limit 0 or less means as
// many as a page holds.
func (s *Store) Pull(scope Scope, log, after string, limit int) (Pulled, error) {
	p := Pulled{Records: []PulledRecord{}}
	if !scope.mayReadWhole(log) {
		p.NotYours = true
		return p, nil
	}
	pos, ok := s.readCursor(after)
	if !ok {
		p.Snapshot = true
		return p, nil
	}
	if limit <= 0 || limit > pullMost {
		limit = pullMost
	}
	err := s.view(func(tx *bbolt.Tx) error {
		covered, err := backedUp(tx)
		if err != nil {
			return err
		}
		p.BackedUp = covered[log]
		v := tx.Bucket(bktLogs).Get([]byte(log))
		if v == nil {
			if pos > 0 {
				p.Snapshot = true
			}
			p.Next = s.cursor(0)
			return nil
		}
		ord, edge, err := readLog(v)
		if err != nil {
			return fmt.Errorf("pull %s: %w", log, err)
		}
		if pos > edge.Size { // a cursor this store never gave
			p.Snapshot = true
			return nil
		}
		return s.pullPage(tx, &p, ord, edge.Size, pos, limit)
	})
	if err != nil {
		return Pulled{}, err
	}
	return p, nil
}

func (s *Store) pullPage(tx *bbolt.Tx, p *Pulled, ord uint32, size, pos int64, limit int) error {
	recs, c, prefix := tx.Bucket(bktRec), tx.Bucket(bktLog).Cursor(), key32(ord)
	total := 0
	for k, v := c.Seek(logKey(ord, pos+1)); k != nil && bytes.HasPrefix(k, prefix) && len(p.Records) < limit && total < pullBytes; k, v = c.Next() {
		rec, err := readRec(recs.Get(v[:8]))
		if err != nil {
			return fmt.Errorf("pull: %w", err)
		}
		pos = int64(binary.BigEndian.Uint64(k[4:]))
		total += len(rec.stamp) + len(rec.raw)
		p.Records = append(p.Records, PulledRecord{Pos: pos, Stamp: string(rec.stamp), Record: string(rec.raw)})
	}
	p.Next, p.More = s.cursor(pos), pos < size
	return nil
}

// cursor writes a place in a log of this store and epoch; it means nothing to whoever keeps it.
func (s *Store) cursor(pos int64) string {
	return base64.RawURLEncoding.EncodeToString(fmt.Appendf(nil, "%s %d %d", s.id, s.epoch, pos))
}

func (s *Store) readCursor(c string) (pos int64, ok bool) {
	if c == "" {
		return 0, true
	}
	b, err := base64.RawURLEncoding.DecodeString(c)
	f := strings.Split(string(b), " ")
	if err != nil || len(f) != 3 || f[0] != s.id || f[1] != strconv.Itoa(s.epoch) {
		return 0, false
	}
	pos, err = strconv.ParseInt(f[2], 10, 64)
	return pos, err == nil && pos >= 0
}

// LogHead is the size and RFC 6962 root of one log.
type LogHead struct {
	Log  string `json:"log"`
	Size int64  `json:"size"`
	Root string `json:"root"` // base64
}

// Logs lists the logs the scope may read, by name.
func (v *View) Logs() ([]LogHead, error) {
	all, err := logHeads(v.tx)
	if err != nil {
		return nil, err
	}
	mine := []LogHead{}
	for _, h := range all {
		if v.scope.mayRead(h.Log) {
			mine = append(mine, h)
		}
	}
	return mine, nil
}

// Cursor gives the cursor that continues a log after what this view sees of it.
func (v *View) Cursor(log string) (string, error) {
	value := v.tx.Bucket(bktLogs).Get([]byte(log))
	if value == nil {
		return v.s.cursor(0), nil
	}
	_, edge, err := readLog(value)
	if err != nil {
		return "", fmt.Errorf("log %s: %w", log, err)
	}
	return v.s.cursor(edge.Size), nil
}

func logHeads(tx *bbolt.Tx) ([]LogHead, error) {
	var all []LogHead
	c := tx.Bucket(bktLogs).Cursor()
	for name, v := c.First(); name != nil; name, v = c.Next() {
		_, edge, err := readLog(v)
		if err != nil {
			return nil, fmt.Errorf("log %s: %w", name, err)
		}
		all = append(all, LogHead{Log: string(name), Size: edge.Size, Root: edge.Root().String()})
	}
	return all, nil
}

// Record gives the exact bytes of a record and its stamp.
func (v *View) Record(id string) (rec, stamp []byte, err error) {
	missing := &Error{Code: "not_found", Field: "id", Text: "There is no such record here, or it is not yours to see."}
	key := idKey(id)
	if key == nil {
		return nil, nil, missing
	}
	seq := v.tx.Bucket(bktID).Get(key)
	if seq == nil {
		return nil, nil, missing
	}
	k, err := readRec(v.tx.Bucket(bktRec).Get(seq))
	if err != nil {
		return nil, nil, fmt.Errorf("record %s: %w", id, err)
	}
	if !v.scope.mayRead(string(v.tx.Bucket(bktNames).Get(key32(k.ord)))) {
		return nil, nil, missing
	}
	if is, err := v.showsID(id); err != nil {
		return nil, nil, err
	} else if !is {
		return nil, nil, missing
	}
	return bytes.Clone(k.raw), bytes.Clone(k.stamp), nil
}
