package store

import (
	"bytes"
	"encoding/binary"
	"fmt"
	"maps"
	"slices"

	"go.etcd.io/bbolt"

	"tripwell/store/record"
)

// maxRuns bounds what is remembered of one installation's numbers in one log; beyond it the two lowest runs are joined.
const maxRuns = 512

// runs are the n seen of one installation in one log, as from–to pairs in order.
type runs struct {
	pairs []int64
	dirty bool
}

func readRuns(v []byte) *runs {
	r := &runs{}
	for ; len(v) >= 8; v = v[8:] {
		r.pairs = append(r.pairs, int64(binary.BigEndian.Uint64(v)))
	}
	return r
}

func (r *runs) bytes() []byte {
	b := make([]byte, 0, 8*len(r.pairs))
	for _, n := range r.pairs {
		b = binary.BigEndian.AppendUint64(b, uint64(n))
	}
	return b
}

// last gives the largest n seen, 0 for none.
func (r *runs) last() int64 {
	if len(r.pairs) == 0 {
		return 0
	}
	return r.pairs[len(r.pairs)-1]
}

// add notes n and reports whether it had been seen.
func (r *runs) add(n int64) (again bool) {
	p := r.pairs
	if len(p) > 0 && n == p[len(p)-1]+1 { // the ordinary case
		p[len(p)-1] = n
		r.dirty = true
		return false
	}
	i := 0
	for i < len(p) && p[i+1] < n {
		i += 2
	}
	if i < len(p) && p[i] <= n {
		return true
	}
	r.dirty = true
	left, right := i > 0 && p[i-1] == n-1, i < len(p) && p[i] == n+1
	switch {
	case left && right:
		r.pairs = slices.Delete(p, i-1, i+1)
	case left:
		p[i-1] = n
	case right:
		p[i] = n
	default:
		r.pairs = slices.Insert(p, i, n, n)
	}
	if len(r.pairs) > 2*maxRuns {
		r.pairs = slices.Delete(r.pairs, 1, 3)
	}
	return false
}

// gaps counts the numbers below the largest that were never seen.
func (r *runs) gaps() int64 {
	missing, after := int64(0), int64(0)
	for i := 0; i < len(r.pairs); i += 2 {
		missing += r.pairs[i] - after - 1
		after = r.pairs[i+1]
	}
	return missing
}

func (g *group) runs(installation string, ord uint32) *runs {
	key := string(countKey(installation, ord))
	if r := g.counts[key]; r != nil {
		return r
	}
	r := readRuns(g.tx.Bucket(bktCount).Get([]byte(key)))
	g.counts[key] = r
	return r
}

// count notes a record's n. An n that was taken refuses nothing: it marks a phone that was cloned or restored.
func (g *group) count(r *record.Record, ord uint32) error {
	if !g.runs(r.From, ord).add(r.N) {
		return nil
	}
	g.reused = true
	if err := g.tx.Bucket(bktReused).Put(reusedKey(r.From, ord, r.N, r.ID), []byte{}); err != nil {
		return fmt.Errorf("note reused n of record %s: %w", r.ID, err)
	}
	return nil
}

func (g *group) flushCounts() error {
	bucket := g.tx.Bucket(bktCount)
	for _, key := range slices.Sorted(maps.Keys(g.counts)) {
		if r := g.counts[key]; r.dirty {
			if err := bucket.Put([]byte(key), r.bytes()); err != nil {
				return fmt.Errorf("write count: %w", err)
			}
		}
	}
	return nil
}

// WasCopied reports whether an installation ever used one n for two records: it was copied or restored.
func (s *Store) WasCopied(installation string) (copied bool, err error) {
	prefix := idKey(installation)
	if prefix == nil {
		return false, nil
	}
	err = s.view(func(tx *bbolt.Tx) error {
		k, _ := tx.Bucket(bktReused).Cursor().Seek(prefix)
		copied = bytes.HasPrefix(k, prefix)
		return nil
	})
	return copied, err
}
