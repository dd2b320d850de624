package store

import (
	"context"
	"crypto/sha256"
	"encoding/binary"
	"encoding/hex"
	"errors"
	"fmt"
	"hash"

	"go.etcd.io/bbolt"
	bolterrors "go.etcd.io/bbolt/errors"

	"tripwell/store/record"
)

// rebuildSlice bounds what one transaction of a rebuild holds in memory, in records; tests make it small.
var rebuildSlice = 50_000

// derivedBuckets are all that Rebuild computes: read models and counts.
func derivedBuckets() [][]byte { return append(append([][]byte{}, modelBuckets...), countBuckets...) }

// Rebuild computes all read models anew from the book. It is done in slices behind a mark in the file: until the last
// slice is written nothing can be read, and a rebuild that was cut off is done again when the store is next opened.
func (s *Store) Rebuild(ctx context.Context, progress func(done, total int64)) error {
	return s.alone(ctx, func() error {
		s.rebuilding.Store(true)
		defer s.rebuilding.Store(false)
		return rebuild(ctx, s, s.db, progress)
	})
}

var errRebuilding = &Error{Code: "unavailable", Text: "The store is computing its pages anew from the book. Try again in a moment."}

func rebuild(ctx context.Context, s *Store, db *bbolt.DB, progress func(done, total int64)) error {
	if progress == nil {
		progress = func(done, total int64) {}
	}
	if err := db.Update(clearDerived); err != nil {
		return fmt.Errorf("rebuild: %w", err)
	}
	for after, more := uint64(0), true; more; {
		if err := ctx.Err(); err != nil {
			return fmt.Errorf("rebuild: %w", err)
		}
		err := db.Update(func(tx *bbolt.Tx) (err error) {
			after, more, err = rebuildFrom(s, tx, after, progress)
			return err
		})
		if err != nil {
			return fmt.Errorf("rebuild: %w", err)
		}
	}
	return nil
}

// clearDerived empties all that is computed and marks the store as being rebuilt (model 0).
func clearDerived(tx *bbolt.Tx) error {
	for _, name := range derivedBuckets() {
		if err := tx.DeleteBucket(name); err != nil && !errors.Is(err, bolterrors.ErrBucketNotFound) {
			return err
		}
		if _, err := tx.CreateBucket(name); err != nil {
			return err
		}
	}
	return tx.Bucket(bktMeta).Put(metaModel, key64(0))
}

// rebuildFrom folds one slice of the book after a seq.
func rebuildFrom(s *Store, tx *bbolt.Tx, after uint64, progress func(done, total int64)) (last uint64, more bool, err error) {
	g := newGroup(s, tx)
	total, end := g.seq, after+uint64(rebuildSlice)
	c := g.recs.Cursor()
	k, v := c.Seek(key64(after + 1))
	// Decoding is most of the work: the next part is decoded while this one is folded.
	var ahead chan []reread
	seen := newBodies()
	for {
		var part []reread
		for ; k != nil && len(part) < rereadPart && binary.BigEndian.Uint64(k) <= end; k, v = c.Next() {
			part = append(part, reread{seq: binary.BigEndian.Uint64(k), value: v})
		}
		ready := decode(part, seen)
		if ahead != nil {
			for _, one := range <-ahead {
				if err := g.refold(one); err != nil {
					<-ready // it reads the file, which must not be closed under it
					return after, false, err
				}
				after = one.seq
			}
			progress(int64(after), int64(total))
		}
		if len(part) == 0 {
			break
		}
		ahead = ready
	}
	more = k != nil
	if !more {
		if more, err = g.fold.workOff(rebuildSlice); err != nil {
			return after, false, err
		}
	}
	if err := g.fold.flush(); err != nil {
		return after, false, err
	}
	if err := g.flushCounts(); err != nil {
		return after, false, err
	}
	if more {
		return after, true, nil
	}
	return after, false, tx.Bucket(bktMeta).Put(metaModel, key64(modelMark))
}

// rereadPart is how many records are decoded at a time.
const rereadPart = 512

// reread is a record of the book on its way into the fold.
type reread struct {
	seq   uint64
	value []byte // points into the file
	ord   uint32
	r     *record.Record
	stamp record.Stamp
	err   error
}

// decode reads records on another goroutine; one answer comes when all are read.
func decode(part []reread, seen *bodies) chan []reread {
	ready := make(chan []reread, 1)
	go func() {
		for i := range part {
			part[i].decode(seen)
		}
		ready <- part
	}()
	return ready
}

func (one *reread) decode(seen *bodies) {
	k, err := readRec(one.value)
	if err != nil {
		one.err = fmt.Errorf("record at %d: %w", one.seq, err)
		return
	}
	r, f := record.Reread(k.raw)
	if f != nil {
		one.err = fmt.Errorf("record at %d: %w", one.seq, f)
		return
	}
	one.r, one.ord = r, k.ord
	if one.stamp, err = record.ParseStamp(k.stamp); err != nil {
		one.err = fmt.Errorf("record %s: %w", r.ID, err)
		return
	}
	seen.read(r)
}

// refold computes what one record of the book adds to what is derived.
func (g *group) refold(one reread) error {
	if one.err != nil {
		return one.err
	}
	g.seq = one.seq
	if err := g.fold.record(one.r, one.stamp, one.seq); err != nil {
		return fmt.Errorf("record %s at %d: %w", one.r.ID, one.seq, err)
	}
	return g.note(one.r, one.stamp, one.ord)
}

// ViewHash is the SHA-256 over (key, value) of every bucket that is computed from the book.
func (s *Store) ViewHash() (sum string, err error) {
	err = s.view(func(tx *bbolt.Tx) error {
		sum, _, err = viewHash(tx)
		return err
	})
	return sum, err
}

// viewHash also gives the hash of each bucket, to name the one that differs.
func viewHash(tx *bbolt.Tx) (whole string, each map[string]string, err error) {
	all, each := sha256.New(), map[string]string{}
	for _, name := range derivedBuckets() {
		h := sha256.New()
		if err := hashBucket(h, tx.Bucket(name)); err != nil {
			return "", nil, fmt.Errorf("hash %s: %w", name, err)
		}
		sum := h.Sum(nil)
		each[string(name)] = hex.EncodeToString(sum)
		hashPair(all, name, sum)
	}
	return hex.EncodeToString(all.Sum(nil)), each, nil
}

func hashBucket(h hash.Hash, b *bbolt.Bucket) error {
	if b == nil {
		return fmt.Errorf("the bucket is not there")
	}
	return b.ForEach(func(k, v []byte) error {
		hashPair(h, k, v)
		return nil
	})
}

func hashPair(h hash.Hash, k, v []byte) {
	var n [8]byte
	binary.BigEndian.PutUint32(n[:4], uint32(len(k)))
	binary.BigEndian.PutUint32(n[4:], uint32(len(v)))
	h.Write(n[:])
	h.Write(k)
	h.Write(v)
}
