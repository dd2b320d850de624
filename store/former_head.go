package store

import (
	"encoding/binary"
	"encoding/json"
	"fmt"
	"runtime/debug"
	"slices"
	"sort"

	"go.etcd.io/bbolt"

	"tripwell/store/proof"
)

// FormerHead is a head that was signed here before a backup took the book's place, and that covers more than the backup held. The
// records beyond are gone from the book; what it agrees with is proved.
type FormerHead struct {
	Epoch int         `json:"-"`
	Seq   uint64      `json:"-"`
	Note  string      `json:"note"`
	Logs  []FormerLog `json:"logs"`
}

// FormerLog is how far a log went under a former head, and how much of that is in the book still: a proof (RFC 6962, 2.1.2) leads
// from the root of the first Kept records to the root of all Size.
type FormerLog struct {
	Log   string   `json:"log"`
	Size  int64    `json:"size"`
	Root  string   `json:"root"`
	Kept  int64    `json:"kept"`
	Proof []string `json:"proof"`
}

// formerLines bounds what is kept of the heads of one former book: lines of logs, the newest heads first.
const formerLines = 50_000

// heads reads the heads of the book that stood in the folder which the backup does not know. A damaged page ends in a fault of memory,
// which must not end the restore: then nothing is known of them.
func (s *formerBook) heads(backup *Store) (list []FormerHead, err error) {
	if s.db == nil {
		return nil, nil
	}
	defer debug.SetPanicOnFault(debug.SetPanicOnFault(true))
	defer func() {
		if recover() != nil {
			list, err = nil, nil
		}
	}()
	err = backup.view(func(now *bbolt.Tx) error {
		return s.db.View(func(was *bbolt.Tx) error {
			list, err = formerHeads(was, now)
			return err
		})
	})
	if err != nil {
		return nil, nil // the book is damaged: that is what restoring is for
	}
	return list, nil
}

func formerHeads(was, now *bbolt.Tx) (list []FormerHead, err error) {
	former, known := was.Bucket(bktHeads), now.Bucket(bktHeads)
	if former == nil || known == nil {
		return nil, nil
	}
	kept := map[string]int64{}
	lines := 0
	c := former.Cursor()
	for key, note := c.Last(); key != nil && lines < formerLines; key, note = c.Prev() {
		if len(key) != 12 || string(known.Get(key)) == string(note) {
			continue
		}
		h := FormerHead{Epoch: int(binary.BigEndian.Uint32(key)), Seq: binary.BigEndian.Uint64(key[4:]), Note: string(note)}
		head, err := (&View{tx: was}).HeadAt(h.Seq)
		if err != nil {
			return nil, err
		}
		for _, l := range head.Logs {
			one, err := formerLog(was, now, l, kept)
			if err != nil {
				return nil, err
			}
			h.Logs = append(h.Logs, one)
		}
		lines += len(h.Logs)
		list = append(list, h)
	}
	slices.Reverse(list)
	return list, nil
}

// formerLog proves how much of a log is in both books. kept remembers it by log.
func formerLog(was, now *bbolt.Tx, l proof.LogRoot, kept map[string]int64) (out FormerLog, err error) {
	out = FormerLog{Log: l.Log, Size: l.Size, Root: l.Root.String(), Proof: []string{}}
	hashes, size, err := hashesOf(was, l.Log)
	if err != nil {
		return out, err
	}
	both, done := kept[l.Log]
	if !done {
		here, there, err := hashesOf(now, l.Log)
		if err != nil {
			return out, err
		}
		if both, err = sameRecords(min(size, there), hashes, here); err != nil {
			return out, err
		}
		kept[l.Log] = both
	}
	if out.Kept = min(both, l.Size); out.Kept == 0 || out.Kept == l.Size {
		return out, nil
	}
	p, err := proof.Consistency(l.Size, out.Kept, hashes)
	for _, h := range p {
		out.Proof = append(out.Proof, h.String())
	}
	return out, err
}

// hashesOf serves the tree of a log; one that is not there has no records.
func hashesOf(tx *bbolt.Tx, log string) (proof.Stored, int64, error) {
	row := tx.Bucket(bktLogs).Get([]byte(log))
	if row == nil {
		return nil, 0, nil
	}
	ord, edge, err := readLog(row)
	if err != nil {
		return nil, 0, fmt.Errorf("log %s: %w", log, err)
	}
	return storedHashes(tx, ord), edge.Size, nil
}

// sameRecords counts the first records that two trees share, of at most so many.
func sameRecords(most int64, a, b proof.Stored) (n int64, err error) {
	more := sort.Search(int(most), func(i int) bool {
		x, bad := proof.Root(int64(i)+1, a)
		y, worse := proof.Root(int64(i)+1, b)
		for _, e := range []error{bad, worse} {
			if e != nil {
				err = e
			}
		}
		return x != y
	})
	return int64(more), err
}

// keepFormer writes down what is known of the heads of the book that stood in the folder.
func (g *group) keepFormer(list []FormerHead) error {
	for _, h := range list {
		if err := g.put(bktFormer, headKey(h.Epoch, h.Seq), mustJSON(h)); err != nil {
			return err
		}
	}
	return nil
}

// FormerHeads lists the heads signed here over records that a restore left behind, oldest first. Whoever is shown a line of one must
// have a scope for its log.
func (v *View) FormerHeads() (list []FormerHead, err error) {
	err = v.tx.Bucket(bktFormer).ForEach(func(k, row []byte) error {
		h := FormerHead{}
		if len(k) != 12 || json.Unmarshal(row, &h) != nil {
			return errPacked
		}
		h.Epoch, h.Seq = int(binary.BigEndian.Uint32(k)), binary.BigEndian.Uint64(k[4:])
		list = append(list, h)
		return nil
	})
	return list, err
}
