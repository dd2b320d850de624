package store

import (
	"context"
	"encoding/binary"
	"fmt"
	"sort"

	"go.etcd.io/bbolt"

	"tripwell/store/proof"
)

// KeptHead is a head that was signed here, and how many records the book held then.
type KeptHead struct {
	Epoch int
	Seq   uint64
	Note  string // signed text
}

// keepHead remembers a head that is about to be handed out, so that a later bundle can show that it still holds. A head
// signed anew over the same records is the same note, and is kept once.
func (s *Store) keepHead(seq uint64, note string) error {
	key := headKey(s.epoch, seq)
	known := false
	err := s.view(func(tx *bbolt.Tx) error {
		known = tx.Bucket(bktHeads).Get(key) != nil
		return nil
	})
	if err != nil || known {
		return err
	}
	return s.do(context.Background(), 1, func(g *group) error { return g.put(bktHeads, key, []byte(note)) })
}

func headKey(epoch int, seq uint64) []byte {
	return binary.BigEndian.AppendUint64(key32(uint32(epoch)), seq)
}

// KeptHeads lists the heads signed here, oldest first. They name no site, so every scope may see them.
func (v *View) KeptHeads() (heads []KeptHead, err error) {
	err = v.tx.Bucket(bktHeads).ForEach(func(k, note []byte) error {
		if len(k) != 12 {
			return errPacked
		}
		heads = append(heads, KeptHead{int(binary.BigEndian.Uint32(k)), binary.BigEndian.Uint64(k[4:]), string(note)})
		return nil
	})
	return heads, err
}

// HeadAt gives sizes and roots of all logs as they were when the book held seq records. It is what a head signed then
// covers; whoever is shown a part of it must have a scope for that part.
func (v *View) HeadAt(seq uint64) (h proof.Head, err error) {
	c := v.tx.Bucket(bktLogs).Cursor()
	for name, row := c.First(); name != nil; name, row = c.Next() {
		ord, edge, err := readLog(row)
		if err != nil {
			return h, fmt.Errorf("log %s: %w", name, err)
		}
		size := v.sizeAt(ord, edge.Size, seq)
		if size == 0 {
			continue
		}
		root := edge.Root()
		if size != edge.Size {
			if root, err = proof.Root(size, storedHashes(v.tx, ord)); err != nil {
				return h, fmt.Errorf("log %s: %w", name, err)
			}
		}
		h.Logs = append(h.Logs, proof.LogRoot{Log: string(name), Size: size, Root: root})
	}
	return h, nil
}

// sizeAt gives how many records of a log came among the first seq of the book.
func (v *View) sizeAt(ord uint32, size int64, seq uint64) int64 {
	leaves := v.tx.Bucket(bktLog)
	return int64(sort.Search(int(size), func(i int) bool {
		row := leaves.Get(logKey(ord, int64(i)+1))
		return len(row) < 8 || binary.BigEndian.Uint64(row) > seq
	}))
}
