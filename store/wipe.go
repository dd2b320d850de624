package store

import (
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"io/fs"
	"os"
	"time"

	"go.etcd.io/bbolt"
)

// bbolt writes every changed page to another place and leaves the old one as it was until something else needs the room.
// Where something must be gone (a sealed record, the name of a person), the free pages of the file are overwritten with
// zeros. A note in meta says that this is still to be done, so that a store which was cut off does it when next opened.
//
// A page may be overwritten when it is free and no reader still stands on an earlier state of the book, which is exactly when
// bbolt itself would use it again.

// wipeLeft is what is still to be done after bytes were dropped.
type wipeLeft struct {
	Files []string `json:"files,omitempty"` // names of photos and certificates to remove
}

var metaWipe = []byte("wipe")

// wipeWait is how long readers are waited for before pages are served again.
const wipeWait = 2 * time.Second

// noteWipe notes in the group's transaction that free pages hold what must go.
func (g *group) noteWipe(more wipeLeft) error {
	left, err := readWipe(g.tx)
	if err != nil {
		return err
	}
	if left == nil {
		left = &wipeLeft{}
	}
	left.Files = append(left.Files, more.Files...)
	return g.putJSON(bktMeta, metaWipe, left)
}

func readWipe(tx *bbolt.Tx) (*wipeLeft, error) {
	raw := tx.Bucket(bktMeta).Get(metaWipe)
	if raw == nil {
		return nil, nil
	}
	left := new(wipeLeft)
	if err := json.Unmarshal(raw, left); err != nil {
		return nil, fmt.Errorf("note of what is to be wiped: %w", err)
	}
	return left, nil
}

// Wipe removes the files and overwrites the free pages that a note in the store names; without one it does nothing. Readers
// that began earlier are waited for, for half a minute at most; done is false where they were not through by then.
func (s *Store) Wipe(ctx context.Context) (done bool, err error) {
	for until := time.Now().Add(15 * wipeWait); ; {
		err := s.alone(ctx, func() error {
			done, err = s.wipeNow()
			return err
		})
		if err != nil || done || time.Now().After(until) {
			return done, err
		}
		select {
		case <-ctx.Done():
			return false, nil
		case <-time.After(wipeWait / 4):
		}
	}
}

// wipeNow waits for readers while no new ones are let in. It runs where nobody writes.
func (s *Store) wipeNow() (done bool, err error) {
	left := false
	if err := s.db.View(func(tx *bbolt.Tx) error {
		left = tx.Bucket(bktMeta).Get(metaWipe) != nil
		return nil
	}); err != nil || !left {
		return true, err
	}
	s.rebuilding.Store(true)
	defer s.rebuilding.Store(false)
	for until := time.Now().Add(wipeWait); s.reading.Load() > 0; time.Sleep(5 * time.Millisecond) {
		if time.Now().After(until) {
			return false, nil
		}
	}
	return true, s.wipe()
}

// wipe needs a store that nobody reads or writes.
func (s *Store) wipe() error {
	if err := s.faults.at("wiping"); err != nil {
		return err
	}
	return s.db.Update(func(tx *bbolt.Tx) error {
		left, err := readWipe(tx)
		if err != nil || left == nil {
			return err
		}
		for _, name := range left.Files {
			if err := os.Remove(s.photoPath(name)); err != nil && !errors.Is(err, fs.ErrNotExist) {
				return fmt.Errorf("remove photo: %w", err)
			}
		}
		if err := overwriteFree(tx); err != nil {
			return err
		}
		if err := s.faults.at("wiped"); err != nil {
			return err
		}
		return tx.Bucket(bktMeta).Delete(metaWipe)
	})
}

// overwriteFree writes zeros over the free pages of the file and has them on the disk before it returns.
func overwriteFree(tx *bbolt.Tx) (err error) {
	f, err := os.OpenFile(tx.DB().Path(), os.O_RDWR, 0)
	if err != nil {
		return fmt.Errorf("wipe: %w", err)
	}
	defer func() { err = errors.Join(err, f.Close()) }()
	size := int64(tx.DB().Info().PageSize)
	zeros := make([]byte, size)
	for id := 2; ; id++ {
		page, err := tx.Page(id)
		if err != nil {
			return fmt.Errorf("wipe: %w", err)
		}
		if page == nil {
			break
		}
		if page.Type == "free" {
			if _, err := f.WriteAt(zeros, int64(id)*size); err != nil {
				return fmt.Errorf("wipe: %w", err)
			}
			continue
		}
		id += page.OverflowCount
	}
	return f.Sync()
}
