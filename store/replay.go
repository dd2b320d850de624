package store

import (
	"context"
	"encoding/binary"
	"encoding/hex"
	"encoding/json"
	"errors"
	"fmt"
	"iter"
	"os"
	"path/filepath"
	"time"

	"go.etcd.io/bbolt"

	"tripwell/store/record"
)

// Origin is the store that records come from.
type Origin struct {
	Store, Org string
	Epoch      int
	Demo       bool
}

// Replayed is one record of another store as it stood there: the exact bytes of record and stamp.
type Replayed struct {
	Stamp, Record []byte
	Refused       *Refusal // of a record.refused: what was kept of it
}

// replaySlice is how many records one transaction of a replay takes.
const replaySlice = 20_000

// Replay makes a store in an empty folder out of another's records and computes its read models from nothing else: what
// its pages and exports say is what the records say. It keeps the order of each log, so their trees come out the same.
// The store answers to the name of its origin and must not be written to; the caller closes it and removes the folder.
//
// Progress tells how far the read models are; it may be nil. A record or stamp that breaks a rule is *Error code invalid.
func Replay(ctx context.Context, dir string, from Origin, now func() time.Time, people []Person, records iter.Seq2[Replayed, error], progress func(done, total int64)) (*Store, error) {
	path := filepath.Join(dir, BookFile)
	if _, err := os.Stat(path); err == nil {
		return nil, &Error{Code: "conflict", Field: "data", Text: "The folder " + dir + " holds a store already. Name an empty one."}
	}
	// Nothing here has to survive a power cut: it can be made again.
	db, err := bbolt.Open(path, 0o600, &bbolt.Options{Timeout: time.Second, FreelistType: bbolt.FreelistMapType, NoSync: true, NoGrowSync: true})
	if err != nil {
		return nil, fmt.Errorf("replay: %w", err)
	}
	s := &Store{id: from.Store, org: from.Org, epoch: from.Epoch, now: now}
	err = replayInto(ctx, s, db, from, people, records)
	if err == nil {
		err = rebuild(ctx, s, db, progress)
	}
	if err := errors.Join(err, db.Close()); err != nil {
		return nil, err
	}
	return Open(dir, Options{Now: now})
}

func replayInto(ctx context.Context, s *Store, db *bbolt.DB, from Origin, people []Person, records iter.Seq2[Replayed, error]) error {
	if err := db.Update(func(tx *bbolt.Tx) error { return replayMeta(tx, from, people) }); err != nil {
		return fmt.Errorf("replay: %w", err)
	}
	next, stop := iter.Pull2(records)
	defer stop()
	for more := true; more; {
		if err := ctx.Err(); err != nil {
			return fmt.Errorf("replay: %w", err)
		}
		err := db.Update(func(tx *bbolt.Tx) error {
			g := newGroup(s, tx)
			for range replaySlice {
				one, err, ok := next()
				if err != nil {
					return err
				}
				if more = ok; !ok {
					break
				}
				if err := g.replay(one); err != nil {
					return err
				}
			}
			return g.flush()
		})
		if err != nil {
			return err
		}
	}
	return nil
}

// replayMeta says whose store this is. Its read models are still to be computed.
func replayMeta(tx *bbolt.Tx, from Origin, people []Person) error {
	if err := makeBuckets(tx); err != nil {
		return err
	}
	values := map[string][]byte{
		string(metaStore): []byte(from.Store), string(metaOrg): []byte(from.Org), string(metaEpoch): key64(uint64(from.Epoch)),
		string(metaFormat): key64(formatVersion), string(metaModel): key64(0),
	}
	if from.Demo {
		values[string(metaDemo)] = []byte{1}
	}
	for k, v := range values {
		if err := tx.Bucket(bktMeta).Put([]byte(k), v); err != nil {
			return err
		}
	}
	for _, p := range people {
		b, err := json.Marshal(p)
		if err != nil {
			return fmt.Errorf("person %s: %w", p.ID, err)
		}
		if key := idKey(p.ID); key != nil {
			if err := tx.Bucket(bktPerson).Put(key, b); err != nil {
				return err
			}
		}
	}
	return nil
}

func (g *group) replay(one Replayed) error {
	r, f := record.Stored(one.Record)
	if f != nil {
		return &Error{Code: "invalid", Field: f.Field, Text: f.Text}
	}
	stamp, err := record.ParseStamp(one.Stamp)
	if err != nil {
		return &Error{Code: "invalid", Field: "stamp", Text: "The stamp of record " + r.ID + " cannot be read: " + err.Error() + "."}
	}
	if _, twice, err := g.find(r.ID); err != nil || twice {
		if err == nil {
			err = &Error{Code: "invalid", Field: "id", Text: "The record " + r.ID + " stands in the book twice."}
		}
		return err
	}
	st := stampedWith(stamp, one.Stamp, r.Raw)
	st.leaf = leafOf(r, one.Stamp)
	if _, err := g.place(r, st); err != nil {
		return err
	}
	if one.Refused == nil {
		return nil
	}
	v := binary.BigEndian.AppendUint16(nil, uint16(len(one.Refused.Text)))
	v = append(append(v, one.Refused.Text...), one.Refused.Bytes...)
	if err := g.tx.Bucket(bktQuar).Put(key64(g.seq), v); err != nil {
		return fmt.Errorf("keep refused record: %w", err)
	}
	sum, err := hex.DecodeString(one.Refused.SHA256)
	if err != nil || len(sum) != 32 {
		return &Error{Code: "invalid", Field: "sha256", Text: "The refusal " + r.ID + " names no SHA-256."}
	}
	return g.tx.Bucket(bktQuarSHA).Put(sum, key64(g.seq))
}
